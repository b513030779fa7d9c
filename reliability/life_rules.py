"""The rules for one life in plain Python: for what was known on an earlier day, whose clocks are in no table."""

from __future__ import annotations

import math
from bisect import bisect_right
from collections.abc import Collection, Sequence
from dataclasses import dataclass
from enum import Enum
from typing import NamedTuple

CLOSE = 1e-6  # sums of fractions of a day are not exact


class Reason(Enum):
    """Why a fitting is left out of the life data, in the words shown to people."""

    RIG = "on a test stand"
    DAY_NOT_KNOWN = "fitting day not known"
    NOT_SEEN = "module never looked at"
    TOO_LATE = "fitted after the last day that counts at its site"
    USED = "used part whose age on this clock is not known"
    NO_CLOCK = "neither readings nor a duty known"
    BEFORE_RECORDS = "ended before records were kept"
    NO_AGE = "nothing observed yet: age 0"
    STRUCK_OUT = "struck out"
    OTHER_CLOCK = "counted on another clock"


class Rules(NamedTuple):
    """The choices of a question that the rules for one life need."""

    clock: str
    own_clock: bool
    as_of: int
    modes: Collection[int] | None
    with_rigs: bool
    worn_is_failure: bool
    also: str | None = None


class Point(NamedTuple):
    """A knot of one module's clock of the kind asked for."""

    day: float
    value: float | None
    seen: bool
    read: bool


@dataclass(frozen=True, slots=True)
class Facts:
    """One fitting and where it stood."""

    reason: str
    mode: int | None
    age_at_fit: float
    fitted_day: int | None
    end_day: int | None
    removed_day: int | None
    records_day: int | None
    last_good_entered: bool
    at_fit: float | None
    at_records: float | None
    at_good: float | None
    at_end: float | None
    rig: bool
    once: bool
    lag: int


class Told(NamedTuple):
    left_out: str | None
    state: str
    entry: float | None
    duration: float | None
    last_good: float | None


def tell(facts: Facts, points: Sequence[Point], rules: Rules) -> Told:
    """What becomes of one fitting: an entry, a duration and a last good age, or a reason to leave it out."""
    over, last_day, at_last = _last(facts, points, rules)
    state = _state(facts, rules) if over else "running"
    reason = _left_out(facts, last_day, at_last, rules)
    if reason is not None:
        return Told(reason.value, state, None, None, None)
    assert facts.at_fit is not None
    assert at_last is not None
    begun = facts.at_fit if facts.records_day is None else max(facts.at_fit, facts.at_records or 0.0)
    entry = _down(facts.age_at_fit + begun - facts.at_fit, rules.clock)
    age = facts.age_at_fit + at_last - facts.at_fit
    duration = _up(age, rules.clock) if state == "failed" else _down(age, rules.clock)
    if state == "failed" and rules.clock == "days" and duration <= entry:
        return Told(None, state, entry, entry + 1, entry)
    if duration <= entry:
        return Told(Reason.NO_AGE.value, state, None, None, None)
    return Told(None, state, entry, duration, _last_good(facts, state, entry, duration, rules))


def _last(facts: Facts, points: Sequence[Point], rules: Rules) -> tuple[bool, float | None, float | None]:
    """Whether the life is over, and the last day and count at which that is known."""
    once_day = rules.as_of - facts.lag
    if facts.end_day is not None:
        if facts.once and facts.end_day <= once_day:
            return True, facts.end_day, facts.at_end
        if not facts.once and facts.removed_day is not None and facts.removed_day <= rules.as_of:
            return True, facts.end_day, facts.at_end
    if facts.once:
        cut: float | None = once_day
    else:
        cut = max((point.day for point in points if point.seen and point.day < rules.as_of + 1), default=None)
        if cut is not None and facts.end_day is not None and facts.end_day <= cut:
            return True, facts.end_day, facts.at_end
    if cut is None:
        return False, None, None
    count_day = cut
    if rules.clock != "days":
        reads = [point.day for point in points if point.read]
        reads = [day for day in reads if (day < cut + 1 if facts.once else day <= cut)]
        count_day = max(reads, default=cut)
    return False, cut, value_at(points, count_day)


def value_at(points: Sequence[Point], day: float) -> float | None:
    """The clock between two knots; none before the first."""
    place = bisect_right(points, day, key=lambda point: point.day)
    if place == 0 or place == len(points):
        return None
    before, after = points[place - 1], points[place]
    if before.value is None or after.value is None:
        return None
    return before.value + (after.value - before.value) * (day - before.day) / (after.day - before.day)


def _state(facts: Facts, rules: Rules) -> str:
    failed = facts.reason == "failed" or (facts.reason == "worn to limit" and rules.worn_is_failure)
    if failed:
        return "failed" if rules.modes is None or facts.mode in rules.modes else "other mode"
    if facts.reason == "worn to limit":
        return "worn"
    return "not known" if facts.reason == "not known" else "withdrawn"


def _left_out(facts: Facts, last_day: float | None, at_last: float | None, rules: Rules) -> Reason | None:
    if facts.rig and not rules.with_rigs:
        return Reason.RIG
    if facts.fitted_day is None:
        return Reason.DAY_NOT_KNOWN
    if last_day is None:
        return Reason.NOT_SEEN
    if facts.fitted_day > last_day:
        return Reason.TOO_LATE
    if facts.age_at_fit > 0 and not rules.own_clock:
        return Reason.USED
    if facts.at_fit is None or at_last is None or (facts.records_day is not None and facts.at_records is None):
        return Reason.NO_CLOCK
    if facts.records_day is not None and facts.records_day >= last_day:
        return Reason.BEFORE_RECORDS
    return None


def _last_good(facts: Facts, state: str, entry: float, duration: float, rules: Rules) -> float | None:
    if state != "failed" or facts.at_good is None or facts.at_fit is None:
        return None
    if not facts.last_good_entered and facts.once:
        return None
    good = _down(facts.age_at_fit + facts.at_good - facts.at_fit, rules.clock)
    return None if good >= duration else max(good, entry)


def _up(value: float, clock: str) -> float:
    return _as_read(value) if clock == "hours" else float(math.ceil(value - CLOSE))


def _down(value: float, clock: str) -> float:
    return _as_read(value) if clock == "hours" else float(math.floor(value + CLOSE))


def _as_read(value: float) -> float:
    return math.floor(value * 1000 + 0.5) / 1000.0
