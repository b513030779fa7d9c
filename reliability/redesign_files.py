"""The evidence on a redesign as lines of a file: one figure a line, with its interval."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

ENDS = ("estimate", "lower", "upper")
HEAD = ["figure", "which", "assumed", "estimate", "lower", "upper"]


def lines(document: dict[str, Any]) -> Iterator[list[Any]]:
    verdict = document["verdict"]
    yield ["verdict", "same dates", verdict["phrase"], None, None, None]
    for name in ("z", "position_z", "boundary", "share"):
        yield [f"verdict {name}", "same dates", "", verdict[name], None, None]
    for name, chance in (document["chances"] or {}).items():
        yield [f"chance {name}", "same dates", "", chance, None, None]
    for which in ("same_dates", "all_history"):
        yield from _side(document[which], which.replace("_", " "))
    for row in document["by_mode"]["rows"]:
        for side in ("before", "after"):
            share = row[side]
            yield [f"failed of {row['name']}", side, "", share["estimate"], share["lower"], share["upper"]]
    for row in document["candidates"]:
        median = row["ratio"]["median"] if row["ratio"] else {}
        yield [f"life ratio median of {row['part']}", "candidates", "", *(median.get(end) for end in ENDS)]
        yield [f"chance longer of {row['part']}", "candidates", "", row["longer"], None, None]
    for row in document["rigs"]:
        for name, ratio in (("stand over field", row["factor"]), ("on stands, new over old", row["over_old"])):
            if ratio is not None:
                yield [f"{name}, {row['part']}", "stands", "", *(ratio[end] for end in ENDS)]
    if few := document["few"]:
        yield ["part-years a failure at least", "all history", "", None, few["years_a_failure"], None]
        for bound in few["bounds"]:
            yield ["b10 at least", "all history", f"shape {bound['shape']:g}", None, bound["b10_lower"], None]
    for mix in document["comparability"]["mixes"]:
        for row in mix["rows"]:
            for side in ("before", "after"):
                yield [f"{mix['name']} {row['label']}", side, "", row[side], None, None]


def _side(found: dict[str, Any], which: str) -> Iterator[list[Any]]:
    for way, ratio in (found["ratio"] or {}).items():
        for name in ("b10", "median"):
            if ratio is not None:
                yield [f"life ratio {name}", which, way, *(ratio[name][end] for end in ("estimate", "lower", "upper"))]
    for test in found["tests"]:
        yield ["log-rank z", which, test["strata"], test["z"], None, None]
    for group in (found["curves"] or {"groups": []})["groups"]:
        for name in ("b10", "median", "mean"):
            if group[name]:
                ends = (group[name][end] for end in ("estimate", "lower", "upper"))
                yield [f"{name} of {group['group']}", which, "", *ends]
