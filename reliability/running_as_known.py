"""What ran on a day as far as the book had it by then.

What became known later is not there: fittings, removals (the part still runs), stops, readings, visits, and the end of
a stay or of a stop after that day. Stays and scrappings carry no day on which they became known and count from their
own day; so do the settings of sites and modules, which are taken as they are now. Corrections are not undone: a value
put right later counts as if it had been right, and a record struck out later as if it had never been made.
"""

from __future__ import annotations

import datetime as dt
from bisect import bisect_right
from collections.abc import Iterator, Mapping
from typing import Any

from fleet.clock_records import Loaded
from fleet.clocks import Knot, ModuleClocks, SpanClock, Stay
from reliability.lives_as_known import modules_as_known

LAST_OF_DAY = 0.999
Row = dict[str, Any]
Places = Mapping[int, tuple[str, str]]  # code and kind of each site


def running_as_known(
    fittings: list[Row], places: Places, clock: str, as_of: dt.date, known_on: dt.date
) -> Iterator[Row]:
    """Fittings of the list that ran on the day, in its order, each with the columns of `running_parts._fitted`."""
    found: dict[int, Row] = {}
    wanted = {each["pk"] for each in fittings}
    for loaded, clocks in modules_as_known((each["module_id"] for each in fittings), known_on):
        removed = {span.fitting: span.removed_day for span in loaded.record.spans}
        at_module = _module_row(loaded, clocks, places, clock, as_of)
        for span in clocks.spans:
            if span.fitting_id in wanted and _runs(span, removed[span.fitting_id], as_of.toordinal()):
                at_fit, at_records = getattr(span, f"{clock}_at_fit"), getattr(span, f"{clock}_at_records")
                found[span.fitting_id] = {**at_module, "at_fit": at_fit, "at_records": at_records}
    return ({**each, **found[each["pk"]]} for each in fittings if each["pk"] in found)


def _runs(span: SpanClock, removed_day: int | None, as_of: int) -> bool:
    return (span.fitted_day is None or span.fitted_day <= as_of) and (removed_day is None or removed_day > as_of)


def moment_of(as_of: dt.date, clock: str) -> float:
    """Where a module's clock is read for a day: a count with the readings of that very day, for the pace goes by those
    of the past weeks and not by the stretch that the last one ends, which may be hours long.
    """
    return as_of.toordinal() + (0.0 if clock == "days" else LAST_OF_DAY)


def _module_row(loaded: Loaded, clocks: ModuleClocks, places: Places, clock: str, as_of: dt.date) -> Row:
    """Where the module stands on the day, and its clock on both sides of it."""
    day, record = as_of.toordinal(), loaded.record
    place = bisect_right(clocks.knots, moment_of(as_of, clock), key=lambda knot: knot.day)
    before = clocks.knots[place - 1] if place else None
    after = clocks.knots[place] if place < len(clocks.knots) else None
    stay = _stay_on(record.stays, day)
    code, kind = (None, None) if stay is None else places[stay.site]
    return {
        "scrapped": None if record.scrapped_day is None else dt.date.fromordinal(record.scrapped_day),
        "site_code": code,
        "site_kind": kind,
        "placed": min((dt.date.fromordinal(stay.from_day) for stay in record.stays), default=None),
        "built": None if record.built_day is None else dt.date.fromordinal(record.built_day),
        **_knot("before", before, clock),
        **_knot("after", after, clock),
    }


def _stay_on(stays: list[Stay], day: int) -> Stay | None:
    """The stay of that day; on the day of a move the new one."""
    here = [stay for stay in stays if stay.from_day <= day < stay.end]
    return here[0] if here else None


def _knot(name: str, knot: Knot | None, clock: str) -> Row:
    if knot is None:
        return {f"{name}_day": None, name: None}
    return {f"{name}_day": knot.day, name: getattr(knot, clock)}
