"""Several new designs side by side, and lives on test stands beside those in the field, never pooled with them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from reliability.life_answer import finite
from reliability.redesigns.compared import AFTER, Compared, all_history, at_the_same_time
from reliability.redesigns.evidence import both_sides, limits_of, strata_of, told_ratio
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
        if question.modes:
            lives = lives.if_only(question.modes)
        rows.append(_candidate(part, lives, question))
    return rows


def _candidate(part: str, lives: Compared, question: RedesignQuestion) -> dict[str, Any]:
    new = lives.side(AFTER)
    row: dict[str, Any] = {
        "part": part,
        "lives": 0 if new is None else int(new.count),
        "failures": 0 if new is None else int(new.failures),
        "sites": 0 if new is None else len(new.site_labels),
        "ratio": None,
        "longer": None,
        "z": None,
        "why_not": "" if both_sides(lives) else "No old part has yet run beside it over the same dates.",
    }
    sides = both_sides(lives)
    if sides is None or lives.lifetimes is None:
        return row
    before, after = (counted_when_found(side) for side in sides)
    try:
        row["z"] = finite(-logrank(counted_when_found(lives.lifetimes), strata=strata_of(lives, "site")).z)
    except StatisticsError as error:
        row["why_not"] = str(error)
    try:
        row["longer"] = life_ratio_posterior(before, after).probability()
        row["ratio"] = told_ratio(life_ratio(before, after, confidence_level=question.confidence))
    except StatisticsError as error:
        row["why_not"] = str(error)
    return row


def rigs_of(question: RedesignQuestion, whole: Compared, choices: dict[str, Any]) -> list[dict[str, Any]]:
    """For each part with lives on a test stand: both kinds of lives, and how many times as long it lives there.

    whole: lives of old and new parts, stands included; those of other candidates are read besides.
    """
    parts = dict.fromkeys([*question.old, *question.new, *question.also])
    lives = whole
    if question.also:
        lives = all_history(question.component, list(parts), [], with_rigs=True, **choices)
    if lives.lifetimes is None or not lives.rigs.any():
        return []
    rows = []
    for part in parts:
        own = lives.parts == part
        if not (own & lives.rigs).any():
            continue
        rig = lives.chosen(own & lives.rigs).lifetimes
        field = lives.chosen(own & ~lives.rigs).lifetimes
        assert rig is not None
        rows.append({"part": part, **_counts("rig", rig), **_counts("field", field), **_factor(field, rig, question)})
    return rows


def _counts(kind: str, lives: Lifetimes | None) -> dict[str, Any]:
    return {
        f"{kind}_lives": 0 if lives is None else int(lives.count),
        f"{kind}_failures": 0 if lives is None else int(lives.failures),
    }


def _factor(field: Lifetimes | None, rig: Lifetimes, question: RedesignQuestion) -> dict[str, Any]:
    """Median on the stand over that in the field; they share no site, so their lives count as independent."""
    if field is None:
        return {"factor": None, "why_not": "It has not run in the field yet."}
    before, after = counted_when_found(field), counted_when_found(rig)
    alone = (np.zeros(len(before)), np.zeros(len(after)))
    try:
        found = life_ratio(before, after, sites=alone, probabilities=(0.5,), confidence_level=question.confidence)
    except StatisticsError as error:
        return {"factor": None, "why_not": str(error)}
    return {"factor": limits_of(found.median), "why_not": ""}
