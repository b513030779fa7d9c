"""Failures as positions grow older: the mean cumulative function beside what renewal would give, and its tests."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from fleet.formats import number, rounded
from reliability.life_panels import FEWEST_FAILURES, Data, PanelQuestion, refused
from reliability.life_words import p_words
from reliability.risk_ages import round_ages
from reliability.wording import age, plural, sure

if TYPE_CHECKING:
    from reliability.stats.recurrence import Histories

FEWEST_UNITS = 5  # positions under observation where the drawn curve ends
TABLE_AGES = 8
MOST_CELLS = 200
LIKELY = 0.05


def answer(question: PanelQuestion) -> Data:
    if question.life_set:
        return refused("imported lives have no order: nothing says which part followed which in a position.")
    found = question.found
    if found.lifetimes is None or found.lifetimes.failures < FEWEST_FAILURES:
        return refused(f"fewer than {FEWEST_FAILURES} parts have failed under these choices.")
    from reliability.histories_from_fleet import position_histories

    choices = {name: value for name, value in question.choices.items() if name not in ("life_set", "by")}
    rows = position_histories(found.component, **choices)
    if not any(row.failures for row in rows):
        return refused("no position has a failure of a part that was new when it came under observation.")
    histories = _histories(rows)
    parts = len(question.lives(by="part").groups)
    data: Data = {
        "positions": len(rows),
        "modules": len({row.module for row in rows}),
        "failures": sum(len(row.failures) for row in rows),
        "other_removals": sum(row.other_removals for row in rows),
        "parts": parts,
        "narrowed": bool(question.choices.get("parts")),
        "tests": _tests(histories, [row.site for row in rows]),
    }
    if data["narrowed"]:
        return data  # positions leave at a failure when another design goes in: the curve would be too high
    return {**data, **_curves(question, histories, [row.site for row in rows], data["other_removals"])}


def _histories(rows: list[Any]) -> Histories:
    from reliability.stats.recurrence import Histories

    return Histories(
        units=list(range(len(rows))),
        event_times=[list(row.failures) for row in rows],
        starts=0,
        ends=[row.end for row in rows],
        clusters=[row.module for row in rows],
    )


def _tests(histories: Histories, sites: list[str]) -> Data:
    """Each by name; what a test cannot use is told in its place."""
    from reliability.stats.errors import StatisticsError
    from reliability.stats.recurrence import (
        laplace_trend,
        lewis_robinson_trend,
        mil_hdbk_189_trend,
        renewal_trend,
    )

    told: Data = {}
    asked: dict[str, Any] = {
        "modulated renewal": lambda: renewal_trend(histories, strata=sites),
        "Lewis–Robinson": lambda: lewis_robinson_trend(histories),
        "Laplace": lambda: laplace_trend(histories),
        "MIL-HDBK-189": lambda: mil_hdbk_189_trend(histories),
    }
    for name, test in asked.items():
        try:
            found = test()
        except StatisticsError as error:
            told[name] = {"refused": str(error)}
            continue
        told[name] = {
            "statistic": found.statistic,
            "degrees_of_freedom": found.degrees_of_freedom,
            "p_value": found.p_value,
            "p_worsening": found.p_worsening,
            "p_improving": found.p_improving,
            "failures": found.failures,
        }
    return told


def _curves(question: PanelQuestion, histories: Histories, sites: list[str], others: int) -> Data:
    from reliability.stats.errors import StatisticsError
    from reliability.stats.recurrence import mean_cumulative_function

    seen = mean_cumulative_function(histories, confidence_level=question.confidence)
    enough = seen.at_risk >= min(FEWEST_UNITS, len(histories))
    last_age = float(seen.times[enough][-1]) if enough.any() else float(seen.times[0])
    kept = seen.times <= last_age
    curve = {
        "age": seen.times[kept].tolist(),
        "mean": [round(value, 6) for value in seen.mean[kept].tolist()],
        "lower": [round(value, 6) for value in seen.lower[kept].tolist()],
        "upper": [round(value, 6) if value < 1e300 else None for value in seen.upper[kept].tolist()],
        "at_risk": seen.at_risk[kept].tolist(),
        "last_age": last_age,
        "method": "mean cumulative function, Lawless–Nadeau variance, a module's positions together",
    }
    lifetimes = question.found.lifetimes
    assert lifetimes is not None
    try:
        fit, multipliers = _life_of_sites(lifetimes)
    except StatisticsError as error:
        return {"curve": curve, "renewal": None, "notes": [f"What renewal would give is not known: {error}"]}
    renewal = _renewal(fit, multipliers, histories, sites, last_age, others / histories.exposure)
    return {"curve": curve, "renewal": renewal, "notes": []}


def _life_of_sites(lifetimes: Any) -> tuple[Any, dict[str, float]]:
    """The fitted life of a typical site and how each site's hazard differs from it, so that a mixture of sites is not
    taken for a trend; where they cannot be told apart the life of all, without multipliers.
    """
    from reliability.stats.errors import StatisticsError
    from reliability.stats.weibull_fit import fit_weibull

    if len(lifetimes.site_labels) > 1:
        try:
            fit = fit_weibull(lifetimes, site_spread=True)
        except StatisticsError:
            return fit_weibull(lifetimes), {}
        return fit, {str(site): float(value) for site, value in fit.site_multipliers.items()}
    return fit_weibull(lifetimes), {}


def _renewal(
    fit: Any, multipliers: dict[str, float], histories: Histories, sites: list[str], last_age: float, removals: float
) -> Data:
    """Expected failures a position if every part were as good as the last: each site with its own multiplier, averaged
    over the positions under observation at each age.
    """
    import numpy as np

    from reliability.stats.recurrence import Histories, renewal_expectation, units_at_risk

    grid = np.linspace(0.0, last_age, MOST_CELLS + 1)
    middle = 0.5 * (grid[1:] + grid[:-1])
    rise, weight = np.zeros(MOST_CELLS), np.zeros(MOST_CELLS)
    expected = 0.0
    places = np.array(sites)
    for site in np.unique(places):
        mine = np.flatnonzero(places == site)
        own = Histories(
            units=mine.tolist(),
            event_times=[histories.event_times[histories.event_units == row] for row in mine],
            starts=0,
            ends=histories.ends[mine],
        )
        z = multipliers.get(str(site), 1.0)
        found = renewal_expectation(lambda ages, z=z: fit.survival(ages) ** z, own, removals=removals)
        present = units_at_risk(own, middle)
        rise += present * np.diff(found.mean_at(grid))
        weight += present
        expected += found.expected_failures
    steps = np.divide(rise, weight, out=np.zeros(MOST_CELLS), where=weight > 0.0)
    return {
        "age": grid.tolist(),
        "mean": np.append(0.0, np.cumsum(steps)).tolist(),
        "expected_failures": expected,
        "sites_apart": bool(multipliers),
    }


def sentence(data: Data) -> str:
    """How many failures a position had, how many renewal alone would give, and whether age makes a difference."""
    told = [] if data["narrowed"] else [_count_words(data)]
    told.append(test_words(data))
    if data["parts"] > 1 and not data["narrowed"]:
        told.append(
            f"{number(data['parts'])} designs went in on the way, which by itself can make failures rarer or more "
            "frequent as positions grow older."
        )
    return " ".join(told)


def _count_words(data: Data) -> str:
    when, mean, low, high, expected = told_at(data)
    between = f" (between {number(low, 1)} and {number(high, 1)}, {sure(data['confidence'])})" if high else ""
    start = f"By {age(when, data['clock'])} a position of {plural(data['component_name'])} has failed "
    start += f"{number(mean, 1)} times on average{between}"
    if expected is None:
        return f"{start}."
    return f"{start}; {number(expected, 1)} would be expected if every part were as good as the last."


def told_at(data: Data) -> tuple[float, float, float, float | None, float | None]:
    """Age, mean, limits and expectation at the last round age that is drawn."""
    from bisect import bisect_right

    curve = data["curve"]
    ages = [each for each in round_ages(curve["last_age"]) if each >= curve["age"][0]] or [curve["last_age"]]
    place = bisect_right(curve["age"], ages[-1]) - 1
    levels = (curve[name][place] for name in ("mean", "lower", "upper"))
    return (ages[-1], *levels, expected_at(data, ages[-1]))  # type: ignore[return-value]


def expected_at(data: Data, when: float) -> float | None:
    renewal = data["renewal"]
    if not renewal:
        return None
    ages, means = renewal["age"], renewal["mean"]
    width = ages[1] - ages[0]
    place = min(int(when / width), len(ages) - 2)
    return float(means[place] + (when - ages[place]) / width * (means[place + 1] - means[place]))


def test_words(data: Data) -> str:
    """The test that asks directly: do parts fitted to older positions fail sooner than equally old ones?"""
    test = data["tests"]["modulated renewal"]
    if "refused" in test:
        return f"Whether age makes them fail sooner we cannot tell: {test['refused']}"
    p = f"{p_words(test['p_value'])}, each site compared with itself"
    if test["p_value"] >= LIKELY:
        return (
            f"That parts fitted to older positions fail sooner, or later, than equally old ones cannot be shown ({p})."
        )
    sooner = test["p_worsening"] < test["p_improving"]
    told = (
        f"Parts fitted to older positions fail {'sooner' if sooner else 'later'} than equally old parts in younger "
        f"ones ({p})"
    )
    if _same_within_positions(data, sooner):
        return f"{told}: {'it gets worse' if sooner else 'it gets better'} as positions grow older."
    return f"{told}, but no position's own failures show it: positions that differ for good would look the same."


def _same_within_positions(data: Data, sooner: bool) -> bool:
    """Whether the test that compares each position with itself alone says the same."""
    within = data["tests"]["Lewis–Robinson"]
    if "refused" in within or within["p_value"] >= LIKELY:
        return False
    return bool((within["p_worsening"] < within["p_improving"]) == sooner)


def page(data: Data, *, address: Any = None, ranks: dict[str, int] | None = None) -> Data:
    from reliability.charts.trend import trend_figure

    drawn = not data["narrowed"]
    return {
        "chart": {"figure": trend_figure(data), "notes": notes(data), **_curve_table(data)} if drawn else None,
        "tables": [_test_table(data, ("modulated renewal", "Lewis–Robinson"), "Tests for a trend")],
        "notes": None if drawn else notes(data),
        "detail": [_test_table(data, tuple(data["tests"]), "All tests, for the engineer")],
        "how": (
            "Mean cumulative function with Lawless and Nadeau's robust variance (Technometrics 37 (1995) 158–168), the "
            "positions of a module taken together. Renewal: Cox, Renewal Theory (1962), with the fitted life of the "
            "same parts, each site with its own multiplier. First test: score test in a modulated renewal process (Cox "
            "1972; Oakes & Cui, Biometrika 81 (1994) 83–90). Bad positions are renewed more often, and would pass for "
            "older ones in it; the Lewis–Robinson test (1974), taken within positions, compares each with itself "
            "alone. Laplace's test and that of MIL-HDBK-189 ask against a constant rate: parts that wear fail it "
            "without any trend."
        ),
    }


def notes(data: Data) -> list[str]:
    told = [
        f"{number(data['positions'])} positions in {number(data['modules'])} modules, each from its first new part on, "
        f"counted in working {data['clock']}; {number(data['failures'])} failures."
    ]
    if data["narrowed"]:
        told.append(
            "No curve is drawn while only some parts are chosen: a position leaves when another design goes in, often "
            "at a failure, and the positions that stay would look worse than they are. Choose all parts to see it."
        )
    else:
        told.append("Steps: what was seen. Thin line: what renewal alone would give. Tint: the band of the steps.")
    return told + (data.get("notes") or [])


def _curve_table(data: Data) -> Data:
    from bisect import bisect_right

    curve = data["curve"]
    columns = [
        {"key": "age", "label": f"Position's age, {data['clock']}"},
        {"key": "mean", "label": "Failures a position", "numeric": True},
        {"key": "renewal", "label": "Expected by renewal", "numeric": True, "digits": 2},
        {"key": "at_risk", "label": "Positions seen at that age", "numeric": True},
    ]
    rows = []
    for when in round_ages(curve["last_age"], TABLE_AGES):
        place = bisect_right(curve["age"], when) - 1
        if when <= 0 or place < 0:
            continue
        found = {
            end: curve[name][place] for end, name in (("estimate", "mean"), ("lower", "lower"), ("upper", "upper"))
        }
        rows.append(
            [
                {"text": number(rounded(when))},
                {"estimate": found, "digits": 2},
                expected_at(data, when),
                round(curve["at_risk"][place]),
            ]
        )
    return {"columns": columns, "rows": rows, "caption": "Failures a position at round ages; the file holds every step"}


ASKED = {
    "modulated renewal": "Do parts fitted to older positions fail sooner than equally old ones?",
    "Lewis–Robinson": "Do the times between a position's own failures shrink or grow?",
    "Laplace": "Against a constant rate",
    "MIL-HDBK-189": "Against a constant rate",
}


def _test_table(data: Data, names: tuple[str, ...], caption: str) -> Data:
    columns = [
        {"key": "test", "label": "Test"},
        {"key": "asks", "label": "Asks"},
        {"key": "statistic", "label": "Statistic", "numeric": True, "digits": 2},
        {"key": "p", "label": "P", "numeric": True},
        {"key": "says", "label": "Says"},
    ]
    rows = []
    for name in names:
        test = data["tests"][name]
        if "refused" in test:
            rows.append([name, ASKED[name], None, None, f"cannot tell: {test['refused']}"])
            continue
        says = verdict(test)
        rows.append([name, ASKED[name], test["statistic"], p_words(test["p_value"], ""), says])
    return {"columns": columns, "rows": rows, "narrow": "stacked", "caption": caption}


def verdict(test: Data) -> str:
    if test["p_value"] >= LIKELY:
        return "no trend shown"
    return "more often as they grow older" if test["p_worsening"] < test["p_improving"] else "less often"


FILE_HEAD = ["component", "clock", "curve", "age", "failures_a_position", "lower", "upper", "at_risk"]


def lines(data: Data) -> Any:
    named = [data["component"], data["clock"]]
    curve, renewal = data.get("curve"), data.get("renewal")
    if curve:
        for row in zip(*(curve[name] for name in ("age", "mean", "lower", "upper", "at_risk")), strict=True):
            yield [*named, "seen", *row]
    if renewal:
        for when, mean in zip(renewal["age"], renewal["mean"], strict=True):
            yield [*named, "expected by renewal", when, mean, None, None, None]
