"""Mean cumulative function: published values, sums by hand, and its errors against what repeated fleets show."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reliability.stats.errors import InvalidArgument, TooFewFailures, UnsupportedRows
from reliability.stats.recurrence import Histories, InvalidHistories, mean_cumulative_function
from tests.stats import comparison_reference as published


@st.composite
def small_histories(draw: st.DrawFn, *, late: bool = True) -> tuple[Histories, list[int]]:
    count = draw(st.integers(1, 6))
    starts = [draw(st.integers(0, 4)) if late else 0 for _ in range(count)]
    ends = [start + draw(st.integers(1, 6)) for start in starts]
    events = [draw(st.lists(st.integers(start + 1, end), max_size=4)) for start, end in zip(starts, ends, strict=True)]
    clusters = [draw(st.integers(0, 2)) for _ in range(count)]
    return Histories(range(count), events, starts, ends), clusters


def by_hand(events, starts, ends, clusters) -> list[tuple[float, float, float]]:
    """(age, mean, robust variance) by the definitions, a loop over units and ages."""
    ages = sorted({age for times in events for age in times})
    mean, rows, residuals = 0.0, [], dict.fromkeys(clusters, 0.0)
    for age in ages:
        present = [unit for unit in range(len(ends)) if starts[unit] < age <= ends[unit]]
        counts = {unit: events[unit].count(age) for unit in present}
        share = sum(counts.values()) / len(present)
        mean += share
        for unit in present:
            residuals[clusters[unit]] += (counts[unit] - share) / len(present)
        rows.append((age, mean, sum(value**2 for value in residuals.values())))
    return rows


def nelson_by_hand(events, ends) -> list[float]:
    """Nelson's variance: covariances over the units still there, divided by n - 1; inf from where n is 1."""
    ages = sorted({age for times in events for age in times})
    total, rows = 0.0, []
    for k, age in enumerate(ages):
        present = [unit for unit in range(len(ends)) if age <= ends[unit]]
        if len(present) < 2:
            rows.extend([np.inf] * (len(ages) - k))
            break
        now = [events[unit].count(age) for unit in present]
        centre = sum(now) / len(present)
        total += sum((x - centre) ** 2 for x in now) / (len(present) - 1) / len(present)
        for earlier in ages[:k]:
            then = [events[unit].count(earlier) for unit in present]
            middle = sum(then) / len(present)
            product = sum((x - middle) * (y - centre) for x, y in zip(then, now, strict=True)) / (len(present) - 1)
            total += 2 * product / sum(earlier <= end for end in ends)
        rows.append(total)
    return rows


def split(histories: Histories) -> tuple[list[list[float]], list[float], list[float]]:
    events = [histories.event_times[histories.event_units == unit].tolist() for unit in range(len(histories))]
    return events, histories.starts.tolist(), histories.ends.tolist()


def test_valve_seats():
    expected = published.check("mcf-valve-seat")["expected"]  # computed with R survival 3.5.3; data Nelson 1995
    robust = mean_cumulative_function(published.valve_seats())
    unbiased = mean_cumulative_function(published.valve_seats(), "nelson")
    for age, value in expected["mcf"].items():
        assert robust.mean_at(float(age)) == pytest.approx(value, abs=1e-6)
    for curve, name in ((robust, "se_Lawless_Nadeau"), (unbiased, "se_Nelson_unbiased")):
        for age, value in expected[name].items():
            assert curve.standard_error[curve.times == float(age)] == pytest.approx([value], abs=1e-6)
    assert robust.failures.sum() == 48
    assert robust.at_risk[0] == 41


def test_the_small_example_by_hand():
    entry = published.check("mcf-hand-example")  # Meeker & Escobar 1998, chapter 16, from memory
    units = entry["data"]
    histories = Histories(
        [row["unit"] for row in units], [row["events"] for row in units], 0, [row["end"] for row in units]
    )
    curve = mean_cumulative_function(histories)
    assert curve.times.tolist() == [float(age) for age in entry["expected"]["mcf"]]
    assert curve.mean == pytest.approx(list(entry["expected"]["mcf"].values()), abs=1e-8)
    assert curve.standard_error**2 == pytest.approx(list(entry["expected"]["var_Lawless_Nadeau"].values()), abs=1e-8)


@given(small_histories(), st.booleans())
@settings(max_examples=150, deadline=None)
def test_robust_variance_against_a_loop(case, in_clusters):
    histories, clusters = case
    events, starts, ends = split(histories)
    if not histories.event_times.size:
        return
    if in_clusters:
        histories = Histories(histories.units, events, starts, ends, clusters=clusters)
    rows = by_hand(events, starts, ends, clusters if in_clusters else list(range(len(ends))))
    curve = mean_cumulative_function(histories)
    assert curve.times.tolist() == [row[0] for row in rows]
    assert curve.mean == pytest.approx([row[1] for row in rows])
    assert curve.standard_error**2 == pytest.approx([row[2] for row in rows], abs=1e-9)


@given(small_histories(late=False))
@settings(max_examples=100, deadline=None)
def test_nelsons_variance_against_a_loop(case):
    histories, _ = case
    if not histories.event_times.size:
        return
    events, _, ends = split(histories)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        curve = mean_cumulative_function(histories, "nelson")
    expected = nelson_by_hand(events, ends)
    for error, variance, upper in zip(curve.standard_error, expected, curve.upper, strict=True):
        if variance < -1e-12 or variance == np.inf:
            assert error == upper == np.inf
        elif abs(variance) > 1e-12:
            assert error**2 == pytest.approx(variance)


def test_a_weight_is_as_many_units():
    events, ends = [[3, 5], [5], []], [8, 6, 9]
    weighted = mean_cumulative_function(Histories("abc", events, 0, ends, weights=[2, 1, 3]))
    rows = mean_cumulative_function(Histories(range(6), [events[k] for k in (0, 0, 1, 2, 2, 2)], 0, [8, 8, 6, 9, 9, 9]))
    assert weighted.mean == pytest.approx(rows.mean)
    assert weighted.standard_error == pytest.approx(rows.standard_error)
    nelson = [
        mean_cumulative_function(histories, "nelson").standard_error
        for histories in (
            Histories("abc", events, 0, ends, weights=[2, 1, 3]),
            Histories(range(6), [events[k] for k in (0, 0, 1, 2, 2, 2)], 0, [8, 8, 6, 9, 9, 9]),
        )
    ]
    assert nelson[0] == pytest.approx(nelson[1])


def test_flat_rows_in_any_order_are_the_same():
    lists = Histories("ab", [[5, 3], [4]], 0, [8, 6])
    flat = Histories.from_rows("ab", 0, [8, 6], [1, 0, 0], [4, 5, 3])
    assert flat.event_times.tolist() == lists.event_times.tolist() == [3.0, 5.0, 4.0]
    assert flat.event_units.tolist() == lists.event_units.tolist() == [0, 0, 1]
    assert flat.gaps.tolist() == [3.0, 2.0, 4.0]
    assert flat.event_counts.tolist() == [2, 1]
    assert flat.exposure == 14.0


def test_bands_hold_the_mean_where_units_differ():
    """Rates that differ between units: the robust band holds its rate, one for a Poisson process would not."""
    held, runs = 0, 300
    for number in range(runs):
        rng = np.random.default_rng([31, number])
        rates = rng.gamma(1.0, 0.03, 40)
        ends = rng.uniform(50.0, 100.0, 40)
        events = [
            np.sort(rng.uniform(0.0, end, rng.poisson(rate * end))) for rate, end in zip(rates, ends, strict=True)
        ]
        curve = mean_cumulative_function(Histories(range(40), events, 0, ends))
        place = np.searchsorted(curve.times, 45.0, side="right") - 1
        held += curve.lower[place] <= 0.03 * 45.0 <= curve.upper[place]
    assert 0.89 < held / runs < 0.985


def test_the_plain_band_is_symmetric_and_cut_at_zero():
    curve = mean_cumulative_function(published.valve_seats(), band="plain")
    assert curve.lower.min() >= 0.0
    assert curve.upper - curve.mean == pytest.approx(1.959964 * curve.standard_error)


class TestRefusals:
    @pytest.mark.parametrize(
        ("given", "words"),
        [
            (("ab", [[3], []], 0, [5]), "one value for each of 2"),
            (("ab", [[3]], 0, [5, 6]), "one for each of 2"),
            (("ab", [[7], []], 0, [5, 6]), "Unit a: a failure at 7 lies outside"),
            (("ab", [[], [2]], [0, 2], [5, 6]), "Unit b: a failure at 2 lies outside"),
            (("ab", [[], []], [0, 6], [5, 6]), "Unit b: observation ended at 6"),
            (("ab", [[], []], -1, [5, 6]), "began at -1"),
            (("ab", [["x"], []], 0, [5, 6]), "must be numbers"),
            (("ab", [3, 4], 0, [5, 6]), "must be a list"),
            (("ab", np.array([3.0, 4.0]), 0, [5, 6]), "from_rows"),
            (("", [], 0, []), "no units"),
            (("ab", [[np.nan], []], 0, [5, 6]), "lies outside"),
        ],
    )
    def test_histories_that_cannot_be(self, given, words):
        with pytest.raises(InvalidHistories, match=words):
            Histories(*given)

    def test_weights_and_clusters(self):
        with pytest.raises(InvalidHistories, match="not above 0"):
            Histories("ab", [[], []], 0, 5, weights=0)
        with pytest.raises(InvalidHistories, match="leave out the weights"):
            Histories("ab", [[], []], 0, 5, weights=2, clusters=[1, 1])
        with pytest.raises(InvalidHistories, match="from 0 to 1"):
            Histories.from_rows("ab", 0, 5, [2], [3])

    def test_curves_that_cannot_be(self):
        quiet = Histories("ab", [[], []], 0, 5)
        with pytest.raises(TooFewFailures, match="None of 2 units has failed in 10"):
            mean_cumulative_function(quiet)
        with pytest.raises(UnsupportedRows, match="lawless-nadeau"):
            mean_cumulative_function(Histories("ab", [[4], []], [1, 0], 5), "nelson")
        for options in ({"variance": "greenwood"}, {"band": "wide"}, {"confidence_level": 1.0}):
            with pytest.raises(InvalidArgument):
                mean_cumulative_function(Histories("ab", [[4], []], 0, 5), **options)
        with pytest.raises(InvalidArgument, match="age 7 lies outside"):
            mean_cumulative_function(Histories("ab", [[4], []], 0, 5)).mean_at(7.0)


def test_a_hundred_thousand_units_at_once():
    rng = np.random.default_rng(33)
    count = 100_000
    ends = rng.integers(50, 400, count)
    owners = rng.choice(count, 150_000, p=ends / ends.sum())
    times = np.ceil(rng.random(owners.size) * ends[owners])
    curve = mean_cumulative_function(Histories.from_rows(np.arange(count), 0, ends, owners, times))
    # a mean of Poisson counts: the robust error is near the root of sum d / n^2
    assert curve.standard_error[200] == pytest.approx(
        float(np.sqrt((curve.failures[:201] / curve.at_risk[:201] ** 2).sum())), rel=0.02
    )
