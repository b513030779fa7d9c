"""A visit struck out, alone or with everything that was entered with it."""

from __future__ import annotations

from typing import Any

from fleet.actions.checks_counters import UNITS, check_rows, shown_by
from fleet.actions.checks_places import Places
from fleet.actions.checks_rights import REMOVAL_FIELDS, check_may_correct
from fleet.actions.checks_stays import Stays
from fleet.actions.correct_fitting import put_back
from fleet.actions.errors import BadValue, day_words
from fleet.actions.ledger import effects, locked_balances, take_back
from fleet.actions.measured import MeasuredEnds
from fleet.actions.strike import strike
from fleet.actions.visit_stops import reopen_stops
from fleet.actions.writes import save_again
from fleet.formats import counted
from fleet.models import Finding, Fitting, Person, Reading, StockMove, Stop, Visit


def strike_visit(visit: Visit, by: Person | None, reason: str, *, with_all: bool) -> None:
    hanging = Hanging(visit)
    if hanging.words and not with_all:
        raise BadValue(
            f"Visit {visit.code} holds {hanging.words}. Strike those out first, or everything together.",
            field="with_all",
        )
    hanging.check(by)
    strike(visit, by, reason)
    hanging.strike(by, reason)
    reopen_stops(visit)


class Hanging:
    """Standing records that were entered with a visit."""

    def __init__(self, visit: Visit) -> None:
        self.visit = visit
        self.findings = list(Finding.objects.standing().filter(visit=visit))
        self.readings = list(Reading.objects.standing().filter(visit=visit))
        self.moves = list(StockMove.objects.standing().filter(visit=visit).order_by("store", "part", "condition"))
        self.stops = list(Stop.objects.standing().filter(visit=visit))
        fittings = Fitting.objects.standing().select_related("position", "part", "removed_visit")
        self.fitted = list(fittings.filter(fitted_visit=visit))
        self.removed = list(fittings.filter(removed_visit=visit).exclude(fitted_visit=visit))

    @property
    def words(self) -> str:
        numbers = [
            (self.fitted, "part fitted", "parts fitted"),
            (self.removed, "part removed", "parts removed"),
            (self.findings, "finding", "findings"),
            (self.readings, "reading", "readings"),
            (self.stops, "stop", "stops"),
            (self.moves, "part issued", "parts issued"),
        ]
        return ", ".join(counted(len(rows), one, many) for rows, one, many in numbers if rows)

    def check(self, by: Person | None) -> None:
        """Everything must be the person's to correct, and nothing later may build on it."""
        for record in [*self.fitted, *self.readings, *self.stops, *self.moves]:
            check_may_correct(by, record)
        for fitting in self.removed:
            check_may_correct(by, fitting, REMOVAL_FIELDS)
        for fitting in self.fitted:
            if fitting.removed_on is not None and fitting.removed_visit_id != self.visit.pk:
                raise BadValue(
                    f"{fitting.part.code} in {fitting.position.code}, fitted at this visit, came out on "
                    f"{day_words(fitting.removed_on)}. Strike out or correct that removal first.",
                    field="record",
                )
        mine = {fitting.pk for fitting in [*self.fitted, *self.removed]}
        blamed = Fitting.objects.standing().filter(caused_by__in=mine).exclude(pk__in=mine).first()
        if blamed is not None:
            raise BadValue(
                f"{blamed.code} names a part of this visit as what broke it. Correct its cause first.", field="record"
            )

    def strike(self, by: Person | None, reason: str) -> None:
        module = self.visit.module
        rows: list[Any] = [*self.findings, *self.stops, *self.fitted]
        for record in rows:
            strike(record, by, reason)
        locked_balances(key for move in self.moves for key in effects(move))
        for move in self.moves:
            take_back(move, by, reason)
        stays = Stays(module, [fitting.position_id for fitting in self.removed])
        for fitting in self.removed:
            fitting.module = module
            put_back(fitting)
            stays.check(fitting)
            save_again(fitting)
        for reading in self.readings:
            reading.module = module
            ends = MeasuredEnds(reading)
            strike(reading, by, reason)
            ends.follow()
        if self.readings:
            zone = Places(module).at(self.visit.happened_at).zone
            for unit in UNITS:
                check_rows(shown_by(module, unit), zone)
