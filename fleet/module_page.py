"""Everything recorded of one module, as one person may see it, in a fixed number of queries: what its page shows."""

from __future__ import annotations

import datetime as dt
from collections import defaultdict
from dataclasses import dataclass
from typing import Any

from django.core.paginator import Page, Paginator
from django.utils import timezone

from fleet.formats import long_day
from fleet.life_lines import NARROW, WIDE, LifeHistory, Strip, life_lines
from fleet.models import (
    BenchJob,
    Finding,
    Fitting,
    LooksWrong,
    Module,
    Part,
    Placement,
    Position,
    Reading,
    SiteKind,
    Stop,
    Visit,
)
from fleet.module_clock import Age, ModuleClock
from fleet.module_past import SeenStay, bars_of, day_number, job_words, seen_stay, shades_of, windows_of
from fleet.module_place import Seen, Standing, standing_of
from fleet.part_ranks import part_ranks
from fleet.position_names import position_names
from fleet.rights import BENCH, CORRECT, LOG, may

VISITS_A_PAGE = 12
READINGS_SHOWN = 30
NARROW_DAYS = 1100  # what a phone's width still tells apart


@dataclass
class FittedNow:
    position: Position
    name: str
    fitting: Fitting | None
    rank: int
    since: dt.date | None
    age: Age | None
    chance: Any = None


@dataclass
class FittingLine:
    stay: SeenStay
    name: str
    rank: int
    age: Age | None
    doubted: bool
    correctable: bool


class ModulePage:
    """Reads once; the templates ask no further question of the database."""

    def __init__(self, seen: Seen, person: Any, module: Module, page: Any = None) -> None:
        self.seen, self.person, self.module = seen, person, module
        self.standing: Standing = standing_of(seen, module)
        self.zone = self.standing.zone
        now = timezone.now()
        self.today = now.astimezone(self.zone).date()
        self.now = day_number(now, self.zone)
        self.stays = list(
            seen(Placement).standing().filter(module=module).select_related("site").order_by("from_on", "id")
        )
        self.windows = windows_of(person, self.stays, self.today)
        self.positions = list(
            seen(Position).filter(type=module.type_id).select_related("component").order_by("order", "code_order")
        )
        self.names = position_names(self.positions)
        self.ranks = part_ranks(seen(Part).filter(component__in={each.component_id for each in self.positions}))
        self.doubts = set(seen(LooksWrong).waiting().filter(module=module).values_list("kind", "record"))
        self.stops = list(
            seen(Stop).filter(module=module).select_related("reported_by", "site").order_by("-stopped_at", "-id")
        )
        self.jobs = list(seen(BenchJob).standing().filter(module=module).order_by("received_on", "id"))
        self.read_fittings()
        self.clock = ModuleClock(module, self.now)
        self.visits = self.read_visits(page)
        self.readings = list(
            seen(Reading)
            .filter(module=module)
            .select_related("position", "site")
            .order_by("-read_at", "-id")[:READINGS_SHOWN]
        )

    def read_fittings(self) -> None:
        rows = list(
            self.seen(Fitting)
            .filter(module=self.module)
            .select_related("part", "position__component", "mode", "clock", "caused_by__position__component")
            .order_by("fitted_on", "id")
        )
        rows.sort(key=lambda fitting: (fitting.fitted_on is not None, fitting.fitted_on or dt.date.min))
        self.fittings = rows
        self.standing_fittings = [fitting for fitting in rows if not fitting.struck_out]
        self.at_position: dict[int, list[Fitting]] = defaultdict(list)
        for fitting in self.standing_fittings:
            self.at_position[fitting.position_id].append(fitting)

    def read_visits(self, page: Any) -> Page:
        rows = self.seen(Visit).filter(module=self.module).select_related("crew", "site")
        found = Paginator(rows.order_by("-happened_at", "-id"), VISITS_A_PAGE).get_page(page)
        visits = list(found.object_list)
        findings: dict[int, list[Finding]] = defaultdict(list)
        keys = [visit.pk for visit in visits]
        for finding in (
            self.seen(Finding).filter(visit__in=keys).select_related("mode").order_by("position__order", "id")
        ):
            finding.name = self.names.get(finding.position_id, "")
            findings[finding.visit_id].append(finding)
        faces: dict[int, list[Reading]] = defaultdict(list)
        for reading in self.seen(Reading).standing().filter(visit__in=keys).order_by("id"):
            faces[reading.visit_id].append(reading)
        for visit in visits:
            visit.changes = self.changes_of(visit)
            visit.found = findings[visit.pk]
            visit.faces = [reading for reading in faces[visit.pk] if reading.play_mm is None]
            visit.plays = [(self.names.get(each.position_id, ""), each) for each in faces[visit.pk] if each.position_id]
            visit.correctable = self.may_correct(visit)
            visit.doubted = ("visit", visit.pk) in self.doubts
        found.object_list = visits
        return found

    @property
    def standing_stops(self) -> list[Stop]:
        return [stop for stop in self.stops if not stop.struck_out]

    def may_correct(self, record: Any) -> bool:
        """As `fleet.rights.may_correct`, which asks the database again for each record's zone."""
        if may(self.person, CORRECT):
            return True
        if not may(self.person, LOG) or getattr(record, "entered_by_id", None) != self.person.pk:
            return False
        return record.entered_at.astimezone(self.zone).date() == self.today

    def line_of(self, kind: str, record: Any, **more: Any) -> dict[str, Any]:
        doubted = (kind, record.pk) in self.doubts
        return {"record": record, "doubted": doubted, "correctable": self.may_correct(record), **more}

    def changes_of(self, visit: Visit) -> list[dict[str, Any]]:
        """By position: what came out of it and what went in."""
        out = {each.position_id: each for each in self.standing_fittings if each.removed_visit_id == visit.pk}
        went = {each.position_id: each for each in self.standing_fittings if each.fitted_visit_id == visit.pk}
        return [
            {"name": self.names[position.pk], "out": out.get(position.pk), "went_in": went.get(position.pk)}
            for position in self.positions
            if position.pk in out or position.pk in went
        ]

    def fitted_now(self) -> list[FittedNow]:
        rows = []
        for position in self.positions:
            fitting = next((each for each in self.at_position[position.pk] if each.removed_on is None), None)
            stay = seen_stay(fitting, self.windows) if fitting else None
            tells_age = fitting is not None and (self.windows is None or bool(stay and stay.begun_in_sight))
            rows.append(
                FittedNow(
                    position=position,
                    name=self.names[position.pk],
                    fitting=fitting,
                    rank=self.ranks.get(fitting.part_id, 0) if fitting else 0,
                    since=stay.fitted_on if stay else None,
                    age=self.clock.age_of(fitting, told_by(fitting)) if fitting and tells_age else None,
                )
            )
        return rows

    def fitting_lines(self) -> list[FittingLine]:
        """Every fitting, struck-out ones as well, the newest first."""
        return [
            FittingLine(
                stay=(stay := seen_stay(fitting, self.windows)),
                name=self.names.get(fitting.position_id, ""),
                rank=self.ranks.get(fitting.part_id, 0),
                age=self.clock.age_of(fitting, told_by(fitting)) if stay.begun_in_sight else None,
                doubted=("fitting", fitting.pk) in self.doubts,
                correctable=self.may_correct(fitting),
            )
            for fitting in reversed(self.fittings)
        ]

    @property
    def counter_clock(self) -> str:
        """Which count the second axis shows: strokes where there are any, else hours."""
        return "strokes" if any(point[3] is not None for point in self.clock.points) else "hours"

    def life_history(self) -> LifeHistory:
        first = self.first_day()
        visits = (
            self.seen(Visit).standing().filter(module=self.module).order_by("happened_at").values_list("happened_on")
        )
        return LifeHistory(
            tag=self.module.code,
            first=first.toordinal(),
            last=max(self.now, first.toordinal() + 14),
            strips=[
                Strip(
                    self.names[position.pk],
                    [
                        bar
                        for fitting in self.at_position[position.pk]
                        for bar in bars_of(
                            seen_stay(fitting, self.windows),
                            rank=self.ranks.get(fitting.part_id, 0),
                            first=first,
                            today=self.today,
                        )
                    ],
                )
                for position in self.positions
            ],
            shades=list(
                shades_of(
                    [each for each in self.stops if not each.struck_out], self.stays, self.zone, self.now, self.jobs
                )
            ),
            visits=[(day.toordinal() + 0.5, f"visit, {long_day(day)}") for (day,) in visits],
            counter=self.clock.curve(self.counter_clock, self.windows),
            counter_words=self.counter_clock,
        )

    def first_day(self) -> dt.date:
        """Where the time axis begins: the first thing on record that may be seen."""
        days = [stay.from_on for stay in self.stays]
        if self.windows is None:
            days += [each.fitted_on for each in self.standing_fittings if each.fitted_on]
            days += [each.removed_on for each in self.standing_fittings if each.removed_on]
            days += [day for day in (self.module.built_on, self.module.records_from) if day]
        return min([*days, self.today])

    def drawings(self) -> dict[str, Any]:
        history = self.life_history()
        return {"wide": life_lines(history, WIDE), "narrow": life_lines(history.since(self.now - NARROW_DAYS), NARROW)}

    def key(self) -> list[dict[str, Any]]:
        """Only what is in the drawing."""
        codes: dict[int, list[str]] = defaultdict(list)
        places = {position.pk: place for place, position in enumerate(self.positions)}
        for each in sorted(self.standing_fittings, key=lambda each: places.get(each.position_id, 0)):
            if each.part.code not in codes[self.ranks.get(each.part_id, 0)]:
                codes[self.ranks.get(each.part_id, 0)].append(each.part.code)
        entries: list[dict[str, Any]] = [
            {"kind": "part", "label": ", ".join(some), "rank": rank} for rank, some in sorted(codes.items())
        ]
        ends = {"failed": "failed", "withdrawn": "came out working", "running": "still running"}
        entries += [{"kind": kind, "label": label} for kind, label in ends.items()]
        if any(each.fitted_on is None for each in self.standing_fittings):
            entries.append({"kind": "open", "label": "since when is not known"})
        elif self.windows is not None:
            entries.append({"kind": "open", "label": "began before it came here"})
        if self.standing_stops:
            entries.append({"kind": "stop", "label": "stood still"})
        if any(stay.site.kind == SiteKind.DEPOT for stay in self.stays):
            entries.append({"kind": "away", "label": "at a depot"})
        entries.append({"kind": "visit", "label": "visit"})
        return entries

    @property
    def last_visit(self) -> Visit | None:
        """Of the page of visits, so only where that is the first one."""
        return next((visit for visit in self.visits if not visit.struck_out), None) if self.visits.number == 1 else None

    def stay_lines(self) -> list[dict[str, Any]]:
        return [self.line_of("placement", stay) for stay in reversed(self.stays)]

    @property
    def may_open_jobs(self) -> bool:
        return may(self.person, BENCH)

    def job_lines(self) -> list[dict[str, Any]]:
        return [{"job": job, "words": job_words(job)} for job in reversed(self.jobs)]

    def stop_lines(self) -> list[dict[str, Any]]:
        return [self.line_of("stop", stop) for stop in self.stops]

    def reading_lines(self) -> list[dict[str, Any]]:
        return [
            self.line_of("reading", reading, position=self.names.get(reading.position_id, ""))
            for reading in self.readings
        ]


def told_by(fitting: Fitting) -> Any:
    """The derived clock row, missing only until the clocks are made again."""
    return getattr(fitting, "clock", None)
