"""At the edge every function answers or says what to do: never NaN, a warning on the console or an endless loop.

A warning is an error in these tests. Each function is tried on each odd record; an error must be one of the typed ones,
with a sentence that ends as sentences do.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from reliability.stats.bend import bend_test
from reliability.stats.clock_choice import choose_clock
from reliability.stats.competing import cumulative_incidence
from reliability.stats.counts import forecast_counts
from reliability.stats.difference import logrank
from reliability.stats.difference_mean import restricted_mean_difference
from reliability.stats.early_failures import early_window
from reliability.stats.errors import StatisticsError
from reliability.stats.few_failures import known_shape_bounds
from reliability.stats.fitted import LifeFit, compare_fits
from reliability.stats.kaplan_meier import kaplan_meier
from reliability.stats.life_posterior import life_posterior
from reliability.stats.life_ratio import life_ratio
from reliability.stats.life_regression import METHODS, LifeRegression, fit_weibull_regression
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.other_fits import fit_exponential, fit_lognormal
from reliability.stats.posterior import weibull_posterior
from reliability.stats.prediction import calibrated_prediction
from reliability.stats.recurrence import mean_cumulative_function
from reliability.stats.recurrence_histories import Histories
from reliability.stats.recurrence_power_law import fit_power_law
from reliability.stats.renewal import renewal_function
from reliability.stats.replacement import best_replacement_age
from reliability.stats.site_bootstrap import site_bootstrap_band
from reliability.stats.standouts import stand_outs
from reliability.stats.trend import laplace_trend, lewis_robinson_trend, mil_hdbk_189_trend
from reliability.stats.turnbull import turnbull
from reliability.stats.turnbull_band import turnbull_band
from reliability.stats.weibull_band import weibull_band
from reliability.stats.weibull_fit import fit_weibull, fit_weibull_known_shape


def ages_of(shape: float, scale: float, count: int = 24) -> np.ndarray:
    """Ages at even chances of a Weibull: no luck in them."""
    chances = (np.arange(count) + 0.5) / count
    return scale * (-np.log1p(-chances)) ** (1.0 / shape)


def mostly(ages: np.ndarray, **columns: Any) -> Lifetimes:
    """Two of three failed, at four sites."""
    return Lifetimes(ages, np.arange(ages.size) % 3 > 0, sites=np.arange(ages.size) % 4, **columns)


USUAL = ages_of(2.0, 100.0)
RECORDS: dict[str, Lifetimes] = {
    "no failure": Lifetimes(USUAL, np.zeros(24, dtype=bool), sites=np.arange(24) % 4),
    "one failure": Lifetimes(USUAL, np.arange(24) == 11, sites=np.arange(24) % 4),
    "two failures": Lifetimes(USUAL, np.isin(np.arange(24), [5, 11]), sites=np.arange(24) % 4),
    "all failed at one age": Lifetimes([50.0] * 12, [True] * 12, sites=np.arange(12) % 4),
    "all failed at one age, some outlasted it": Lifetimes(
        [50.0] * 12 + [70.0] * 4, [1] * 12 + [0] * 4, sites=[1, 2] * 8
    ),
    "one life, failed": Lifetimes([50.0], [True], sites=["a"]),
    "one life, running": Lifetimes([50.0], [False], sites=["a"]),
    "ages of a thousandth": mostly(ages_of(2.0, 1e-3)),
    "ages of a thousand million": mostly(ages_of(2.0, 1e9)),
    "shape 0.2": mostly(ages_of(0.2, 100.0)),
    "shape 15": mostly(ages_of(15.0, 100.0)),
    "one heavy row that failed": mostly(USUAL, weights=np.where(np.arange(24) == 10, 1e7, 1.0)),
    "one heavy row that runs": mostly(USUAL, weights=np.where(np.arange(24) == 12, 1e7, 1.0)),
    "all entered late": mostly(USUAL + 80.0, entries=np.linspace(20.0, 79.0, 24)),
    "all entered just before their end": mostly(USUAL + 80.0, entries=USUAL + 79.999),
    "all between looks": Lifetimes(
        np.ceil(USUAL / 20.0) * 20.0, [True] * 24, last_good=np.floor(USUAL / 20.0) * 20.0, sites=np.arange(24) % 4
    ),
    "all found at their first look": Lifetimes(USUAL, [True] * 24, last_good=0.0, sites=np.arange(24) % 4),
    "every kind at once": Lifetimes(
        USUAL + 40.0,
        np.arange(24) % 3 > 0,
        entries=np.where(np.arange(24) % 2, 30.0, 0.0),
        last_good=np.where(np.arange(24) % 3 == 1, USUAL + 35.0, np.nan),
        weights=1.0 + np.arange(24) % 5,
        sites=np.arange(24) % 4,
    ),
}


def halves(lives: Lifetimes) -> tuple[Lifetimes, Lifetimes]:
    first = np.arange(len(lives)) % 2 == 0
    return lives.subset(first), lives.subset(~first)


def grouped(lives: Lifetimes) -> Lifetimes:
    return Lifetimes(
        lives.durations,
        lives.observed,
        entries=lives.entries,
        last_good=lives.last_good,
        weights=lives.weights,
        groups=np.arange(len(lives)) % 2,
    )


def histories(lives: Lifetimes) -> Histories:
    """Each life as a unit that failed once or not at all, watched a little longer."""
    events = [[age] if failed else [] for age, failed in zip(lives.durations, lives.observed, strict=True)]
    return Histories(np.arange(len(lives)), events, lives.entries, lives.durations * 1.01, weights=lives.weights)


def on_clocks(lives: Lifetimes) -> Any:
    strokes = Lifetimes(
        lives.durations * 7.0,
        lives.observed,
        entries=lives.entries * 7.0,
        last_good=lives.last_good * 7.0,
        weights=lives.weights,
        sites=lives.sites,
    )
    return choose_clock({"days": lives, "strokes": strokes}, replicates=40)


def regressed(lives: Lifetimes, distribution: str) -> LifeRegression:
    return fit_weibull_regression(lives, {"duty": np.arange(len(lives)) % 5}, distribution=distribution)


def middle(lives: Lifetimes) -> float:
    return float(np.median(lives.durations))


def modes(lives: Lifetimes) -> np.ndarray:
    return np.where(np.arange(len(lives)) % 2, "worn", "broken")


def drawn(lives: Lifetimes, *, site_spread: bool) -> Any:
    return dataclasses.astuple(weibull_posterior(lives, site_spread=site_spread).draws(50, np.random.default_rng(1)))


def forecast(lives: Lifetimes) -> Any:
    posterior = weibull_posterior(lives)
    age = float(lives.durations.max())
    counted = forecast_counts(
        posterior, [0.1 * age, age], [0.3 * age, 0.3 * age], draws=60, rng=np.random.default_rng(1)
    )
    return [counted.failures.mean, counted.failures.quantile(0.9), counted.failures.interval(0.8)]


FUNCTIONS: dict[str, Callable[[Lifetimes], Any]] = {
    "fit_weibull": fit_weibull,
    "fit_weibull, site spread": lambda lives: fit_weibull(lives, site_spread=True),
    "fit_weibull_known_shape": lambda lives: fit_weibull_known_shape(lives, 2.0),
    "fit_lognormal": fit_lognormal,
    "fit_exponential": fit_exponential,
    "compare_fits": lambda lives: compare_fits([fit_weibull(lives), fit_lognormal(lives), fit_exponential(lives)]),
    "weibull_band": lambda lives: weibull_band(fit_weibull(lives), lives.durations),
    "known_shape_bounds": known_shape_bounds,
    "kaplan_meier": kaplan_meier,
    "kaplan_meier, restricted mean": lambda lives: kaplan_meier(lives).restricted_mean(
        float(np.median(lives.durations))
    ),
    "site_bootstrap_band": lambda lives: site_bootstrap_band(lives, replicates=40),
    "turnbull": turnbull,
    "turnbull_band": lambda lives: turnbull_band(lives, replicates=20),
    "cumulative_incidence": lambda lives: cumulative_incidence(
        lives, np.where(np.arange(len(lives)) % 2, "worn", "broken")
    ),
    "bend_test": bend_test,
    "bend_test, site spread": lambda lives: bend_test(lives, site_spread=True),
    "stand_outs": stand_outs,
    "stand_outs of lots": lambda lives: stand_outs(lives, np.arange(len(lives)) % 3),
    "choose_clock": on_clocks,
    "weibull regression": lambda lives: regressed(lives, "weibull"),
    "lognormal regression": lambda lives: regressed(lives, "lognormal"),
    "exponential regression": lambda lives: regressed(lives, "exponential"),
    "logrank": lambda lives: logrank(grouped(lives)),
    "restricted_mean_difference": lambda lives: restricted_mean_difference(*halves(lives), middle(lives)),
    "life_ratio": lambda lives: life_ratio(*halves(lives)),
    "weibull_posterior": lambda lives: drawn(lives, site_spread=False),
    "weibull_posterior, site spread": lambda lives: drawn(lives, site_spread=True),
    "life_posterior": lambda lives: life_posterior(lives) and None,
    "early_window": early_window,
    "forecast_counts": forecast,
    "calibrated_prediction": lambda lives: calibrated_prediction(
        lives, [float(lives.durations.max())], 0.3 * float(lives.durations.max()), 0.9, resamples=60
    ),
    "renewal_function": lambda lives: renewal_function(fit_weibull(lives).shape, 1.0, [0.1, 1.0, 3.0]),
    "best_replacement_age": lambda lives: best_replacement_age(fit_weibull(lives).shape, 100.0, 1.0, 5.0),
    "mean_cumulative_function": lambda lives: mean_cumulative_function(histories(lives)),
    "laplace_trend": lambda lives: laplace_trend(histories(lives)),
    "mil_hdbk_189_trend": lambda lives: mil_hdbk_189_trend(histories(lives)),
    "lewis_robinson_trend": lambda lives: lewis_robinson_trend(histories(lives)),
    "fit_power_law": lambda lives: fit_power_law(
        [[age] if failed else [] for age, failed in zip(lives.durations, lives.observed, strict=True)],
        lives.durations * 1.01,
    ),
}


def numbers_of(value: Any, path: str = "") -> Any:
    """(path, number) of everything public in a result."""
    if isinstance(value, (bool, str)) or value is None:
        return
    if isinstance(value, (int, float, np.number)):
        yield path, float(value)
    elif isinstance(value, np.ndarray):
        if value.dtype.kind in "fc":
            for place, number in enumerate(value.ravel().tolist()):
                yield f"{path}[{place}]", number
        elif value.dtype.kind == "O":
            for place, item in enumerate(value.ravel().tolist()):
                yield from numbers_of(item, f"{path}[{place}]")
    elif isinstance(value, dict):
        for key, item in value.items():
            yield from numbers_of(item, f"{path}.{key}")
    elif isinstance(value, (list, tuple)):
        for place, item in enumerate(value):
            yield from numbers_of(item, f"{path}[{place}]")
    elif dataclasses.is_dataclass(value) and not isinstance(value, (Lifetimes, Histories)):
        for part in dataclasses.fields(value):
            if not part.name.startswith("_"):
                yield from numbers_of(getattr(value, part.name), f"{path}.{part.name}")


def answers_of(result: Any, lives: Lifetimes) -> Any:
    """The result, and what it answers when asked; a refusal of one question must be a typed one as well."""
    yield result
    questions: list[Callable[[], Any]] = []
    if isinstance(result, LifeFit):
        asked = ("shape", "scale", "mean", "median", ("quantile", 0.001), ("survival", float(lives.durations.max())))
        questions = [
            lambda quantity=quantity, method=method: result.interval(quantity, method=method)
            for quantity in asked
            for method in ("likelihood-ratio", "wald")
        ]
        questions.append(lambda: [result.aicc, result.mean, result.survival(lives.durations)])
    elif isinstance(result, LifeRegression):
        asked = [
            lambda method: result.life_ratio("duty", method=method),
            lambda method: result.shape_interval(method=method),
            lambda method: result.quantile_interval(0.1, {"duty": 2.0}, method=method),
            lambda method: result.survival_interval(float(lives.durations.max()), {"duty": 0.0}, method=method),
        ]
        questions = [lambda ask=ask, method=method: ask(method) for ask in asked for method in METHODS]
    for question in questions:
        try:
            yield question()
        except StatisticsError as error:
            assert_sentence(error)


def assert_sentence(error: StatisticsError) -> None:
    text = str(error)
    assert text.endswith("."), text
    assert text[0].isupper() or text[0].isdigit() or text[0] in "'\"", text
    assert "nan" not in text.lower().split(), text


@pytest.mark.parametrize("function", FUNCTIONS)
@pytest.mark.parametrize("record", RECORDS)
def test_odd_records_are_answered_or_refused_in_words(function, record):
    lives = RECORDS[record]
    try:
        result = FUNCTIONS[function](lives)
    except StatisticsError as error:
        assert_sentence(error)
        return
    for answer in answers_of(result, lives):
        for path, number in numbers_of(answer):
            assert not math.isnan(number), f"{path} is not a number"


@pytest.mark.parametrize("record", ["shape 0.2", "shape 15", "ages of a thousandth", "ages of a thousand million"])
@pytest.mark.parametrize(
    "function",
    ["fit_weibull", "fit_weibull, site spread", "weibull regression", "bend_test", "stand_outs", "choose_clock"],
)
def test_honest_records_in_odd_units_are_answered(function, record):
    FUNCTIONS[function](RECORDS[record])
