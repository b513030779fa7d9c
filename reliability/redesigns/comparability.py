"""How comparable old and new parts are: sites, seasons, duty, lots and failure modes of each side, and what follows.

Shares are of what was observed: days in service for sites and seasons, failures for modes, parts for lots.
"""

from __future__ import annotations

import datetime as dt
from collections import Counter
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from django.db.models import Count
from numpy.typing import NDArray

from fleet.models import Fitting, Part
from reliability.histories_from_fleet import module_duties
from reliability.life_question import asked_of
from reliability.redesigns.compared import AFTER, BEFORE, Compared
from reliability.stats.ranks import ranked

LITTLE_OVERLAP = 0.5  # below, the page warns in words
ALL_AT_ONCE = 0.1  # an old share of a site's watched days below which it was switched all at once
UNLIKE_DUTY = 1.15  # one side's mean duty over the other's from which regression is worth a look
SEASONS = ("January to March", "April to June", "July to September", "October to December")


@dataclass(frozen=True)
class Mix:
    """One thing that may differ: shares of both sides by label, and how far they overlap (1: the same mixture)."""

    name: str
    of: str
    labels: tuple[str, ...]
    before: tuple[float, ...]
    after: tuple[float, ...]

    @property
    def overlap(self) -> float | None:
        """Sum of the smaller shares; None where a side has nothing to share out."""
        if not any(self.before) or not any(self.after):
            return None
        return float(sum(min(pair) for pair in zip(self.before, self.after, strict=True)))


@dataclass(frozen=True)
class Duty:
    """Use a day of the modules of each side, weighted by days watched; None where no counter says so."""

    clock: str
    before: float | None
    after: float | None

    @property
    def unlike(self) -> bool:
        if not self.before or not self.after:
            return False
        return max(self.before / self.after, self.after / self.before) > UNLIKE_DUTY


@dataclass(frozen=True)
class Comparability:
    mixes: tuple[Mix, ...]
    duty: Duty
    all_at_once: tuple[str, ...]  # sites where hardly an old part ran beside the new ones
    concurrent_sites: tuple[str, ...]

    def mix(self, name: str) -> Mix:
        return next(each for each in self.mixes if each.name == name)


def comparability(everything: Compared, concurrent: Compared) -> Comparability:
    """Sides of `everything` with their mixtures; which sites give a control over the same dates."""
    days = everything.ended - everything.begun
    failed = everything.in_state("failed").astype(float)
    site_labels, site_codes = _sites(everything)
    modes = np.where(everything.mode_labels == "", "not named", everything.mode_labels)
    mixes = (
        _mix("site", "days in service", everything, (site_labels, site_codes), days),
        _seasons(everything),
        _mix("failure mode", "failures", everything, (modes, everything.mode_codes), failed),
        _lots(everything),
    )
    at_once, beside = _switched(concurrent)
    return Comparability(mixes, _duty(everything, days), at_once, beside)


def _sites(lives: Compared) -> tuple[NDArray[Any], NDArray[np.int64]]:
    if lives.lifetimes is None:
        return np.asarray([]), np.zeros(0, dtype=np.int64)
    return lives.lifetimes.site_labels, lives.lifetimes.site_codes


def _mix(
    name: str, of: str, lives: Compared, labels: tuple[NDArray[Any], NDArray[np.int64]], weights: NDArray[np.float64]
) -> Mix:
    """labels: the distinct ones, and which of them each life has."""
    known, codes = labels
    sides: dict[str, Mapping[str, float]] = {}
    for side, own in ((BEFORE, ~lives.is_new), (AFTER, lives.is_new)):
        rows = own & (weights > 0)
        sums = np.bincount(codes[rows], weights=weights[rows], minlength=len(known))
        sides[side] = {str(known[place]): float(sums[place]) for place in np.flatnonzero(sums).tolist()}
    return _shared(name, of, sides, lambda label: label)


def _shared(name: str, of: str, sides: Mapping[str, Mapping[str, float]], order: Callable[[str], Any]) -> Mix:
    labels = sorted(set(sides[BEFORE]) | set(sides[AFTER]), key=order)
    totals = {side: sum(counts.values()) for side, counts in sides.items()}
    shares = {
        side: tuple(counts.get(label, 0.0) / totals[side] if totals[side] else 0.0 for label in labels)
        for side, counts in sides.items()
    }
    return Mix(name, of, tuple(labels), shares[BEFORE], shares[AFTER])


def _seasons(lives: Compared) -> Mix:
    """Days watched by quarter of the year."""
    sides: dict[str, dict[str, float]] = {BEFORE: {}, AFTER: {}}
    if lives.lifetimes is not None and len(lives.begun):
        begun, ended = lives.begun.astype(int), lives.ended.astype(int)
        first, last = int(begun.min()), max(int(ended.max()), int(begun.min()) + 1)
        quarter = np.array([(dt.date.fromordinal(day).month - 1) // 3 for day in range(first, last)])
        for number, season in enumerate(SEASONS):
            until = np.concatenate([[0], np.cumsum(quarter == number)])
            days = until[np.clip(ended - first, 0, last - first)] - until[begun - first]
            for side, own in ((BEFORE, ~lives.is_new), (AFTER, lives.is_new)):
                sides[side][season] = float(days[own].sum())
    return _shared("season", "days in service", sides, SEASONS.index)


def _lots(lives: Compared) -> Mix:
    """Parts by lot; old and new never share one, so this names how many lots stand behind each side."""
    sides: dict[str, Counter[str]] = {BEFORE: Counter(), AFTER: Counter()}
    parts = dict(Part.objects.filter(component=lives.component).values_list("pk", "code"))
    chosen = [pk for pk, code in parts.items() if code in (*lives.old, *lives.new)]
    fitted = Fitting.objects.standing().filter(part_id__in=chosen, fitted_on__lte=lives.as_of)
    for pk, lot, count in fitted.values_list("part_id", "lot").annotate(count=Count("pk")).order_by():
        sides[AFTER if parts[pk] in lives.new else BEFORE][lot or "no lot"] += count
    return _shared("lot", "parts", sides, lambda label: label)


def duties_of(lives: Compared) -> tuple[str, NDArray[np.float64]]:
    """Strokes a day of each life's module (hours, where the life is counted in them); NaN where not known."""
    clock = "hours" if lives.clock == "hours" else "strokes"
    duties = module_duties(asked_of(lives.component, clock=lives.clock, as_of=lives.as_of), clock, of_all=True)
    modules, place = ranked(lives.modules)
    known = [duties[str(module)].a_day if str(module) in duties else np.nan for module in modules.tolist()]
    return clock, np.array(known)[place] if known else np.zeros(0)


def _duty(lives: Compared, days: NDArray[np.float64]) -> Duty:
    clock, a_day = duties_of(lives)
    found: dict[str, float | None] = {BEFORE: None, AFTER: None}
    if lives.lifetimes is not None:
        for side, own in ((BEFORE, ~lives.is_new), (AFTER, lives.is_new)):
            chosen = own & ~np.isnan(a_day) & (days > 0)
            if chosen.any():
                found[side] = float(np.average(a_day[chosen], weights=days[chosen]))
    return Duty(clock, found[BEFORE], found[AFTER])


def _switched(concurrent: Compared) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Sites without old parts beside the new ones since their start, and those with some."""
    if concurrent.lifetimes is None:
        return tuple(sorted(concurrent.starts)), ()
    days = np.maximum(concurrent.ended - concurrent.begun, 0.0)
    at_once: list[str] = []
    beside: list[str] = []
    lives, place = concurrent.lifetimes, {site: code for code, site in enumerate(concurrent.lifetimes.site_labels)}
    both_by_site = np.append(np.bincount(lives.site_codes, weights=days, minlength=len(place)), 0.0)
    old_days = np.where(concurrent.is_new, 0.0, days)
    old_by_site = np.append(np.bincount(lives.site_codes, weights=old_days, minlength=len(place)), 0.0)
    for site in sorted(concurrent.starts):
        old, both = (sums[place.get(site, -1)] for sums in (old_by_site, both_by_site))
        (beside if both > 0 and old / both >= ALL_AT_ONCE else at_once).append(site)
    return tuple(at_once), tuple(beside)
