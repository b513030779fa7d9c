"""One brush carriage of the demo, lived through day by day; its crew's visits become rows of records files."""

from __future__ import annotations

import datetime as dt
import random
from dataclasses import dataclass, field
from typing import Any

from fleet.demo.bench import Bench, Planned
from fleet.demo.catalogue import BAD_LOT, BAD_LOT_SHARE_OF_LIFE, COMPONENTS, DESIGNS, MODES, POSITIONS
from fleet.demo.places import PLACES, Place
from fleet.demo.sheets import Sheets

COMPONENT_OF = dict(POSITIONS)
COMPONENT_NAMES = {str(row["component"]): str(row["name"]) for row in COMPONENTS}
MODE_NAMES = {mode: name for _, mode, name, *_ in MODES}
STROKE_CLOCK = {"NUT", "SCREW", "ROLLER"}
COLD_MONTHS = {12, 1, 2}
SEASON = [0.7, 0.7, 0.85, 1.0, 1.2, 1.35, 1.4, 1.35, 1.15, 1.0, 0.8, 0.7]  # algae make the brushes run more
DEPOTS = [place for place in PLACES if place.kind == "depot"]


@dataclass
class Fitted:
    """A part in a position, with what is left of its life on its own clock."""

    code: str
    position: str
    part: str
    left: float
    since: dt.date
    row: dict[str, Any]
    fitted_wrongly: bool = False
    dead_since: dt.date | None = None  # failed, and nobody has seen it yet
    mode: str = ""  # how it failed, once that is settled
    found_on: dt.date | None = None  # when a crew saw it, and left it in for the bench


@dataclass
class Calendar:
    """The dates on which the demo's story turns."""

    begin: dt.date
    end: dt.date
    new_nut: dt.date  # the wiper lip becomes available
    new_screw: dt.date
    new_seal: dt.date
    bad_lot_from: dt.date
    bad_lot_to: dt.date
    counters_swapped: dt.date


@dataclass
class Carriage:
    """A module with its habits; `live_day` moves it on by one day."""

    tag: str
    kind: str
    place: Place
    bay: str
    begin: dt.date
    calendar: Calendar
    sheets: Sheets
    bench: Bench
    dice: random.Random
    records_from: dt.date | None = None
    strokes: float = 0
    counter_face: float = 0
    counter: str = ""
    fitted: dict[str, Fitted] = field(default_factory=dict)
    waiting_until: dt.date | None = None  # stopped, the crew comes then
    stop: dict[str, Any] | None = None
    sent_by: dict[str, Any] | None = None  # the visit that sent it to the bench
    comes_on: dt.date | None = None  # when it gets to the depot
    job: Planned | None = None
    depot_until: dt.date | None = None
    placement: dict[str, Any] | None = None
    next_visit: dt.date | None = None
    debris_rate: float = 0.00016
    stands_at_the_end: bool = False  # so that Today has something to decide

    def __post_init__(self) -> None:
        self.own_pace = self.dice.uniform(0.82, 1.18)
        self.counter = f"C{self.dice.randrange(10_000, 99_999)}"
        self.placement = self.sheets.place(self, self.place.code, self.begin)
        for position, component in POSITIONS:
            if not (self.kind == "BC20" and position == "ROLL-3"):
                self.fit(position, self.first_part(component), self.begin, visit=None)
        if self.place.visit_every:
            self.next_visit = self.begin + dt.timedelta(days=self.dice.randrange(3, self.place.visit_every + 3))

    # -- parts ---------------------------------------------------------------------------------------

    def first_part(self, component: str) -> str:
        early = (self.begin - self.calendar.begin).days < 240
        return {
            "NUT": "DN-1" if early else "DN-2",
            "SCREW": "LS-1" if self.begin < self.calendar.new_screw else "LS-2",
            "LOWBRG": "LB-1",
            "UPBRG": "UB-1",
            "SEAL": "SS-1" if self.begin < self.calendar.new_seal else "SS-2",
            "ROLLER": "CR-1",
            "COUPL": "CP-1",
        }[component]

    def replacement(self, component: str, day: dt.date) -> str:
        """What a crew has in the van on that day."""
        if component == "NUT":
            new = bool(self.place.rollout) and day >= self.calendar.new_nut
            return "DN-3" if new and self.dice.random() < 0.85 else "DN-2"
        if component == "SCREW":
            return "LS-2" if day >= self.calendar.new_screw else "LS-1"
        if component == "SEAL":
            return "SS-2" if day >= self.calendar.new_seal else "SS-1"
        return {"LOWBRG": "LB-1", "UPBRG": "UB-1", "ROLLER": "CR-1", "COUPL": "CP-1"}[component]

    def fit(self, position: str, part: str, day: dt.date, visit: str | None, known: dt.date | None = None) -> None:
        design = DESIGNS[part]
        component = COMPONENT_OF[position]
        life = self.dice.weibullvariate(design.scale, design.shape) * self.place.site_factor
        life *= design.sand if self.place.sandy else 1.0
        lot = f"{component[0]}-{day:%y%m}"
        if component == "SEAL":
            bad = self.calendar.bad_lot_from <= day < self.calendar.bad_lot_to and part == "SS-1"
            lot = BAD_LOT if bad else lot
            life *= BAD_LOT_SHARE_OF_LIFE if bad else 1.0
        wrong = component == "NUT" and visit is not None and self.dice.random() < 0.018
        if wrong:
            life = self.dice.uniform(200, 4000)
        row = self.sheets.fitting(self, position, part, lot, day, visit, known)
        self.fitted[position] = Fitted(row["fitting"], position, part, life, day, row, wrong)

    def mode_of(self, part: Fitted) -> str:
        component = COMPONENT_OF[part.position]
        if part.fitted_wrongly:
            return "FITTED-WRONG"
        modes = [(mode[1], mode[6]) for mode in MODES if mode[0] == component]
        return self.dice.choices([name for name, _ in modes], [share for _, share in modes])[0]

    # -- days ----------------------------------------------------------------------------------------

    def live_day(self, day: dt.date) -> None:
        if self.comes_on is not None:
            if day >= self.comes_on:
                self.come_to_depot(day)
            return
        if self.depot_until is not None:
            self.live_at_depot(day)
            return
        if self.waiting_until is not None:
            if day >= self.waiting_until:
                self.visit(day, called=True)
            return
        self.run(day)
        failed = [part for part in self.fitted.values() if part.left <= 0 and part.dead_since is None]
        for part in failed:
            part.dead_since = day
        if failed and self.place.reports_at_once is not False:
            self.stand_still(day)
        elif self.dice.random() < self.debris_rate * (1.6 if self.place.sandy else 1):
            self.hit_by_debris(day)
        elif self.next_visit is not None and day >= self.next_visit:
            self.visit(day, called=False)

    def run(self, day: dt.date) -> None:
        if self.stands_at_the_end and day == self.calendar.end - dt.timedelta(days=1):
            self.fitted["NUT"].left = 0
        strokes = self.place.strokes_per_day * self.own_pace * SEASON[day.month - 1] * self.dice.uniform(0.9, 1.1)
        dead = any(part.dead_since for part in self.fitted.values() if COMPONENT_OF[part.position] == "NUT")
        strokes = 0 if dead else strokes
        self.strokes += strokes
        self.counter_face += strokes
        cold = 4.0 if day.month in COLD_MONTHS else 0.55
        for part in self.fitted.values():
            component = COMPONENT_OF[part.position]
            part.left -= strokes if component in STROKE_CLOCK else (cold if component == "COUPL" else 1.0)

    def hit_by_debris(self, day: dt.date) -> None:
        """A bowed screw stops the carriage and takes rollers with it."""
        self.fitted["SCREW"].left = 0
        self.fitted["SCREW"].dead_since = day
        self.fitted["SCREW"].mode = "BOWED"
        self.stand_still(day)

    def stand_still(self, day: dt.date) -> None:
        wait = 3 if self.stands_at_the_end else self.dice.choices([0, 1, 2, 3, 5, 8], [20, 35, 22, 12, 8, 3])[0]
        self.waiting_until = day + dt.timedelta(days=wait)
        if wait or self.dice.random() < 0.7:
            self.stop = self.sheets.stop(self, day, self.dice.randrange(5, 9))
        if wait == 0:
            self.visit(day, called=True)

    def visit(self, day: dt.date, *, called: bool) -> None:
        """The crew comes: dead parts out, worn nuts out, sometimes an upgrade, a reading, and what they saw."""
        self.waiting_until = None
        if self.calendar.counters_swapped <= day and self.place.counters_swapped and self.counter.startswith("C"):
            self.counter, self.counter_face = f"N{self.dice.randrange(100, 999)}", 0
        visit = self.sheets.visit(self, day, called)
        known = self.sheets.known(visit)
        to_bench = self.change_parts(day, visit, known, called)
        self.sheets.reading(self, visit)
        if not called:
            self.sheets.finding(self, visit)
        if self.place.visit_every and (not called or self.dice.random() < 0.3):
            self.next_visit = day + dt.timedelta(days=self.place.visit_every + self.dice.randrange(-3, 4))
        if to_bench:
            self.go_to_bench(day, visit)
        elif visit["left"] == "stopped":
            self.stop = self.stop or self.sheets.stop(self, day, 8)
            self.waiting_until = day + dt.timedelta(days=12)
        elif self.stop is not None:
            self.sheets.end_stop(self.stop, visit)
            self.stop = None

    def change_parts(self, day: dt.date, visit: dict[str, Any], known: dt.date, called: bool) -> bool:
        """Takes out what must go and fits what replaces it; True when the carriage goes to the bench."""
        goes = False
        bench_modes = {(mode[0], mode[1]) for mode in MODES if mode[5]}
        for part in list(self.fitted.values()):
            component = COMPONENT_OF[part.position]
            if part.dead_since is not None:
                part.mode = part.mode or self.mode_of(part)
                if (component, part.mode) in bench_modes:  # mended on the bench, and left in until then
                    self.sheets.found_failed(visit, part)
                    goes = True
                    continue
                reason = "not known" if self.dice.random() < 0.012 else "failed"
                self.sheets.remove(self, part, visit, reason, part.mode, known)
            elif component == "NUT" and self.nut_comes_out(part, day, called):
                self.sheets.remove(self, part, visit, self.nut_reason(part, day), None, known)
            else:
                continue
            if called and component in {"NUT", "ROLLER"} and self.no_spare_at_the_end(day):
                visit["left"] = "stopped"
                del self.fitted[part.position]
                continue
            self.fit(part.position, self.replacement(component, day), day, visit["visit"], known)
        return goes

    def no_spare_at_the_end(self, day: dt.date) -> bool:
        return day > self.calendar.end - dt.timedelta(days=9) and self.dice.random() < 0.2

    def nut_comes_out(self, nut: Fitted, day: dt.date, called: bool) -> bool:
        planned = self.place.planned_age and (day - nut.since).days >= self.place.planned_age
        upgrade = self.place.rollout == "plan" and day >= self.calendar.new_nut and nut.part != "DN-3"
        worn = not called and nut.left < 4500 and self.dice.random() < 0.45
        return bool(planned or (upgrade and not called and self.dice.random() < 0.35) or worn)

    def nut_reason(self, nut: Fitted, day: dt.date) -> str:
        if self.place.rollout == "plan" and day >= self.calendar.new_nut and nut.part != "DN-3":
            return "upgrade"
        return (
            "planned"
            if self.place.planned_age and (day - nut.since).days >= self.place.planned_age
            else "worn to limit"
        )

    # -- the bench -----------------------------------------------------------------------------------

    def go_to_bench(self, day: dt.date, visit: dict[str, Any]) -> None:
        """It stands still until somebody has brought it to the depot."""
        visit["left"] = "to bench"
        self.stop = self.stop or self.sheets.stop_of(self, visit)
        self.sent_by, self.comes_on = visit, day + dt.timedelta(days=self.dice.randrange(1, 4))

    def come_to_depot(self, day: dt.date) -> None:
        self.comes_on = None
        self.sheets.end_stop_on(self.stop, day)
        self.stop = None
        depot = DEPOTS[0 if int(self.tag[-1]) % 2 else 1]
        self.sheets.end_place(self.placement, day)
        self.placement = self.sheets.place(self, depot.code, day, bay="")
        dead = [part for part in self.fitted.values() if part.dead_since is not None]
        reason = ", ".join(f"{COMPONENT_NAMES[COMPONENT_OF[part.position]]}: {MODE_NAMES[part.mode]}" for part in dead)
        self.job = self.bench.take_in(self.tag, depot.code, day, [COMPONENT_OF[part.position] for part in dead], reason)
        self.depot_until = self.job.finished_on + dt.timedelta(days=self.dice.randrange(1, 10))

    def live_at_depot(self, day: dt.date) -> None:
        """Its dead parts are changed on the last day of the work; then it waits in the pool."""
        assert self.depot_until is not None
        if self.job is not None and day >= self.job.finished_on:
            self.mend(self.job, day)
            self.job = None
        if day >= self.depot_until:
            self.come_back(day)

    def mend(self, job: Planned, day: dt.date) -> None:
        for part in [part for part in self.fitted.values() if part.dead_since is not None]:
            reason = "not known" if self.dice.random() < 0.012 else "failed"
            self.sheets.remove_on_bench(self, part, job.code, day, reason)
            self.fit_on_bench(part, job, day)
            if part.mode == "BOWED":
                self.take_rollers(part, job, day)

    def take_rollers(self, cause: Fitted, job: Planned, day: dt.date) -> None:
        """A bowed screw broke some of the rollers beside it."""
        rollers = [
            part for part in self.fitted.values() if COMPONENT_OF[part.position] == "ROLLER" and not part.dead_since
        ]
        for part in self.dice.sample(rollers, k=self.dice.randrange(1, len(rollers) + 1)) if rollers else []:
            self.sheets.remove_on_bench(self, part, job.code, day, "taken with another", caused_by=cause.code)
            self.fit_on_bench(part, job, day)

    def fit_on_bench(self, part: Fitted, job: Planned, day: dt.date) -> None:
        self.fit(part.position, self.replacement(COMPONENT_OF[part.position], day), day, visit=None)
        self.sheets.belongs_to(self.fitted[part.position].row, job.code)

    def come_back(self, day: dt.date) -> None:
        self.depot_until = None
        self.sheets.end_place(self.placement, day)
        self.placement = self.sheets.place(self, self.place.code, day)
        if self.place.visit_every:
            self.next_visit = day + dt.timedelta(days=self.place.visit_every)
