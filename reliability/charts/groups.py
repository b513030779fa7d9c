"""Which groups of a life document are drawn, in what look, and through which points."""

from __future__ import annotations

from bisect import bisect_right
from typing import Any

from fleet.part_styles import PartStyle, part_style

MOST_GROUPS = 8  # beyond that looks repeat and nobody can tell them apart
FEWER_OF_MANY = 6  # of lots and quarters there are always many, each at many sites: the first answer must be quick
MOST_BANDS = 3  # more of them lie upon each other
FINEST_STEP = 0.0015  # of the height or of the length: finer steps are not seen

Document = dict[str, Any]
Figure = dict[str, Any]
Group = dict[str, Any]


def first_groups(by: str | None) -> int:
    """How many groups the first answer fits and draws; the others come with the table of all."""
    return FEWER_OF_MANY if by in ("lot", "quarter") else MOST_GROUPS


def drawn_groups(document: Document) -> list[Group]:
    """The groups that have a curve, in the document's order; where there are too many, those with most lives."""
    groups = [group for group in document["groups"] if has_curve(group)]
    if len(groups) <= MOST_GROUPS:
        return groups
    most = sorted(groups, key=lambda group: -group["lives"])[:MOST_GROUPS]
    return [group for group in groups if group in most]


def has_curve(group: Group) -> bool:
    curve = group["curve"]
    return bool(curve["age"]) or bool(curve["last_age"])


def rank_of(document: Document, group: Group, ranks: dict[str, int]) -> int:
    """A part has one rank on every screen; other groups are counted through."""
    if document["by"] == "part" and group["group"] in ranks:
        return ranks[group["group"]]
    drawn = [each["group"] for each in drawn_groups(document)]
    return drawn.index(group["group"]) if group["group"] in drawn else 0


def style_of(document: Document, group: Group, ranks: dict[str, int]) -> PartStyle:
    return part_style(rank_of(document, group, ranks))


def steps(group: Group, *levels: str) -> tuple[list[float], dict[str, list[float]]]:
    """The curve from its start to the last age seen, without steps too small to be seen."""
    curve = group["curve"]
    start, last_age = curve["given_survival_to"] or 0, curve["last_age"]
    ages: list[float] = [start]
    heights: dict[str, list[float]] = {name: [1.0] for name in levels}
    least = FINEST_STEP * ((last_age or 0) - start)
    final = len(curve["age"]) - 1
    for place, age in enumerate(curve["age"]):
        fallen = any(heights[name][-1] - curve[name][place] > FINEST_STEP for name in levels)
        if place == final or fallen or age - ages[-1] > 10 * least:
            ages.append(age)
            for name in levels:
                heights[name].append(curve[name][place])
    if last_age is not None and last_age > ages[-1]:
        ages.append(last_age)
        for name in levels:
            heights[name].append(heights[name][-1])
    return ages, {name: [round(value, 5) for value in values] for name, values in heights.items()}


def level_at(group: Group, name: str, age: float) -> float | None:
    """The height of a step curve at an age; none outside what was seen, and no band before the first failure."""
    curve = group["curve"]
    if age < (curve["given_survival_to"] or 0) or curve["last_age"] is None or age > curve["last_age"]:
        return None
    place = bisect_right(curve["age"], age)
    if place == 0:
        return 1.0 if name == "survival" else None
    return curve[name][place - 1]
