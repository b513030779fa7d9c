"""The changes of parts and the findings of one visit."""

from __future__ import annotations

from collections.abc import Sequence

from fleet.actions.checks_parts import check_mode, check_part, check_parts_fit_type, check_position
from fleet.actions.checks_places import Place
from fleet.actions.checks_stays import Stays, check_seen, stay_words
from fleet.actions.checks_values import choose, clean_day
from fleet.actions.entries import FindingEntry, PartChange
from fleet.actions.errors import BadValue, PositionTaken, RecordError
from fleet.actions.fit_part import write_fitting
from fleet.actions.measured import Measured
from fleet.actions.remove_part import write_removal
from fleet.actions.writes import add
from fleet.models import Finding, Fitting, FoundKind, Part, Person, Position, Visit


class VisitParts:
    """One visit's changes at their positions, under the module's lock."""

    def __init__(self, visit: Visit, stays: Stays, place: Place, measured: Measured, by: Person | None) -> None:
        self.visit, self.stays, self.place, self.measured, self.by = visit, stays, place, measured, by
        self.removed: dict[int, Fitting] = {}

    def remove(self, entry: PartChange, position: Position) -> Fitting:
        fitting = self.stays.on_removal(position, self.visit.happened_on)
        fitting.module, fitting.position = self.visit.module, position
        fitting.reason, fitting.mode, fitting.found_by = entry.reason, entry.mode, entry.found_by
        fitting.failed_on = clean_day(entry.failed_on, field="failed_on", today=self.place.today)
        fitting.last_good_on = clean_day(entry.last_good_on, field="last_good_on", today=self.place.today)
        fitting.caused_by = self.cause(entry)
        self.removed[position.pk] = fitting
        return write_removal(
            fitting,
            stays=self.stays,
            place=self.place,
            day=self.visit.happened_on,
            visit=self.visit,
            known_on=self.visit.known_on,
            measured=self.measured,
            note=entry.note,
        )

    def cause(self, entry: PartChange) -> Fitting | None:
        if entry.caused_by_position is not None:
            return self.removed[entry.caused_by_position.pk]
        if entry.caused_by is None:
            return None
        return Fitting.objects.get(pk=entry.caused_by.pk)

    def check_empty(self, position: Position) -> None:
        running = self.stays.running(position)
        if running is not None:
            raise PositionTaken(
                f"Position {position.code} holds {running.part.code} {stay_words(running)}. Say first why it came out.",
                field="reason",
                position=position.code,
            )

    def fit(self, entry: PartChange, part: Part, position: Position) -> Fitting:
        return write_fitting(
            Fitting(
                module=self.visit.module,
                position=position,
                part=part,
                serial=entry.serial,
                lot=entry.lot,
                age_at_fit=entry.age_at_fit,
                note="" if entry.reason else entry.note,
            ),
            stays=self.stays,
            place=self.place,
            day=self.visit.happened_on,
            visit=self.visit,
            known_on=self.visit.known_on,
            measured=self.measured,
            by=self.by,
        )


def write_changes(
    visit: Visit, changes: Sequence[PartChange], place: Place, measured: Measured, by: Person | None
) -> None:
    if not changes:
        return
    check_entries(visit, changes)
    stays = Stays(visit.module, [entry.position for entry in changes], since=visit.happened_on)
    parts = VisitParts(visit, stays, place, measured, by)
    for row, entry in in_order_of_cause(changes):
        try:
            check_seen(entry, stays)
            if entry.reason:
                parts.remove(entry, entry.position)
            else:
                parts.check_empty(entry.position)
            if entry.part is not None:
                parts.fit(entry, entry.part, entry.position)
        except RecordError as error:
            error.data.setdefault("position", entry.position.code)
            error.data["row"] = row
            raise


def check_entries(visit: Visit, changes: Sequence[PartChange]) -> None:
    seen: set[int] = set()
    for row, entry in enumerate(changes):
        try:
            check_position(entry.position, visit.module)
            if entry.position.pk in seen:
                raise BadValue(
                    f"Position {entry.position.code} is named twice. Enter one change for it.", field="position"
                )
            if not entry.reason and entry.part is None:
                raise BadValue("Neither a reason nor a new part is given. Say what was done.", field="reason")
            if entry.part is not None:
                check_part(entry.part, entry.position)
        except RecordError as error:
            error.data["row"] = row
            raise
        seen.add(entry.position.pk)
    check_parts_fit_type([entry.part for entry in changes if entry.part is not None], visit.module)


def in_order_of_cause(changes: Sequence[PartChange]) -> list[tuple[int, PartChange]]:
    """A cause comes before what it took along."""
    waiting = list(enumerate(changes))
    done: set[int] = set()
    ordered: list[tuple[int, PartChange]] = []
    while waiting:
        ready = [each for each in waiting if cause_is_known(each[1], done)]
        if not ready:
            row, entry = waiting[0]
            raise BadValue(
                f"Position {entry.caused_by_position and entry.caused_by_position.code} is named as the cause, "
                "but no part came out of it in this visit. Choose another cause.",
                field="caused_by",
                row=row,
                position=entry.position.code,
            )
        ordered += ready
        done |= {entry.position.pk for _, entry in ready if entry.reason}
        waiting = [each for each in waiting if each not in ready]
    return ordered


def cause_is_known(entry: PartChange, done: set[int]) -> bool:
    return entry.caused_by_position is None or entry.caused_by_position.pk in done


def write_findings(visit: Visit, findings: Sequence[FindingEntry]) -> None:
    for row, entry in enumerate(findings):
        try:
            check_finding(visit, entry.position, entry.finding, entry)
            add(Finding(visit=visit, position=entry.position, finding=entry.finding, mode=entry.mode, note=entry.note))
        except RecordError as error:
            error.data["row"] = row
            raise


def check_finding(visit: Visit, position: Position, finding: str, entry: FindingEntry | Finding) -> None:
    check_position(position, visit.module)
    choose(finding, FoundKind, field="finding", blank=False)
    check_mode(entry.mode, position)
    if entry.mode is not None and finding == FoundKind.NOTHING:
        raise BadValue("Nothing was found, yet a failure mode is given. Leave the mode empty.", field="mode")
