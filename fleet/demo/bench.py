"""The demo's bench: first come, first served, as many hours a week as it has; a bad lot of seals puts it behind."""

from __future__ import annotations

import datetime as dt
import random
from dataclasses import dataclass, field
from typing import Any

Row = dict[str, Any]
HOURS_FOR_320 = 37.0  # a week, for the demo's usual size
TECHNICIANS = ("GRETA", "WILF")
MOST_A_DAY = 8.0
WEEKS_AHEAD = 30
HOURS_OF_A_JOB = {"SCREW": 9.5, "SEAL": 6.0, "LOWBRG": 7.5, "UPBRG": 7.5}


def monday_of(day: dt.date) -> dt.date:
    return day - dt.timedelta(days=day.weekday())


@dataclass
class Planned:
    """What the bench will do with one module, known on the day it comes: others stand before it in the queue."""

    code: str
    row: Row
    started_on: dt.date
    finished_on: dt.date
    worked: list[tuple[dt.date, float]] = field(default_factory=list)
    waits: str = ""  # the part it waits for in the middle


class Bench:
    """Plans each job when it comes, from the hours that the queue before it leaves over."""

    def __init__(self, *, begin: dt.date, end: dt.date, modules: int, dice: random.Random) -> None:
        self.begin, self.end, self.dice = begin, end, dice
        self.week_hours = HOURS_FOR_320 * modules / 320
        self.left: dict[dt.date, float] = {}
        self.jobs: list[Planned] = []

    def hours_of_week(self, monday: dt.date) -> float:
        """Closed in summer and at the turn of the year, half a week at Easter; now one technician is away."""
        week = monday.isocalendar().week
        if week in {31, 32, 52}:
            return 0.0
        share = 0.5 if week == 16 else 1.0
        away = self.end - dt.timedelta(weeks=8) < monday < self.end + dt.timedelta(weeks=5)
        return round(self.week_hours * share * (0.4 if away else 1.0), 1)

    def capacity(self) -> list[Row]:
        """Set until some months ahead."""
        first, last = monday_of(self.begin), monday_of(self.end) + dt.timedelta(weeks=WEEKS_AHEAD)
        weeks = [first + dt.timedelta(weeks=number) for number in range((last - first).days // 7 + 1)]
        return [{"week": week, "hours": self.hours_of_week(week)} for week in weeks]

    def left_on(self, day: dt.date) -> float:
        if day.weekday() > 4:
            return 0.0
        return self.left.setdefault(day, self.hours_of_week(monday_of(day)) / 5)

    def take_in(self, module: str, depot: str, day: dt.date, components: list[str], reason: str) -> Planned:
        mean = sum(HOURS_OF_A_JOB.get(component, 5.0) for component in components) or 5.0
        wanted = round(max(1.0, self.dice.lognormvariate(0, 0.35) * mean) * 4) / 4
        worked = self.work(day + dt.timedelta(days=1), wanted)
        number = len(self.jobs) + 1
        row: Row = {
            "job": f"J-{number:04d}",
            "module": module,
            "depot": depot,
            "reason": reason,
            "received_on": day,
            "stage": "",
            "started_on": "",
            "finished_on": "",
            "outcome": "",
            "note": "",
        }
        planned = Planned(row["job"], row, worked[0][0], worked[-1][0], worked)
        if self.dice.random() < 0.12 and len(worked) > 1:
            self.wait_for_a_part(planned)
        self.jobs.append(planned)
        return planned

    def work(self, first: dt.date, hours: float) -> list[tuple[dt.date, float]]:
        """The days on which the bench finds time for it."""
        worked, day = [], first
        while hours > 1e-9:
            some = int(4 * min(self.left_on(day), hours, MOST_A_DAY)) / 4  # written down by the quarter of an hour
            if some:
                self.left[day] -= some
                hours -= some
                worked.append((day, some))
            day += dt.timedelta(days=1)
        return worked

    def wait_for_a_part(self, planned: Planned) -> None:
        """The last stretch of work moves back by as long as the part took to come."""
        wait = dt.timedelta(days=self.dice.randrange(5, 22))
        last_day, last_hours = planned.worked[-1]
        later = last_day + wait
        later += dt.timedelta(days=max(0, later.weekday() - 4) and 7 - later.weekday())
        planned.worked[-1] = (later, last_hours)
        planned.finished_on, planned.waits = later, "parts"

    def write_down(self) -> dict[str, list[Row]]:
        """bench.csv, hours.csv and capacity.csv as they stand on the last day."""
        hours: list[Row] = []
        for place, job in enumerate(self.jobs):
            self.stage(job)
            who = TECHNICIANS[place % len(TECHNICIANS)]
            by_day: dict[dt.date, float] = {}
            for day, worked in job.worked:
                if day <= self.end:
                    by_day[day] = by_day.get(day, 0.0) + worked
            hours += [
                {"job": job.code, "person": who, "day": day, "hours": round(worked, 2)}
                for day, worked in by_day.items()
            ]
        return {"bench": [job.row for job in self.jobs], "hours": hours, "capacity": self.capacity()}

    def stage(self, job: Planned) -> None:
        row = job.row
        begun, ended = job.started_on <= self.end, job.finished_on <= self.end
        row["started_on"] = job.started_on if begun else ""
        if ended:
            row |= {"finished_on": job.finished_on, "outcome": row["outcome"] or "ready"}
        elif begun:
            waiting = bool(job.waits) and any(day <= self.end for day, _ in job.worked[:-1])
            row["stage"] = "waiting for parts" if waiting else "on the bench"
        else:
            row["stage"] = "received" if (self.end - row["received_on"]).days < 3 else "waiting"
