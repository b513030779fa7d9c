"""From a module's stays, stops, visits, readings and fittings to its three clocks. Pure functions, no database.

Days are ordinal day numbers (`date.toordinal()`), instants carry the fraction of the site's own day. A module with
placements is in service during its stays at field and rig sites, one without from its first record on; stops take
their time away. The last knot lies far in the future, so that every later day lies between two knots.
"""

from __future__ import annotations

import datetime as dt
from bisect import bisect_left, bisect_right
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

from fleet.clock_counts import CountClock, Face, Stretch, accumulate, with_fitting_counts

FAR_DAY = float(dt.date(2199, 12, 31).toordinal())
NOON = 0.5  # what is known only as a day is put in its middle on the counters


class Stay(NamedTuple):
    from_day: int
    to_day: int | None  # that day no more
    site: int
    kind: str = "field"
    records_day: int | None = None
    strokes_per_day: float | None = None
    hours_per_day: float | None = None

    @property
    def in_service(self) -> bool:
        return self.kind != "depot"

    @property
    def end(self) -> float:
        return FAR_DAY if self.to_day is None else float(self.to_day)


class Span(NamedTuple):
    """One fitting: its days, its instants where a visit tells them, and the counts measured at its ends."""

    fitting: int
    fitted_day: int | None
    end_day: int | None = None  # failed, else removed
    removed_day: int | None = None
    failed: bool = False
    last_good_day: int | None = None
    fitted_at: float | None = None
    ended_at: float | None = None
    strokes_at_fit: float | None = None
    strokes_at_removal: float | None = None
    hours_at_fit: float | None = None
    hours_at_removal: float | None = None


@dataclass(slots=True)
class ModuleRecord:
    """All that a module's clocks are made from, in the order of time where the order matters."""

    module: int
    stays: list[Stay] = field(default_factory=list)
    stops: list[tuple[float, float | None]] = field(default_factory=list)
    looks: list[float] = field(default_factory=list)
    strokes: list[Face] = field(default_factory=list)
    hours: list[Face] = field(default_factory=list)
    spans: list[Span] = field(default_factory=list)
    built_day: int | None = None
    scrapped_day: int | None = None
    records_day: int | None = None


class Knot(NamedTuple):
    day: float
    days: float
    hours: float | None
    strokes: float | None
    measured: bool
    seen_working: bool
    strokes_read: bool
    hours_read: bool


class SpanClock(NamedTuple):
    """The columns of FittingClock for one fitting."""

    fitting_id: int
    module_id: int
    site_id: int | None
    fitted_day: int | None
    end_day: int | None
    records_day: int | None
    last_good_day: float | None
    last_good_entered: bool
    days_at_fit: float | None
    days_at_records: float | None
    days_at_good: float | None
    days_at_end: float | None
    hours_at_fit: float | None
    hours_at_records: float | None
    hours_at_good: float | None
    hours_at_end: float | None
    strokes_at_fit: float | None
    strokes_at_records: float | None
    strokes_at_good: float | None
    strokes_at_end: float | None
    strokes_measured: bool
    hours_measured: bool


@dataclass(frozen=True, slots=True)
class ModuleClocks:
    knots: list[Knot]
    spans: list[SpanClock]


class Service:
    """Days in service by any day, from stays and stops."""

    def __init__(self, record: ModuleRecord, start: float) -> None:
        end = FAR_DAY if record.scrapped_day is None else float(record.scrapped_day)
        stays = [(float(stay.from_day), stay.end) for stay in record.stays if stay.in_service]
        running = stays if record.stays else [(start, FAR_DAY)]
        standing = [(since, FAR_DAY if until is None else until) for since, until in record.stops]
        self.starts: list[float] = []
        self.ends: list[float] = []
        self.before: list[float] = []
        total = 0.0
        for since, until in _without(_merged((since, min(until, end)) for since, until in running), _merged(standing)):
            self.starts.append(since)
            self.ends.append(until)
            self.before.append(total)
            total += until - since

    def at(self, day: float) -> float:
        place = bisect_right(self.starts, day) - 1
        if place < 0:
            return 0.0
        return self.before[place] + min(day, self.ends[place]) - self.starts[place]


def _merged(pairs: Iterable[tuple[float, float]]) -> list[tuple[float, float]]:
    merged: list[tuple[float, float]] = []
    for since, until in sorted(pair for pair in pairs if pair[1] > pair[0]):
        if merged and since <= merged[-1][1]:
            merged[-1] = (merged[-1][0], max(until, merged[-1][1]))
        else:
            merged.append((since, until))
    return merged


def _without(running: list[tuple[float, float]], standing: list[tuple[float, float]]) -> list[tuple[float, float]]:
    left: list[tuple[float, float]] = []
    for since, until in running:
        for stopped, again in standing:
            if again <= since or stopped >= until:
                continue
            if stopped > since:
                left.append((since, stopped))
            since = again
        if since < until:
            left.append((since, until))
    return left


def clocks_of(record: ModuleRecord) -> ModuleClocks:
    """The knots of a module's clocks, and what they said at the ends of each fitting."""
    start = _first_day(record)
    if start is None:
        return ModuleClocks([], [_span_without_clock(record, span) for span in record.spans])
    service = Service(record, start)
    strokes = _count_clock(record, service, start, "strokes")
    hours = _count_clock(record, service, start, "hours")
    seen = _seen(record, strokes, hours)
    knots = _knots(service, strokes, hours, seen, start)
    seen_days = sorted(seen)
    spans = [_span_clock(record, span, service, strokes, hours, seen_days) for span in record.spans]
    return ModuleClocks(knots, spans)


def _first_day(record: ModuleRecord) -> float | None:
    days: list[float] = [float(stay.from_day) for stay in record.stays]
    days += [since for since, _ in record.stops]
    days += record.looks
    days += [face.day for face in record.strokes] + [face.day for face in record.hours]
    for span in record.spans:
        days += [float(day) for day in (span.fitted_day, span.end_day, span.removed_day) if day is not None]
    if record.built_day is not None:
        days.append(float(record.built_day))
    return min(days, default=None)


def _count_clock(record: ModuleRecord, service: Service, start: float, name: str) -> CountClock:
    counts: list[tuple[float, float]] = []
    for span in record.spans:
        at_fit, at_removal = getattr(span, f"{name}_at_fit"), getattr(span, f"{name}_at_removal")
        if at_fit is not None and span.fitted_day is not None:
            counts.append((_fitted_at(span), at_fit))
        # a count at the removal is none at a failure on an earlier day
        if at_removal is not None and span.removed_day is not None and span.end_day == span.removed_day:
            counts.append((_ended_at(span), at_removal))
    anchors = with_fitting_counts(accumulate(getattr(record, name)), counts)
    stretches = [
        Stretch(float(stay.from_day), stay.end, getattr(stay, f"{name}_per_day"))
        for stay in record.stays
        if stay.in_service
    ]
    return CountClock(anchors, stretches, service.at, start)


def _fitted_at(span: Span) -> float:
    return span.fitted_at if span.fitted_at is not None else (span.fitted_day or 0) + NOON


def _ended_at(span: Span) -> float:
    ended = span.ended_at if span.ended_at is not None else (span.end_day or 0) + NOON
    return max(ended, _fitted_at(span)) if span.fitted_day is not None else ended


def _seen(record: ModuleRecord, strokes: CountClock, hours: CountClock) -> set[float]:
    """When somebody looked: visits, counts that advanced, changes of parts without a visit of their own."""
    seen = set(record.looks)
    seen.update(anchor.day for clock in (strokes, hours) for anchor in clock.anchors if anchor.advanced)
    looked_days = {int(day) for day in seen}
    for span in record.spans:
        for day in (span.fitted_day, span.removed_day):
            if day is not None and day not in looked_days:
                seen.add(day + NOON)
    return seen


def _knots(service: Service, strokes: CountClock, hours: CountClock, seen: set[float], start: float) -> list[Knot]:
    strokes_read = {anchor.day for anchor in strokes.anchors if strokes.measured_at(anchor.day)}
    hours_read = {anchor.day for anchor in hours.anchors if hours.measured_at(anchor.day)}
    days = {start, FAR_DAY, *service.starts, *service.ends, *seen, *strokes_read, *hours_read}
    for stretches in (strokes.stretches, hours.stretches):
        days.update(end for stretch in stretches for end in (stretch.from_day, stretch.to_day))
    made = []
    for day in sorted(days):
        if not start <= day <= FAR_DAY:
            continue
        served = service.at(day)
        stroke, hour = day in strokes_read, day in hours_read
        made.append(
            Knot(
                day=day,
                days=served,
                hours=hours.at(day, served),
                strokes=strokes.at(day, served),
                measured=stroke or hour,
                seen_working=day in seen,
                strokes_read=stroke,
                hours_read=hour,
            )
        )
    return made


def _span_clock(
    record: ModuleRecord,
    span: Span,
    service: Service,
    strokes: CountClock,
    hours: CountClock,
    seen: Sequence[float],
) -> SpanClock:
    records_day = records_start(record, span)
    good_day, entered = _last_good(span, seen)
    good_at = None if good_day is None else good_day + (NOON if entered else 0.0)
    return SpanClock(
        span.fitting,
        record.module,
        served_site(record.stays, span),
        span.fitted_day,
        span.end_day,
        records_day,
        good_day,
        entered,
        None if span.fitted_day is None else service.at(span.fitted_day),
        None if records_day is None else service.at(records_day),
        None if good_day is None else service.at(good_day),
        None if span.end_day is None else service.at(span.end_day),
        *_counts(span, hours, span.hours_at_fit, span.hours_at_removal, records_day, good_at),
        *_counts(span, strokes, span.strokes_at_fit, span.strokes_at_removal, records_day, good_at),
        _measured(span, strokes, span.strokes_at_fit, span.strokes_at_removal),
        _measured(span, hours, span.hours_at_fit, span.hours_at_removal),
    )


Count = float | None


def _counts(
    span: Span, clock: CountClock, at_fit: Count, at_removal: Count, records_day: int | None, good_at: float | None
) -> tuple[Count, Count, Count, Count]:
    """One counter at the ends of a fitting; a count written down there beats the line between readings."""
    if at_fit is None and span.fitted_day is not None:
        at_fit = clock.at(_fitted_at(span))
    at_end = at_removal if span.end_day == span.removed_day else None
    if at_end is None and span.end_day is not None:
        at_end = clock.at(_ended_at(span))
        if at_end is not None and at_fit is not None:
            at_end = max(at_end, at_fit)
    at_records = None if records_day is None else clock.at(records_day)
    at_good = None if good_at is None else clock.at(good_at)
    return at_fit, at_records, at_good, at_end


def _measured(span: Span, clock: CountClock, at_fit: Count, at_removal: Count) -> bool:
    fit_known = at_fit is not None or (span.fitted_day is not None and clock.measured_at(_fitted_at(span)))
    if not fit_known or span.end_day is None:
        return fit_known
    return (at_removal is not None and span.end_day == span.removed_day) or clock.measured_at(_ended_at(span))


def _last_good(span: Span, seen: Sequence[float]) -> tuple[float | None, bool]:
    """The day entered, else the last look before the day of the failure, else the fitting itself."""
    if not span.failed or span.end_day is None:
        return None, False
    if span.last_good_day is not None:
        return float(span.last_good_day), True
    place = bisect_left(seen, span.end_day)
    looked = seen[place - 1] if place else None
    if span.fitted_day is not None and (looked is None or looked < _fitted_at(span)):
        return float(min(span.fitted_day, span.end_day)), False
    return looked, False


def records_start(record: ModuleRecord, span: Span) -> int | None:
    """From when on this fitting's end would have been written down, where that is after its start.

    The module's own day stands above the sites'. Otherwise the last day on which it stood at a site that did not
    keep records yet.
    """
    starts: list[int] = []
    if record.records_day is not None:
        starts.append(record.records_day)
    else:
        for stay in record.stays:
            if stay.records_day is None or (span.end_day is not None and stay.from_day > span.end_day):
                continue
            until = stay.records_day if stay.to_day is None else min(stay.records_day, stay.to_day)
            if until > stay.from_day:
                starts.append(until)
        if not record.stays:
            return None
    day = max(starts, default=None)
    if day is None or (span.fitted_day is not None and day <= span.fitted_day):
        return None
    return day


def served_site(stays: Sequence[Stay], span: Span) -> int | None:
    """Where the part last served: the field or rig site of its end, or of now; a depot only if it never served."""
    end = FAR_DAY if span.end_day is None else span.end_day
    begun = -FAR_DAY if span.fitted_day is None else span.fitted_day
    touched = [stay for stay in stays if stay.from_day <= end and stay.end >= begun]
    served = [stay for stay in touched if stay.in_service and (stay.end > begun or stay.end == begun == end)]
    # on the day of a move the record belongs to the stay that ends that day
    ended_here = [stay for stay in served if stay.from_day < end] or served
    if ended_here:
        return ended_here[-1].site
    return touched[-1].site if touched else None


def site_on(stays: Sequence[Stay], day: int) -> int | None:
    """The site a record of that day belongs to: field or rig before depot, then the stay that ends that day."""
    here = [stay for stay in stays if stay.from_day <= day <= stay.end]
    if not here:
        return None
    return min(here, key=lambda stay: (not stay.in_service, stay.end != day, stay.from_day)).site


def _span_without_clock(record: ModuleRecord, span: Span) -> SpanClock:
    nothing: dict[str, None] = dict.fromkeys(SpanClock._fields)
    flags = dict.fromkeys(("last_good_entered", "strokes_measured", "hours_measured"), False)
    return SpanClock(**{**nothing, **flags, "fitting_id": span.fitting, "module_id": record.module})  # type: ignore[arg-type]
