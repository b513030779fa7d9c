"""The rules for one life on whole columns at once: what `life_sql.py` says in SQL, for comparisons within positions.

A comparison needs every life with its position, at a million lives too. A test holds these rules and those in SQL
together, on the demo and on random fleets.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reliability.life_rules import CLOSE, Reason
from reliability.redesigns.clock_lookups import counts_on, last_knot
from reliability.redesigns.fitting_columns import REASONS, FittingColumns
from reliability.stats.ranks import ranked

Floats = NDArray[np.float64]
Numbers = NDArray[np.int64]
Flags = NDArray[np.bool_]

STATES = ("failed", "worn", "not known", "withdrawn", "running")
FAILED, WORN, NOT_KNOWN, WITHDRAWN, RUNNING = range(len(STATES))
REASONS_OUT = tuple(reason.value for reason in Reason)
COUNTS = -1  # left out for no reason


@dataclass(frozen=True)
class Choices:
    """What is asked of the records, in the database's own numbers; sites None: all."""

    clock: str
    own_clock: bool
    as_of: int
    sites: Collection[int] | None = None
    with_rigs: bool = False
    worn_is_failure: bool = True


@dataclass(frozen=True)
class SiteFacts:
    """Sites by number: those that report every failure at once, test stands, and days until a failure is known."""

    prompt: frozenset[int]
    rigs: frozenset[int]
    lags: Mapping[int, int]


@dataclass(frozen=True, eq=False)
class LifeColumns:
    """One row a life: which fitting (a row of the columns read), its state and ages, where it was and until when."""

    rows: Numbers
    state: NDArray[np.int8]  # index into STATES
    entry: Floats
    duration: Floats
    last_good: Floats  # NaN where the age at the failure is known
    site: Numbers  # 0: no place
    last_day: Floats
    left_out: dict[str, int]


@dataclass(frozen=True, eq=False)
class Ends:
    """Of each fitting where it was, whether its site reports at once, its state, its last day and the count then."""

    site: Numbers
    prompt: Flags
    state: NDArray[np.int8]
    last_day: Floats
    at_last: Floats

    def chosen(self, rows: Numbers) -> Ends:
        return Ends(**{name: column[rows] for name, column in self.__dict__.items()})


def ends_of(fittings: FittingColumns, choices: Choices, facts: SiteFacts, stays: Mapping[int, int]) -> Ends:
    """stays: where each module stood on the as-of day."""
    site = _sites(fittings, choices.as_of, stays)
    prompt = among(site, facts.prompt)
    ended, last_day, at_last = _ends(fittings, choices, facts, site, prompt)
    return Ends(site, prompt, _states(fittings, ended, choices.worn_is_failure), last_day, at_last)


def lives_of(
    fittings: FittingColumns,
    ends: Ends,
    choices: Choices,
    facts: SiteFacts,
    starts: Mapping[int, int] | None = None,
) -> LifeColumns:
    """The lives under the choices.

    starts: the day on which observation begins at a site; a part that was in already enters at its age on that day.
    """
    kept = np.arange(len(fittings))
    if choices.sites is not None:
        there = among(ends.site, choices.sites)
        if not there.all():
            kept = np.flatnonzero(there)
            fittings, ends = fittings.chosen(kept), ends.chosen(kept)
    records_day, at_records = _begun(fittings, choices.clock, ends.site, starts or {})
    failed = ends.state == FAILED
    with np.errstate(invalid="ignore"):
        from_records = (records_day > 0) & ~(at_records < fittings.at_fit)
        begun = np.where(from_records, at_records, fittings.at_fit)
        entry = _down(fittings.age_at_fit + begun - fittings.at_fit, choices.clock)
        age = fittings.age_at_fit + ends.at_last - fittings.at_fit
        whole = np.where(failed, _up(age, choices.clock), _down(age, choices.clock))
        good = _down(fittings.age_at_fit + fittings.at_good - fittings.at_fit, choices.clock)
        good = np.where(failed & (fittings.entered | ~ends.prompt), good, np.nan)
        first_day = failed & (whole <= entry) if choices.clock == "days" else np.zeros(len(fittings), dtype=bool)
        reasons = _reasons(fittings, choices, facts, ends, (records_day, at_records), (entry, whole, first_day))
        last_good = np.where(good >= whole, np.nan, np.where(good < entry, entry, good))
    last_good = np.where(first_day, entry, last_good)
    duration = np.where(first_day, entry + 1, whole)
    counted = np.bincount(reasons + 1, minlength=len(REASONS_OUT) + 1)[1:]
    stands = np.flatnonzero(reasons == COUNTS)
    return LifeColumns(
        rows=kept[stands],
        state=ends.state[stands],
        entry=entry[stands],
        duration=duration[stands],
        last_good=last_good[stands],
        site=ends.site[stands],
        last_day=ends.last_day[stands],
        left_out={reason: int(count) for reason, count in zip(REASONS_OUT, counted.tolist(), strict=True) if count},
    )


def among(numbers: Numbers, wanted: Collection[int]) -> Flags:
    """Which of the numbers are wanted: by a table, since they are the database's own and lie close together."""
    table = np.zeros(int(max([numbers.max(initial=0), *wanted])) + 1, dtype=bool)
    table[list(wanted)] = True
    return table[numbers]


def told(numbers: Numbers, told: Mapping[int, int], otherwise: int) -> Numbers:
    table = np.full(int(max([numbers.max(initial=0), *told])) + 1, otherwise, dtype=np.int64)
    table[list(told)] = list(told.values())
    return table[numbers]


def _sites(fittings: FittingColumns, as_of: int, stays: Mapping[int, int]) -> Numbers:
    """Where it ended, if it had by then; else where its module stood on the as-of day."""
    later = (fittings.end_day == 0) | (fittings.end_day > as_of)
    site = fittings.site.copy()
    site[later] = told(fittings.module[later], stays, 0)
    return site


def _begun(fittings: FittingColumns, clock: str, site: Numbers, starts: Mapping[int, int]) -> tuple[Numbers, Floats]:
    """Day and count from which each fitting is under observation: of the records, or of its site's start."""
    if not starts:
        return fittings.records_day, fittings.at_records
    start = told(site, starts, 0)
    early = (fittings.fitted_day > 0) & (fittings.fitted_day < start)
    modules, day, which = _pairs(fittings.module[early], start[early])
    count = counts_on(modules, day, clock)[which]
    later = early & (start > fittings.records_day)
    at_records = fittings.at_records.copy()
    at_records[later] = count[later[early]]
    return np.where(later, start, fittings.records_day), at_records


def _pairs(modules: Numbers, days: Numbers) -> tuple[Numbers, Floats, Numbers]:
    """The distinct pairs of module and day, and which of them each row is."""
    where, place = ranked(modules)
    when, date = ranked(days)
    pairs, which = ranked(place * max(when.size, 1) + date)
    return where[pairs // max(when.size, 1)], when[pairs % max(when.size, 1)].astype(float), which


def _ends(
    fittings: FittingColumns, choices: Choices, facts: SiteFacts, site: Numbers, prompt: Flags
) -> tuple[Flags, Floats, Floats]:
    """Whether each has ended, its last day and the count then.

    What still runs counts up to the day on which a failure would be known, or to when its module was last seen.
    """
    once_day = choices.as_of - told(site, facts.lags, 0)
    has_end = fittings.end_day > 0
    still = ~has_end | (prompt & (fittings.end_day > once_day)) | (~prompt & fittings.removed_later)
    cut_day, at_cut = np.full(len(fittings), np.nan), np.full(len(fittings), np.nan)
    limit = np.where(prompt[still], once_day[still], -1)
    modules, day, which = _pairs(fittings.module[still], limit)
    day, count = _cuts(modules, day, choices)
    cut_day[still], at_cut[still] = day[which], count[which]
    with np.errstate(invalid="ignore"):
        over = has_end & ~prompt & (fittings.end_day <= cut_day)
    ended = ~still | over
    last_day = np.where(ended, fittings.end_day, cut_day)
    return ended, last_day, np.where(ended, fittings.at_end, at_cut)


def _cuts(modules: Numbers, limits: Floats, choices: Choices) -> tuple[Floats, Floats]:
    """Until when, and to which count, running parts are known to be good; limit -1: until the module was last seen."""
    prompt = limits >= 0
    day = limits.copy()
    seen_by = np.full(int((~prompt).sum()), float(choices.as_of + 1))
    day[~prompt] = last_knot(modules[~prompt], seen_by, "seen_working", before=True)
    count_day = day.copy()
    if choices.clock != "days":
        read = f"{choices.clock}_read"
        count_day[prompt] = last_knot(modules[prompt], day[prompt] + 1, read, before=True)
        seen = ~prompt & ~np.isnan(day)
        count_day[seen] = last_knot(modules[seen], day[seen], read)
        count_day = np.where(np.isnan(count_day), day, count_day)
    count = np.full(len(day), np.nan)
    known = ~np.isnan(count_day)
    count[known] = counts_on(modules[known], count_day[known], choices.clock)
    return day, count


def _states(fittings: FittingColumns, ended: Flags, worn_is_failure: bool) -> NDArray[np.int8]:
    of_reason = {"failed": FAILED, "worn to limit": FAILED if worn_is_failure else WORN, "not known": NOT_KNOWN}
    table = np.array([of_reason.get(reason, WITHDRAWN) for reason in REASONS], dtype=np.int8)
    return np.where(ended, table[fittings.reason], np.int8(RUNNING))


def _reasons(
    fittings: FittingColumns,
    choices: Choices,
    facts: SiteFacts,
    ends: Ends,
    begun: tuple[Numbers, Floats],
    ages: tuple[Floats, Floats, Flags],
) -> Numbers:
    """Why each is left out, as a place among `Reason`; the first that holds counts."""
    records_day, at_records = begun
    at_last, last_day = ends.at_last, ends.last_day
    entry, whole, first_day = ages
    no = np.zeros(len(fittings), dtype=bool)
    tests = (
        (Reason.RIG, no if choices.with_rigs else among(ends.site, facts.rigs)),
        (Reason.DAY_NOT_KNOWN, fittings.fitted_day == 0),
        (Reason.NOT_SEEN, np.isnan(last_day)),
        (Reason.TOO_LATE, fittings.fitted_day > last_day),
        (Reason.USED, no if choices.own_clock else fittings.age_at_fit > 0),
        (Reason.NO_CLOCK, np.isnan(fittings.at_fit) | np.isnan(at_last) | ((records_day > 0) & np.isnan(at_records))),
        (Reason.BEFORE_RECORDS, (records_day > 0) & (records_day >= last_day)),
        (Reason.NO_AGE, ~first_day & (whole <= entry)),
    )
    places = {reason: place for place, reason in enumerate(Reason)}
    found = np.full(len(fittings), COUNTS)
    for reason, holds in reversed(tests):
        found[holds] = places[reason]
    return found


def _up(values: Floats, clock: str) -> Floats:
    return _whole(values) if clock == "hours" else np.ceil(values - CLOSE)


def _down(values: Floats, clock: str) -> Floats:
    return _whole(values) if clock == "hours" else np.floor(values + CLOSE)


def _whole(values: Floats) -> Floats:
    """Hours are kept as read; a thousandth makes equal ones equal again after a subtraction."""
    return np.floor(values * 1000 + 0.5) / 1000.0
