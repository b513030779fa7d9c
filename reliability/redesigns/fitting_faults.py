"""Failures in the first days after fitting, counted apart: they speak of the fitting, not of the design."""

from __future__ import annotations

from typing import Any

import numpy as np
from scipy.special import betaincinv

from reliability.redesigns.compared import AFTER, BEFORE, Compared

FIRST_DAYS = 7


def fitting_faults(lives: Compared, confidence: float) -> dict[str, Any]:
    """Of the parts watched from new through their first days (or failed in them): how many failed, with limits.

    Clopper & Pearson, Biometrika 26 (1934) 404-413: exact limits of a share.
    """
    answer: dict[str, Any] = {"days": FIRST_DAYS}
    for side in (BEFORE, AFTER):
        answer[side] = {"parts": 0, "failed": 0, "estimate": None, "lower": None, "upper": None}
        if lives.lifetimes is None:
            continue
        own = (lives.is_new == (side == AFTER)) & (lives.lifetimes.entries == 0)
        days = lives.ended - lives.begun
        failed = int((own & lives.lifetimes.observed & (days <= FIRST_DAYS)).sum())
        parts = failed + int((own & (days > FIRST_DAYS)).sum())
        if parts:
            lower, upper = exact_share(failed, parts, confidence)
            answer[side] = {
                "parts": parts,
                "failed": failed,
                "estimate": failed / parts,
                "lower": lower,
                "upper": upper,
            }
    return answer


def exact_share(count: int, of: int, confidence: float) -> tuple[float, float]:
    tail = (1.0 - confidence) / 2.0
    lower = 0.0 if count == 0 else float(betaincinv(count, of - count + 1, tail))
    upper = 1.0 if count == of else float(betaincinv(count + 1, of - count, 1.0 - tail))
    return lower, upper


def without_first_days(lives: Compared) -> Compared:
    """The same lives from the end of their first days on: what is left is the design."""
    if lives.lifetimes is None:
        return lives
    early = lives.lifetimes.observed & (lives.lifetimes.entries == 0) & (lives.ended - lives.begun <= FIRST_DAYS)
    return lives.chosen(~early) if not early.all() else lives.chosen(np.zeros(len(early), dtype=bool))
