"""Old and new parts over the same dates, with what each position did before: bad positions are not a bad part.

An old part that was already old on its site's first day stands at a good position, and a new part fitted at a failure
stands at a bad one. The past of the positions tells them apart; its hazard has a factor of its own, so that the season
before says nothing about the parts.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from reliability.redesigns.compared import Compared
from reliability.stats.difference import counted_when_found, split_at_start
from reliability.stats.lifetimes import FloatArray, Lifetimes


def sides_with_past(
    whole: Compared, starts: dict[str, Any]
) -> tuple[tuple[Lifetimes, Lifetimes], dict[str, Any]] | None:
    """Both sides from their site's first day on, and `past` and `positions` as life_ratio takes them.

    whole: all lives ever; starts: the first day of each site. None where a side has no life left.
    """
    if whole.lifetimes is None or not starts:
        return None
    begun_at = np.isin(whole.lifetimes.site_labels, list(starts))[whole.lifetimes.site_codes]
    there = ~whole.rigs & begun_at
    field = whole if there.all() else whole.chosen(there)
    if field.lifetimes is None:
        return None
    lives = counted_when_found(field.lifetimes)
    cut = split_at_start(lives, _age_at_start(field, starts))
    if cut.now is None:
        return None
    new = field.is_new[cut.now_rows]
    if new.all() or not new.any():
        return None
    sides = cut.now.subset(~new), cut.now.subset(new)
    now = field.positions[cut.now_rows]
    if cut.past is None:
        return sides, {"positions": (now[~new], now[new])}
    return sides, {"past": cut.past, "positions": (now[~new], now[new], field.positions[cut.past_rows])}


def _age_at_start(lives: Compared, starts: dict[str, Any]) -> FloatArray:
    """Age of each part on its site's first day, on a straight line through its use; 0 for the new ones."""
    assert lives.lifetimes is not None
    found = lives.lifetimes
    days = np.array([starts[site].toordinal() for site in found.site_labels.tolist()], dtype=float)
    first = days[found.site_codes]
    share = np.clip((first - lives.begun) / np.maximum(lives.ended - lives.begun, 1.0), 0.0, 1.0)
    # a share of whole days may come out a hair below the whole number
    ages = np.floor(found.entries + share * (found.durations - found.entries) + 1e-9)
    # begun that day or later: nothing of it was before
    return np.where(lives.is_new | (share <= 0.0), 0.0, np.where(share >= 1.0, found.durations, ages))
