"""Sentences that must stand beside an estimate: state, value, remedy."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from fleet.formats import number
from reliability.fleet_lives import LifeRow
from reliability.wording import in_sentence

MANY_NOT_KNOWN = 0.05
REMOVED = ("failed", "other mode", "worn", "not known", "withdrawn")
NAMED_AT_MOST = 5


def total(rows: Sequence[LifeRow], *states: str) -> int:
    return sum(row.count for row in rows if row.left_out is None and row.state in states)


def many_not_known(rows: Sequence[LifeRow]) -> bool:
    removed = total(rows, *REMOVED)
    return removed > 0 and total(rows, "not known") > MANY_NOT_KNOWN * removed


def warnings_for(
    rows: Sequence[LifeRow],
    *,
    clock: str,
    modes: Sequence[str],
    unanswered: Mapping[Any, str],
    failures_without_mode: int,
    same_clock: bool,
) -> list[str]:
    """`unanswered`: sites (and None for no site) of which nobody said whether failures are reported at once."""
    told = [
        _modes(modes, failures_without_mode),
        _worn(rows),
        _not_known(rows),
        _unanswered(rows, unanswered),
        _not_measured(rows, clock),
        "" if same_clock else f"Ages are counted in {clock}, which is not this component's own clock.",
    ]
    return [sentence for sentence in told if sentence]


def _modes(modes: Sequence[str], without_mode: int) -> str:
    if not modes:
        return ""
    named = ", ".join(in_sentence(mode) for mode in modes)
    sentence = (
        f"If only this mode acted ({named}): every other failure counts as a removal in good order, "
        "so this is not what will happen."
        if len(modes) == 1
        else f"If only these modes acted ({named}): every other failure counts as a removal in good order, "
        "so this is not what will happen."
    )
    if without_mode:
        sentence += f" {_fittings(without_mode)} failed without a mode written down and count among the others."
    return sentence


def _worn(rows: Sequence[LifeRow]) -> str:
    worn = total(rows, "worn")
    if not worn:
        return ""
    return (
        f"{_fittings(worn)} taken out as worn to the limit count as removals in good order, as you chose. They were "
        "about to fail, so the lives shown here are too long. Count them as failures for planning."
    )


def _not_known(rows: Sequence[LifeRow]) -> str:
    if not many_not_known(rows):
        return ""
    count, removed = total(rows, "not known"), total(rows, *REMOVED)
    return (
        f"The reason of {count} of {removed} removals is not known. The answer is shown with all of them as failures "
        "and with all of them as removals in good order; the truth lies between. Ask the crews for the reasons."
    )


def _unanswered(rows: Sequence[LifeRow], unanswered: Mapping[Any, str]) -> str:
    there = {row.site for row in rows if row.left_out is None and row.site in unanswered}
    places = sorted(unanswered[site] for site in there if site is not None)
    if places:
        named = ", ".join(places[:NAMED_AT_MOST]) + (" and others" if len(places) > NAMED_AT_MOST else "")
        return (
            f"Nobody has said whether every failure is reported at once at {named}. Until then a running part counts "
            "there only up to the last time its module was seen, which can make lives look shorter than they are. "
            "Answer it on the site's page."
        )
    if None in there:
        return (
            "Some modules have no place written down. Their running parts count only up to the last time the module "
            "was seen, which can make lives look shorter than they are. Enter where they stand."
        )
    return ""


def _not_measured(rows: Sequence[LifeRow], clock: str) -> str:
    lives = sum(row.count for row in rows if row.left_out is None)
    estimated = sum(row.not_measured for row in rows if row.left_out is None)
    if not estimated:
        return ""
    return (
        f"The {clock} of {number(estimated)} of {number(lives)} lives reach beyond the readings of their module, "
        "or it has none: there they are carried on at its usual daily duty. Read the counters to make them sure."
    )


def _fittings(count: int) -> str:
    return "1 part" if count == 1 else f"{count} parts"
