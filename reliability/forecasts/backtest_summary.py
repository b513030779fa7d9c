"""Sums over the judged quarters of one measure: hits beside what is ordinary, PIT, bias, and CRPS beside the rivals."""

from __future__ import annotations

from typing import Any

import numpy as np

from reliability.forecasts.combine import add_up
from reliability.stats.count_results import CountDistribution
from reliability.stats.hits import mean_with_interval, ordinary_hits

PIT_MIDDLE = (0.1, 0.9)

Quarter = dict[str, Any]


def summed_up(name: str, quarters: list[Quarter]) -> dict[str, Any]:
    """Everything that is said of one measure, with its quarters in the order of time."""
    rows = [row_of(each, name) for each in quarters]
    shown = [{**{key: value for key, value in row.items() if key != "pmf"}, "hoped": hoped(row)} for row in rows]
    middle = [PIT_MIDDLE[0] < row["pit"] < PIT_MIDDLE[1] for row in rows]
    return {
        "quarters": shown,
        "hits": hits(rows),
        "pit80": {"hits": sum(middle), "of": len(rows), **ordinary([0.8] * len(rows))},
        "bias": bias(rows),
        "crps": float(np.mean([row["crps"] for row in rows])),
        "rivals": {rival: against(rows, rival) for rival in rows[0]["rivals"]},
    }


def row_of(quarter: Quarter, name: str) -> dict[str, Any]:
    """The measure's figures with the quarter's days."""
    days = {key: quarter[key] for key in ("from", "until", "as_of", "positions", "in_modules_that_came_later")}
    return {**days, **quarter["measures"][name]}


def hoped(row: dict[str, Any]) -> float:
    """What to show as expected: where no failure was known the middle one, for the mean rests on the prior alone."""
    return row["expected"] if row["failures_known"] else row["median"]


def hits(rows: list[dict[str, Any]]) -> dict[str, Any]:
    """By band: how many actual figures it held, and what is ordinary for bands that hold what they promise."""
    return {
        band: {
            "hits": sum(row["held"][band] for row in rows),
            "of": len(rows),
            **ordinary([row["promised"][band] for row in rows]),
        }
        for band in rows[0]["held"]
    }


def ordinary(promised: list[float]) -> dict[str, Any]:
    found = ordinary_hits(promised)
    return {"ordinary": [found.low, found.high], "chance": found.chance}


def bias(rows: list[dict[str, Any]]) -> dict[str, Any]:
    """Actual and expected over all quarters, and the band of the sum if each quarter missed by itself."""
    total = add_up(distribution_of(row["pmf"]) for row in rows)
    return {
        "actual": sum(row["actual"] for row in rows),
        "expected": sum(row["expected"] for row in rows),
        "median": total.quantile(0.5),
        "none_known": all(row["failures_known"] == 0 for row in rows),
        "bands": {"0.95": list(total.interval(0.95))},
    }


def distribution_of(kept: dict[str, Any]) -> CountDistribution:
    pmf = np.concatenate([np.zeros(kept["from"]), kept["chances"]])
    return CountDistribution(pmf / pmf.sum())


def against(rows: list[dict[str, Any]], rival: str) -> dict[str, Any] | None:
    """The rival's CRPS, and by how much more it misses than the forecast, over the quarters that it can be had for."""
    both = [(row["crps"], row["rivals"][rival]) for row in rows if row["rivals"][rival] is not None]
    if not both:
        return None
    more = [other["crps"] - ours for ours, other in both]
    mean, lower, upper = mean_with_interval(more)
    return {
        "of": len(both),
        "crps": float(np.mean([other["crps"] for _, other in both])),
        "forecast": float(np.mean([ours for ours, _ in both])),
        "more": {"estimate": mean, "lower": lower, "upper": upper} if len(both) > 1 else None,
        "forecast_nearer": sum(each > 0 for each in more),
        "held": {band: sum(other["held"][band] for _, other in both) for band in both[0][1]["held"]},
    }
