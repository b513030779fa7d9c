"""The rules for lives once more, slowly: service time counted hour by hour, every look and reading searched for.

Written from the rules' own words, sharing no code with the program, to be compared with it on random fleets.
"""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import dataclass, replace
from fractions import Fraction

from tests.reliability.told_fleet import SITES, ToldFitting, ToldModule, ToldStay

BEGIN, END = -100 * 24, 400 * 24
FAILURES = {"failed", "worn to limit"}
Row = tuple[str | None, str, float | None, float | None, float | None]


@dataclass(frozen=True)
class Question:
    as_of: int
    clock: str = "days"
    with_rigs: bool = False
    modes: tuple[str, ...] = ()
    worn_is_failure: bool = True


class SlowModule:
    def __init__(self, told: ToldModule) -> None:
        self.told = told
        self.served = [0]
        for hour in range(BEGIN, END):
            self.served.append(self.served[-1] + self._serves(hour))

    def _serves(self, hour: int) -> bool:
        if any(since <= hour and (until is None or hour < until) for since, until in self.told.stops):
            return False
        return not self.told.stays or any(
            SITES[stay.site][0] != "depot" and _holds(stay, hour) for stay in self.told.stays
        )

    def service(self, hour: int) -> Fraction:
        """Service days by an hour."""
        return Fraction(self.served[hour - BEGIN], 24)

    def strokes(self, hour: int) -> Fraction:
        before = [reading for reading in self.told.readings if reading.hour <= hour][-1]
        after = next((reading for reading in self.told.readings if reading.hour > hour), None)
        if after is None:
            return Fraction(before.strokes)
        ran, whole = (
            self.service(hour) - self.service(before.hour),
            self.service(after.hour) - self.service(before.hour),
        )
        share = ran / whole if whole else Fraction(hour - before.hour, after.hour - before.hour)
        return before.strokes + (after.strokes - before.strokes) * share

    def looks(self) -> list[int]:
        """Hours at which somebody saw the module working, or changed a part."""
        told = self.told
        seen = {visit.hour for visit in told.visits}
        for earlier, later in zip(told.readings, told.readings[1:], strict=False):
            if later.strokes > earlier.strokes:
                seen.add(later.hour)
        days = {hour // 24 for hour in seen}
        for fitting in told.fittings:
            for day in (fitting.fitted, fitting.removed):
                if day is not None and day not in days:
                    seen.add(day * 24 + 12)
        return sorted(seen)

    def value(self, clock: str, day: int, hour: int) -> Fraction:
        """Days are counted at the start of a day, strokes at the hour."""
        return self.service(day * 24) if clock == "days" else self.strokes(hour)


_made: dict[int, SlowModule] = {}


def slow_module(told: ToldModule) -> SlowModule:
    """Counting every hour is slow: once for each story."""
    made = _made.get(id(told))
    if made is None or made.told is not told:
        made = _made[id(told)] = SlowModule(told)
    return made


def _holds(stay: ToldStay, hour: int) -> bool:
    return stay.since * 24 <= hour and (stay.until is None or hour < stay.until * 24)


def end_of(fitting: ToldFitting) -> int | None:
    return fitting.failed if fitting.failed is not None else fitting.removed


def site_of(module: ToldModule, fitting: ToldFitting, as_of: int) -> str | None:
    """Where the part served last before its end, or on the as-of day while it runs."""
    end = end_of(fitting)
    runs = end is None or end > as_of
    if runs:
        for day in range(as_of, BEGIN // 24, -1):
            for stay in module.stays:
                if SITES[stay.site][0] != "depot" and _holds(stay, day * 24):
                    return stay.site
        return next((stay.site for stay in reversed(module.stays) if stay.since <= as_of), None)
    return _kept_site(module, fitting, end or 0)


def _kept_site(module: ToldModule, fitting: ToldFitting, end: int) -> str | None:
    begun = -(10**6) if fitting.fitted is None else fitting.fitted
    touched = [stay for stay in module.stays if stay.since <= end and (stay.until is None or stay.until >= begun)]
    served = []
    for stay in touched:
        longer = stay.until is None or stay.until > begun or stay.until == begun == end
        if SITES[stay.site][0] != "depot" and longer:
            served.append(stay)
    earlier = [stay for stay in served if stay.since < end]
    for choice in (earlier, served, touched):
        if choice:
            return choice[-1].site
    return None


def as_known(modules: list[ToldModule], day: int) -> list[ToldModule]:
    """What had reached the book by a day."""
    known = []
    for module in modules:
        fittings = []
        for fitting in module.fittings:
            begun = fitting.fitted_known if fitting.fitted_known is not None else fitting.fitted
            if begun is not None and begun > day:
                continue
            if fitting.removed_known is not None and fitting.removed_known > day:
                fitting = replace(fitting, removed=None, failed=None, reason="", last_good=None, removed_known=None)
            fittings.append(fitting)
        known.append(
            ToldModule(
                tag=module.tag,
                stays=[
                    replace(stay, until=None if stay.until is not None and stay.until > day else stay.until)
                    for stay in module.stays
                    if stay.since <= day
                ],
                stops=[
                    (since, None if until is not None and until // 24 > day else until)
                    for since, until in module.stops
                    if since // 24 <= day
                ],
                visits=[visit for visit in module.visits if visit.known <= day],
                readings=[reading for reading in module.readings if reading.known <= day],
                fittings=fittings,
                records_from=module.records_from,
            )
        )
    return known


def lags(modules: list[ToldModule], as_of: int) -> dict[str, int]:
    """For each site that reports at once the 95 % quantile of its failures' delays, of its visits' without any."""
    found = {}
    for site, (_, at_once, _) in SITES.items():
        if not at_once:
            continue
        failures, visits = [], []
        for module in modules:
            for fitting in module.fittings:
                if fitting.reason not in FAILURES or fitting.removed is None or fitting.removed > as_of:
                    continue
                if _kept_site(module, fitting, end_of(fitting) or 0) == site:
                    failures.append(max(0, (fitting.removed_known or 0) - (end_of(fitting) or 0)))
            for visit in module.visits:
                if visit.hour // 24 <= as_of and record_site(module, visit.hour // 24) == site:
                    visits.append(max(0, visit.known - visit.hour // 24))
        delays = sorted(failures or visits)
        found[site] = delays[math.ceil(0.95 * len(delays) - 1e-9) - 1] if delays else 0
    return found


def record_site(module: ToldModule, day: int) -> str | None:
    here = [stay for stay in module.stays if stay.since <= day and (stay.until is None or day <= stay.until)]
    here.sort(key=lambda stay: (SITES[stay.site][0] == "depot", stay.until != day, stay.since))
    return here[0].site if here else None


def slow_rows(modules: list[ToldModule], question: Question) -> Counter[Row]:
    delays = lags(modules, question.as_of)
    rows: Counter[Row] = Counter()
    for told in modules:
        module = slow_module(told)
        for fitting in told.fittings:
            if fitting.fitted is not None and fitting.fitted > question.as_of:
                continue
            rows[_row(module, fitting, question, delays)] += 1
    return rows


def _row(module: SlowModule, fitting: ToldFitting, question: Question, delays: dict[str, int]) -> Row:
    site = site_of(module.told, fitting, question.as_of)
    kind, at_once, _ = SITES.get(site or "", ("field", None, None))
    end, over, cut_hour = end_of(fitting), False, None
    if at_once:
        cut_day = question.as_of - delays[site or ""]
        over = end is not None and end <= cut_day
        cut_hour, last_read = cut_day * 24, cut_day * 24 + 23
    else:
        looks = [hour for hour in module.looks() if hour < (question.as_of + 1) * 24]
        cut_hour = looks[-1] if looks else None
        last_read = cut_hour or 0
        removed_by_then = fitting.removed is not None and fitting.removed <= question.as_of
        over = end is not None and (removed_by_then or (cut_hour is not None and end * 24 <= cut_hour))
    state = _state(fitting, question) if over else "running"
    if kind == "rig" and not question.with_rigs:
        return "on a test stand", state, None, None, None
    if fitting.fitted is None:
        return "fitting day not known", state, None, None, None
    if not over and cut_hour is None:
        return "module never looked at", state, None, None, None
    last_day = Fraction(end) if over and end is not None else Fraction(cut_hour or 0, 24)
    if fitting.fitted > last_day:
        return "fitted after the last day that counts at its site", state, None, None, None
    if question.clock != "days" and fitting.age_at_fit:
        return "used part whose age on this clock is not known", state, None, None, None
    begun = module.value(question.clock, fitting.fitted, fitting.fitted * 24 + 12)
    if over and end is not None:
        reached = module.value(question.clock, end, end * 24 + 12)
    elif question.clock == "days":
        reached = module.service(cut_hour or 0)
    else:
        read = [reading.hour for reading in module.told.readings if reading.hour <= last_read]
        reached = module.strokes(read[-1] if read else cut_hour or 0)
    began = _records_began(module.told, fitting)
    if began is not None and began >= last_day:
        return "ended before records were kept", state, None, None, None
    entry = Fraction(fitting.age_at_fit)
    if began is not None:
        entry += max(Fraction(0), module.value(question.clock, began, began * 24) - begun)
    return _rounded(module, fitting, question, state, entry, fitting.age_at_fit + reached - begun, begun, bool(at_once))


def _state(fitting: ToldFitting, question: Question) -> str:
    if fitting.reason == "failed" or (fitting.reason == "worn to limit" and question.worn_is_failure):
        return "failed" if not question.modes or fitting.mode in question.modes else "other mode"
    return {"worn to limit": "worn", "not known": "not known"}.get(fitting.reason, "withdrawn")


def _records_began(module: ToldModule, fitting: ToldFitting) -> int | None:
    days = [] if module.records_from is None else [module.records_from]
    for stay in module.stays if module.records_from is None else []:
        began = SITES[stay.site][2]
        end = end_of(fitting)
        if began is None or (end is not None and stay.since > end):
            continue
        silent_until = began if stay.until is None else min(began, stay.until)
        if silent_until > stay.since:
            days.append(silent_until)
    latest = max(days, default=None)
    return None if latest is None or (fitting.fitted is not None and latest <= fitting.fitted) else latest


def _rounded(
    module: SlowModule,
    fitting: ToldFitting,
    question: Question,
    state: str,
    exact_entry: Fraction,
    exact_age: Fraction,
    begun: Fraction,
    at_once: bool,
) -> Row:
    entry = math.floor(exact_entry)
    age = math.ceil(exact_age) if state == "failed" else math.floor(exact_age)
    if age <= entry:
        if state == "failed" and question.clock == "days":
            return None, state, entry, entry + 1, entry
        return "nothing observed yet: age 0", state, None, None, None
    if state != "failed" or (at_once and fitting.last_good is None):
        return None, state, entry, age, None
    if fitting.last_good is not None:
        good = module.value(question.clock, fitting.last_good, fitting.last_good * 24 + 12)
    else:
        looks = [hour for hour in module.looks() if hour < (end_of(fitting) or 0) * 24]
        fitted = fitting.fitted or 0
        if looks and looks[-1] >= fitted * 24 + 12:
            good = module.service(looks[-1]) if question.clock == "days" else module.strokes(looks[-1])
        else:
            good = module.value(question.clock, fitted, fitted * 24)
    last_good = max(entry, math.floor(fitting.age_at_fit + good - begun))
    return None, state, entry, age, None if last_good >= age else last_good
