"""The renewal count against quadrature, naive convolution, plain simulation and a halved step."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from scipy.integrate import quad

from reliability.stats import count_positions
from reliability.stats.count_positions import _text_codes
from reliability.stats.counts import CountDistribution, CountForecast, forecast_counts
from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.posterior import KnownWeibull, weibull_posterior
from reliability.stats.renewal import renewal_function

WEEKS = np.arange(0, 92, 7)
LIFE = KnownWeibull(2.3, 70.0)


def survival(age: float) -> float:
    return float(np.exp(-((age / 70.0) ** 2.3)))


def density(age: float) -> float:
    return 2.3 / 70.0 * (age / 70.0) ** 1.3 * survival(age)


def tails_by_quadrature(age: float, horizon: float) -> list[float]:
    """P(N >= 1), P(N >= 2), P(N >= 3) of one position by nested adaptive quadrature."""

    def twice_new(left: float) -> float:
        return quad(lambda u: density(u) * (1 - survival(left - u)), 0, left)[0]

    rest = survival(age)
    once = 1 - survival(age + horizon) / rest
    twice = quad(lambda u: density(age + u) / rest * (1 - survival(horizon - u)), 0, horizon)[0]
    thrice = quad(lambda u: density(age + u) / rest * twice_new(horizon - u), 0, horizon)[0]
    return [once, twice, thrice]


@pytest.mark.parametrize(("age", "horizon"), [(0.0, 91.0), (25.0, 91.0), (110.0, 91.0), (40.0, 30.0)])
def test_one_position_equals_nested_quadrature(age: float, horizon: float) -> None:
    pmf = forecast_counts(LIFE, [age], horizon, draws=1, cells=96).failures.pmf
    tails = 1 - np.cumsum(pmf)
    assert tails[:3] == pytest.approx(tails_by_quadrature(age, horizon), abs=2e-4)


def test_a_sum_equals_the_convolution_of_its_members() -> None:
    ages = [0.0, 5.0, 40.0, 40.0, 90.0, 130.0]
    expected = np.array([1.0])
    for age in ages:
        expected = np.convolve(expected, forecast_counts(LIFE, [age], 91.0, draws=1, cells=48).failures.pmf)
    found = forecast_counts(LIFE, ages, 91.0, draws=1, cells=48).failures.pmf
    assert found[:15] == pytest.approx(expected[:15], abs=1e-8)


def test_weights_are_as_good_as_repetition() -> None:
    ages, weights = [3.0, 30.0, 80.0], [4, 1, 7]
    grouped = forecast_counts(LIFE, ages, 91.0, weights=weights, draws=1, windows=WEEKS)
    single = forecast_counts(LIFE, np.repeat(ages, weights), 91.0, draws=1, windows=WEEKS)
    assert grouped.failures.pmf == pytest.approx(single.failures.pmf, abs=1e-9)
    assert grouped.by_window[3].failures.pmf == pytest.approx(single.by_window[3].failures.pmf, abs=1e-9)


@pytest.mark.parametrize(("shape", "scale"), [(0.5, 60.0), (0.7, 30.0), (1.0, 40.0), (2.3, 70.0), (6.0, 25.0)])
def test_new_parts_fail_as_often_as_the_renewal_function_says(shape: float, scale: float) -> None:
    found = forecast_counts(KnownWeibull(shape, scale), np.zeros(50), 91.0, draws=1).failures.mean
    assert found == pytest.approx(50 * renewal_function(shape, scale, 91.0), rel=4e-3 if shape < 1 else 1e-3)


def test_wide_sums_by_cumulants_equal_the_direct_product() -> None:
    """Three hundred positions are summed by cumulants; thirty, one by one, and convolved here."""
    rng = np.random.default_rng(8)
    ages = rng.uniform(0, 140, 300).round(1)
    expected = np.array([1.0])
    for part in ages.reshape(60, 5):
        expected = np.convolve(expected, forecast_counts(LIFE, part, 91.0, draws=1).failures.pmf)
    found = forecast_counts(LIFE, ages, 91.0, draws=1).failures.pmf
    size = min(found.size, expected.size)
    assert np.abs(found[:size] - expected[:size]).max() < 1e-7


def test_weeks_add_up_and_are_no_differences_of_horizons() -> None:
    ages = np.random.default_rng(4).uniform(0, 120, 40)
    found = forecast_counts(LIFE, ages, 91.0, windows=WEEKS, draws=1)
    assert sum(week.failures.mean for week in found.by_window) == pytest.approx(found.failures.mean, rel=2e-3)
    two = forecast_counts(LIFE, ages, 91.0, windows=[0, 28, 91], draws=1).by_window
    early = forecast_counts(LIFE, ages, 28.0, draws=1).failures
    assert two[0].failures.pmf[:40] == pytest.approx(early.pmf[:40], abs=2e-3)
    # what follows is not independent of what came before, so variances do not subtract
    later = two[1].failures.standard_deviation ** 2
    difference = found.failures.standard_deviation**2 - early.standard_deviation**2
    assert later == pytest.approx(difference + 10.3, abs=6.0)


def test_windows_may_be_uneven_and_horizons_differ() -> None:
    horizons = np.array([30.0, 91.0, 60.0])
    found = forecast_counts(LIFE, [10.0, 20.0, 90.0], horizons, windows=[0, 10, 45, 91], draws=1)
    assert sum(part.failures.mean for part in found.by_window) == pytest.approx(found.failures.mean, rel=3e-3)


@pytest.mark.parametrize(
    ("shape", "scale"),
    [(0.5, 30.0), (0.8, 200.0), (1.0, 20.0), (1.0, 100.0), (2.0, 15.0), (2.3, 70.0), (4.0, 30.0), (8.0, 90.0)],
)
def test_halving_the_step_moves_no_quantile(shape: float, scale: float) -> None:
    ages = np.random.default_rng(3).uniform(0, scale, 300)
    life = KnownWeibull(shape, scale)

    def quantiles(found: CountForecast) -> list[int]:
        parts = [found, *found.by_window]
        return [part.failures.quantile(p) for part in parts for p in (0.025, 0.1, 0.25, 0.5, 0.75, 0.9, 0.975)]

    usual = quantiles(forecast_counts(life, ages, 91.0, windows=WEEKS, draws=1))
    least = forecast_counts(life, ages, 91.0, windows=WEEKS, draws=1, cells=26)
    halved = quantiles(forecast_counts(life, ages, 91.0, windows=WEEKS, draws=1, cells=416))
    assert least.failures.mean > 0
    for one, other in zip(usual, halved, strict=True):
        assert abs(one - other) <= max(1, 0.005 * other)


def test_many_positions_on_shared_nodes_equal_exact_rows(monkeypatch: pytest.MonkeyPatch) -> None:
    rng = np.random.default_rng(6)
    ages = rng.gamma(2.0, 60.0, 4000).round(2)
    sites = rng.integers(0, 3, 4000)
    posterior = KnownWeibull(2.3, 120.0)
    shared = forecast_counts(posterior, ages, 91.0, groups=sites, draws=1)
    monkeypatch.setattr(count_positions, "MOST_EXACT_ROWS", 10_000)
    exact = forecast_counts(posterior, ages, 91.0, groups=sites, draws=1)
    assert shared.failures.mean == pytest.approx(exact.failures.mean, rel=2e-4)
    assert shared.failures.standard_deviation == pytest.approx(exact.failures.standard_deviation, rel=2e-3)
    assert shared.by_group[1].failures.quantile(0.9) == pytest.approx(exact.by_group[1].failures.quantile(0.9), abs=1)


def test_groups_are_counted_apart_and_bands_do_not_add() -> None:
    rng = np.random.default_rng(2)
    life = 100 * rng.weibull(2.0, 40)
    posterior = weibull_posterior(Lifetimes(np.minimum(life, 90.0), life < 90.0))
    ages, groups = rng.uniform(0, 100, 60), ["upper"] * 25 + ["lower"] * 35
    found = forecast_counts(posterior, ages, 91.0, groups=groups, draws=200, rng=np.random.default_rng(1))
    upper, lower = found.by_group["upper"].failures, found.by_group["lower"].failures
    assert upper.mean + lower.mean == pytest.approx(found.failures.mean, rel=1e-6)
    ends = [upper.interval(0.8), lower.interval(0.8)]
    low, high = found.failures.interval(0.8)
    assert high - low < ends[0][1] - ends[0][0] + ends[1][1] - ends[1][0]


def test_nothing_to_count_and_nothing_known_still_answer() -> None:
    assert forecast_counts(LIFE, [], 91.0).failures.pmf.tolist() == [1.0]
    assert forecast_counts(LIFE, [], 91.0, windows=WEEKS).by_window[4].failures.mean == 0.0
    assert forecast_counts(LIFE, [10.0, 20.0], 0.0).failures.quantile(0.99) == 0
    posterior = weibull_posterior(Lifetimes([50.0, 80.0, 120.0], [0, 0, 0], weights=[10, 10, 5]))
    found = forecast_counts(posterior, [50.0] * 10 + [120.0] * 5, 91.0, windows=WEEKS, rng=np.random.default_rng(1))
    assert found.failures.quantile(0.5) <= 2
    assert 1 <= found.failures.quantile(0.95) <= 45


def test_a_forecast_is_repeatable() -> None:
    posterior = weibull_posterior(Lifetimes([20.0, 50.0, 80.0], [1, 1, 0], sites=list("aab")), site_spread=True)

    def once() -> list[float]:
        found = forecast_counts(posterior, [5.0, 30.0], 91.0, sites=["a", "new"], rng=np.random.default_rng(9))
        return found.failures.pmf.tolist()

    assert once() == once()


def test_distribution_reads_as_people_expect() -> None:
    counts = CountDistribution(np.array([0.1, 0.2, 0.4, 0.2, 0.1]))
    assert counts.mean == pytest.approx(2.0)
    assert (counts.quantile(0.1), counts.quantile(0.5), counts.quantile(0.95)) == (0, 2, 4)
    assert counts.interval(0.8) == (0, 3)
    assert counts.chance_above(2) == pytest.approx(0.3)
    assert counts.chance_at_least(2) == pytest.approx(0.7)


BAD: dict[str, Callable[[], CountForecast]] = {
    "negative age": lambda: forecast_counts(LIFE, [-1.0], 91.0),
    "age not a number": lambda: forecast_counts(LIFE, [np.nan], 91.0),
    "endless horizon": lambda: forecast_counts(LIFE, [1.0], np.inf),
    "weights of another length": lambda: forecast_counts(LIFE, [1.0, 2.0], 91.0, weights=[1, 2, 3]),
    "sites of another length": lambda: forecast_counts(LIFE, [1.0, 2.0], 91.0, sites=["a"]),
    "windows not from zero": lambda: forecast_counts(LIFE, [1.0], 91.0, windows=[7, 14]),
    "windows falling": lambda: forecast_counts(LIFE, [1.0], 91.0, windows=[0, 14, 7]),
    "spread without sites": lambda: forecast_counts(KnownWeibull(2.0, 50.0, 0.3), [1.0], 91.0),
    "next visit too late": lambda: forecast_counts(LIFE, [1.0], 91.0, visits=(14.0, 20.0)),
    "switch without a next part": lambda: forecast_counts(LIFE, [1.0], 91.0, switch_at=20.0),
    "negative duty spread": lambda: forecast_counts(LIFE, [1.0], 91.0, duty_spread=-0.1),
}


@pytest.mark.parametrize("name", BAD)
def test_refuses_in_words(name: str) -> None:
    with pytest.raises(InvalidArgument):
        BAD[name]()


def test_texts_by_the_hundred_thousand_get_the_codes_that_few_get() -> None:
    rng = np.random.default_rng(3)
    labels = np.array([f"site {number}" for number in range(300)])[rng.integers(0, 300, 80_000)]
    codes, names = _text_codes(labels)
    known = {label: number for number, label in enumerate(dict.fromkeys(labels.tolist()))}
    assert names == list(known)
    assert codes.tolist() == [known[label] for label in labels.tolist()]
