"""Several new designs side by side, and lives on test stands beside those in the field, never pooled with them."""

from __future__ import annotations

from contextlib import suppress
from typing import TYPE_CHECKING, Any

import numpy as np

from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, Compared, all_history, at_the_same_time
from reliability.redesigns.evidence import both_sides, limits_of, told_ratio
from reliability.redesigns.with_past import sides_with_past
from reliability.stats.difference import counted_when_found, logrank
from reliability.stats.errors import StatisticsError
from reliability.stats.life_ratio import life_ratio
from reliability.stats.life_ratio_posterior import life_ratio_posterior
from reliability.stats.lifetimes import Lifetimes

if TYPE_CHECKING:
    from reliability.redesigns.question import RedesignQuestion


def candidates_of(question: RedesignQuestion, choices: dict[str, Any]) -> list[dict[str, Any]]:
    """Each candidate against the same old parts, from the sites and dates at which it ran; nothing for one alone."""
    if not question.also:
        return []
    rows = []
    for part in dict.fromkeys([*question.new, *question.also]):
        old = [code for code in question.old if code != part]
        lives = at_the_same_time(question.component, [part], old, not_before=question.not_before, **choices)
        whole = all_history(question.component, [part], old, with_rigs=True, **choices)
        on_stands = int(((whole.parts == part) & whole.rigs).sum())
        whole = whole.without_rigs()
        if question.modes:
            lives, whole = lives.if_only(question.modes), whole.if_only(question.modes)
        rows.append(_candidate(part, lives, whole, on_stands, question))
    return rows


def _candidate(
    part: str, lives: Compared, whole: Compared, on_stands: int, question: RedesignQuestion
) -> dict[str, Any]:
    """Ratio and Z over the same dates; the chance as the page's own, with the past of each position beside them."""
    new = lives.side(AFTER)
    row: dict[str, Any] = {
        "part": part,
        "lives": 0 if new is None else int(new.count),
        "failures": 0 if new is None else int(new.failures),
        "sites": 0 if new is None else len(new.site_labels),
        "ratio": None,
        "longer": None,
        "z": None,
        "why_not": _missing(new, on_stands),
    }
    sides = both_sides(lives)
    if sides is None or lives.pooled is None:
        return row
    row["why_not"] = ""
    before, after = (counted_when_found(side) for side in sides)
    with suppress(StatisticsError):
        row["z"] = finite(-logrank(counted_when_found(lives.pooled), strata=lives.pooled.site_codes).z)
    with suppress(StatisticsError):
        row["ratio"] = told_ratio(life_ratio(before, after, confidence_level=question.confidence))
    paired = sides_with_past(whole, lives.starts)
    with suppress(StatisticsError):
        if paired is not None:
            row["longer"] = life_ratio_posterior(*paired[0], **paired[1]).probability()
    if row["ratio"] is None:
        row["why_not"] = _too_few(before, after)
    return row


def _missing(new: Lifetimes | None, on_stands: int) -> str:
    if new is not None:
        return "No old part has yet run beside it over the same dates."
    return "It has run on test stands only; see below." if on_stands else "None has been fitted yet."


def _too_few(before: Lifetimes, after: Lifetimes) -> str:
    """In words why two kinds of lives give no ratio."""
    none = [name for name, side in (("old", before), ("new", after)) if not side.failures]
    if len(none) == 2:
        return "None has failed yet, old or new."
    return f"No {none[0]} part has failed yet." if none else "Too few have failed to tell a ratio."


def rigs_of(question: RedesignQuestion, whole: Compared, choices: dict[str, Any]) -> list[dict[str, Any]]:
    """For each part with lives on a test stand: both kinds of lives, how many times as long it lives there as in the
    field, and how new parts do against the old ones on the stands alone.

    whole: lives of old and new parts, stands included; those of other candidates are read besides.
    """
    parts = dict.fromkeys([*question.old, *question.new, *question.also])
    lives = whole
    if question.also:
        lives = all_history(question.component, list(parts), [], with_rigs=True, **choices)
    if lives.pooled is None or not lives.rigs.any():
        return []
    old_there = lives.chosen(np.isin(lives.parts, list(question.old)) & lives.rigs).lifetimes
    rows = []
    for part in parts:
        own = lives.parts == part
        if not (own & lives.rigs).any():
            continue
        rig = lives.chosen(own & lives.rigs).lifetimes
        field = lives.chosen(own & ~lives.rigs).lifetimes
        assert rig is not None
        factor = _ratio(field, rig, question)
        why_not = "" if factor else "It has not run in the field yet." if field is None else _NO_FACTOR
        there = None if part in question.old else _ratio(old_there, rig, question)
        counts = {**_counts("rig", rig), **_counts("field", field)}
        rows.append({"part": part, **counts, "factor": factor, "why_not": why_not, "over_old": there})
    return rows


_NO_FACTOR = "Too few have failed on stands or in the field to tell a factor."


def _counts(kind: str, lives: Lifetimes | None) -> dict[str, Any]:
    return {
        f"{kind}_lives": 0 if lives is None else int(lives.count),
        f"{kind}_failures": 0 if lives is None else int(lives.failures),
    }


def _ratio(one: Lifetimes | None, other: Lifetimes, question: RedesignQuestion) -> dict[str, Any] | None:
    """Median of the other over that of the one; stands are no sites that could differ, so lives are independent."""
    if one is None:
        return None
    before, after = counted_when_found(one), counted_when_found(other)
    alone = (np.zeros(len(before)), np.zeros(len(after)))
    try:
        found = life_ratio(before, after, sites=alone, probabilities=(0.5,), confidence_level=question.confidence)
    except StatisticsError:
        return None
    return limits_of(found.median)
