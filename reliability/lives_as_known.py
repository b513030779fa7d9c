"""Lives as they were known on an earlier day: clocks made again in memory from what had reached the book by then."""

from __future__ import annotations

import datetime as dt
from collections import Counter
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from contextvars import ContextVar
from dataclasses import dataclass
from typing import NamedTuple

from fleet.clock_records import Loaded, load_records
from fleet.clocks import ModuleClocks, SpanClock, clocks_of
from reliability.fleet_lives import LifeRow
from reliability.life_rules import Facts, Point, Rules, tell

MODULES_AT_ONCE = 400
MOST_SHARED = 5_000  # modules, each on one day, whose clocks are held in memory at once

Clocks = tuple[Loaded, ModuleClocks]
_shared: ContextVar[dict[tuple[dt.date, int], Clocks] | None] = ContextVar("shared records", default=None)


class Known(NamedTuple):
    """What no later day changes about a fitting."""

    module: int
    reason: str
    mode: int | None
    age_at_fit: float
    label: object
    also: object = None


@dataclass(frozen=True)
class Places:
    """Sites that report at once, with their lag; and the rigs."""

    lags: Mapping[int, int]
    rigs: frozenset[int]


@contextmanager
def shared_records() -> Iterator[None]:
    """Within it, the clocks made for one question serve the next ones about the same day; nobody may write meanwhile
    what they should see.
    """
    token = _shared.set({})
    try:
        yield
    finally:
        _shared.reset(token)


def modules_as_known(module_ids: Iterable[int], known_on: dt.date) -> Iterator[Clocks]:
    """Records and clocks of modules, in the order of their keys."""
    keys, shared = sorted(set(module_ids)), _shared.get()
    if shared is None or len(keys) > MOST_SHARED:
        yield from _made(keys, known_on)
        return
    missing = [key for key in keys if (known_on, key) not in shared]
    if len(shared) + len(missing) > MOST_SHARED:
        shared.clear()
        missing = keys
    shared.update(((known_on, each[0].record.module), each) for each in _made(missing, known_on))
    yield from (shared[known_on, key] for key in keys if (known_on, key) in shared)


def _made(keys: list[int], known_on: dt.date) -> Iterator[Clocks]:
    for start in range(0, len(keys), MODULES_AT_ONCE):
        for loaded in load_records(keys[start : start + MODULES_AT_ONCE], known_on):
            yield loaded, clocks_of(loaded.record)


def rows_as_known(
    fittings: Mapping[int, Known],
    rules: Rules,
    places: Places,
    known_on: dt.date,
    only_sites: frozenset[int] | None = None,
) -> tuple[list[LifeRow], dict[str, list[int]]]:
    """Rows as the grouped query gives them, and the fittings left out by reason."""
    counts: Counter[LifeRow] = Counter()
    left_out: dict[str, list[int]] = {}
    for loaded, clocks in modules_as_known((known.module for known in fittings.values()), known_on):
        points = points_of(clocks, rules.clock)
        removed = {span.fitting: span.removed_day for span in loaded.record.spans}
        for span in clocks.spans:
            known = fittings.get(span.fitting_id)
            if known is None or (span.fitted_day is not None and span.fitted_day > rules.as_of):
                continue
            site = site_as_of(loaded, span, rules.as_of)
            if only_sites is not None and site not in only_sites:
                continue
            told = tell(_facts(span, known, removed[span.fitting_id], site, rules, places), points, rules)
            measured = rules.clock == "days" or bool(getattr(span, f"{rules.clock}_measured"))
            also = known.also if rules.also != "mode" or told.state == "failed" else None
            counts[LifeRow(*told, site, known.label, 1, 0 if measured else 1, also)] += 1
            if told.left_out is not None:
                left_out.setdefault(told.left_out, []).append(span.fitting_id)
    rows = [row._replace(count=count, not_measured=row.not_measured * count) for row, count in counts.items()]
    return rows, left_out


def points_of(clocks: ModuleClocks, clock: str) -> list[Point]:
    return [
        Point(knot.day, getattr(knot, clock), knot.seen_working, clock != "days" and getattr(knot, f"{clock}_read"))
        for knot in clocks.knots
    ]


def site_as_of(loaded: Loaded, span: SpanClock, as_of: int) -> int | None:
    """The site of the part's end; of a part that runs on that day the last field or rig site by then."""
    if span.end_day is not None and span.end_day <= as_of:
        return span.site_id
    begun = [stay for stay in loaded.record.stays if stay.from_day <= as_of]
    served = [stay for stay in begun if stay.in_service] or begun
    return served[-1].site if served else None


def _facts(
    span: SpanClock, known: Known, removed_day: int | None, site: int | None, rules: Rules, places: Places
) -> Facts:
    return Facts(
        reason=known.reason,
        mode=known.mode,
        age_at_fit=known.age_at_fit,
        fitted_day=span.fitted_day,
        end_day=span.end_day,
        removed_day=removed_day,
        records_day=span.records_day,
        last_good_entered=span.last_good_entered,
        at_fit=getattr(span, f"{rules.clock}_at_fit"),
        at_records=getattr(span, f"{rules.clock}_at_records"),
        at_good=getattr(span, f"{rules.clock}_at_good"),
        at_end=getattr(span, f"{rules.clock}_at_end"),
        rig=site in places.rigs,
        once=site in places.lags,
        lag=places.lags.get(site, 0) if site is not None else 0,
    )
