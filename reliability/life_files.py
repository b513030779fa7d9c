"""The figures of the Life screen as rows of a file: plain numbers, empty where the records give no limit."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from reliability.life_page import estimate_of

Document = dict[str, Any]
ESTIMATES = ("b10", "median", "mean", "shape", "scale")
ENDS = ("", "_lower", "_upper")
GROUP_HEAD = [
    "component",
    "clock",
    "as_of",
    "confidence",
    "group",
    "lives",
    "failures",
    "running",
    "exposure",
    *(f"{name}{end}" for name in ESTIMATES for end in ENDS),
    "log_likelihood",
    "method",
]
CURVE_HEAD = ["component", "clock", "group", "age", "survival", "lower", "upper", "at_risk", "failures", "method"]
CURVE_COLUMNS = ("age", "survival", "lower", "upper", "at_risk", "failures")

LINE_HEAD = ["component", "clock", "group", "age", "survival", "lower", "upper", "seen_to", "band"]
LINE_COLUMNS = ("age", "survival", "lower", "upper")


def line_lines(document: Document) -> Iterator[list[Any]]:
    """The fitted lines of the Weibull plot; its points are the curves."""
    for group in document["groups"]:
        line = group["fitted"]
        for row in zip(*(line[name] for name in LINE_COLUMNS), strict=True) if line else ():
            yield [document["component"], document["clock"], group["group"], *row, line["seen_to"], line["band"]]


def group_lines(document: Document) -> Iterator[list[Any]]:
    for group in document["groups"]:
        weibull = group["weibull"] or {}
        found = [estimate_of(group, name) or {} for name in ESTIMATES]
        yield [
            document["component"],
            document["clock"],
            document["as_of"],
            document["confidence"],
            group["group"],
            group["lives"],
            group["failures"],
            group["running"],
            group["exposure"],
            *(each.get(end) for each in found for end in ("estimate", "lower", "upper")),
            weibull.get("log_likelihood"),
            f"{weibull['distribution']}, {weibull['method']}" if weibull else "too few failures to fit",
        ]


def curve_lines(document: Document) -> Iterator[list[Any]]:
    for group in document["groups"]:
        curve = group["curve"]
        for row in zip(*(curve[name] for name in CURVE_COLUMNS), strict=True):
            yield [document["component"], document["clock"], group["group"], *row, curve["method"]]
