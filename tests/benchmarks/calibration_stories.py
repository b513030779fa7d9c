"""Fleets whose truth is known, told as files: what an office would have written down, and what then happened.

Time is in days; instant 0 is the morning after the as-of day. Lives are simulated in continuous time, a day in the
files is the calendar day of the instant. Counters are read at noon, every two weeks and on the as-of day.
"""

from __future__ import annotations

import csv
import datetime as dt
from collections import Counter, defaultdict
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

QUARTER = 91.0
NOON = 0.5
Range = float | tuple[float, float]


@dataclass(frozen=True)
class Story:
    """One kind of fleet. A range is drawn from log-evenly."""

    shape: Range = 2.0
    scale: Range = 100.0  # days, or strokes
    family: str = "weibull"  # or lognormal
    spread: float = 0.0  # variance of the hazard's factor, by site
    sites: int = 8
    modules: Range = 6  # a site
    positions: int = 4  # a module
    deployed: tuple[float, float] = (30.0, 250.0)  # days before the as-of day, evenly; a new site within twelve days
    records_from: float = 0.0
    unknown_ages: bool = False  # of what was fitted before that day
    other_removals: float = 0.0  # a day
    planned: float = 0.0  # replaced at that age
    visits: int = 0  # days between two visits to a module
    strokes_a_day: tuple[float, float] | None = None  # of the sites; lives are then counted in strokes
    duty_spread: float = 0.0  # of the log of each quarter's duty, past and coming, common to all
    changes: tuple[float, ...] = ()  # days before the as-of day on which a newer design began to go in
    longer: tuple[float, ...] = (1.0,)  # times the scale, by design
    infants: float = 0.0  # share that fails early, after five days on average
    gap: int = 0  # days between the as-of day and the first day counted
    keep: Callable[[int], bool] = field(default=lambda failures: True)


@dataclass
class Outcome:
    """Failures found in the quarter, and those in the files."""

    by_site: Counter[str] = field(default_factory=Counter)
    by_part: Counter[str] = field(default_factory=Counter)
    by_week: Counter[int] = field(default_factory=Counter)
    known: int = 0


STORIES = {
    "mature": Story(),
    "young": Story(shape=2.5, scale=90.0, deployed=(10.0, 100.0)),
    "next calendar quarter": Story(gap=34),
    "5 to 15 failures": Story(
        shape=(1.2, 3.0), scale=(150.0, 500.0), deployed=(10.0, 150.0), modules=3, keep=lambda n: 5 <= n <= 15
    ),
    "two lives a quarter": Story(scale=40.0),
    "sites differ 0.5": Story(spread=0.5),
    "sites of 1 to 30 modules": Story(modules=(1.0, 30.0), spread=0.3, sites=6),
    "late records": Story(records_from=70.0, deployed=(150.0, 400.0)),
    "late records, ages unknown": Story(records_from=70.0, unknown_ages=True, deployed=(150.0, 400.0)),
    "removed with others": Story(other_removals=1 / 120),
    "planned replacement": Story(planned=80.0, shape=2.5, deployed=(30.0, 300.0)),
    "visits every 14 days": Story(visits=14, scale=80.0),
    "visits every 28 days": Story(visits=28, scale=80.0),
    "strokes, even duty": Story(strokes_a_day=(50.0, 200.0), scale=10_000.0, deployed=(60.0, 400.0)),
    "strokes, duty 20 %": Story(strokes_a_day=(50.0, 200.0), scale=10_000.0, duty_spread=0.2, deployed=(500.0, 800.0)),
    "lognormal lives": Story(family="lognormal"),
    "infants 10 %": Story(infants=0.1, shape=2.5),
    "three designs, 5 to 25 failures": Story(
        shape=(1.5, 3.0),
        scale=(150.0, 400.0),
        changes=(150.0, 60.0),
        longer=(1.0, 1.5, 2.0),
        deployed=(60.0, 250.0),
        modules=2,
        keep=lambda n: 5 <= n <= 25,
    ),
}


@dataclass
class _Site:
    name: str
    factor: float
    use: Callable[[float], float]  # strokes by an instant
    until: Callable[[float], float]  # the instant by which so many strokes are done


class Teller:
    """Writes one fleet of a story into a folder."""

    def __init__(self, story: Story, rng: np.random.Generator, as_of: dt.date) -> None:
        self.story, self.rng, self.as_of = story, rng, as_of
        self.shape, self.scale = self._drawn(story.shape), self._drawn(story.scale)
        self.end = story.gap + QUARTER
        self.rows: dict[str, list[dict[str, Any]]] = defaultdict(list)
        self.outcome = Outcome()

    def write(self, folder: Path) -> Outcome:
        """The files, and what happened after them."""
        self._tell_catalogue()
        edges = np.arange(-10 * QUARTER, self.end + 2 * QUARTER, QUARTER)
        duty = np.exp(self.story.duty_spread * self.rng.standard_normal(edges.size) - self.story.duty_spread**2 / 2)
        for name in [*(f"S{number:02d}" for number in range(self.story.sites)), "NEW"]:
            self._tell_site(name, edges, duty)
        folder.mkdir(exist_ok=True)
        for old in folder.glob("*.csv"):
            old.unlink()
        for kind, rows in self.rows.items():
            with (folder / f"{kind}.csv").open("w", newline="") as target:
                writer = csv.DictWriter(target, list(dict.fromkeys(name for row in rows for name in row)))
                writer.writeheader()
                writer.writerows(rows)
        return self.outcome

    def _drawn(self, value: Range) -> float:
        return float(np.exp(self.rng.uniform(*np.log(value)))) if isinstance(value, tuple) else float(value)

    def _day(self, instant: float) -> str:
        return (self.as_of + dt.timedelta(days=int(np.floor(instant)) + 1)).isoformat()

    def _noon(self, instant: float) -> str:
        return f"{self._day(instant)}T12:00:00+00:00"

    def _tell_catalogue(self) -> None:
        story, rows = self.story, self.rows
        rows["components"].append({"component": "NUT", "clock": "strokes" if story.strokes_a_day else "days"})
        rows["modes"].append({"component": "NUT", "mode": "WORN"})
        rows["types"].append({"type": "T"})
        for place in range(story.positions):
            rows["positions"].append({"type": "T", "position": f"P{place}", "component": "NUT"})
        for number in range(len(story.longer)):
            newest = number == len(story.longer) - 1
            older = f"N{number - 1}" if number else ""
            state = "current" if newest else "ended"
            rows["parts"].append({"part": f"N{number}", "component": "NUT", "supersedes": older, "state": state})

    def _tell_site(self, name: str, edges: np.ndarray, duty: np.ndarray) -> None:
        story, rng = self.story, self.rng
        factor = rng.gamma(1 / story.spread, story.spread) if story.spread else 1.0
        pace = self._drawn(story.strokes_a_day) if story.strokes_a_day else 1.0
        done = np.concatenate([[0.0], np.cumsum(QUARTER * pace * duty)])
        grid = np.append(edges, edges[-1] + QUARTER)
        site = _Site(
            name,
            factor,
            lambda instant: float(np.interp(instant, grid, done)),
            lambda strokes: float(np.interp(strokes, done, grid)) if strokes < done[-1] else np.inf,
        )
        self.rows["sites"].append(
            {
                "site": name,
                "kind": "field",
                "zone": "UTC",
                "reports_at_once": "no" if story.visits else "yes",
                "records_from": self._day(-story.records_from) if story.records_from else "",
                "visit_every_days": story.visits or "",
            }
        )
        for number in range(round(self._drawn(story.modules))):
            self._tell_module(site, f"{name}-M{number:02d}")

    def _tell_module(self, site: _Site, code: str) -> None:
        story = self.story
        start = -self.rng.uniform(0.5, 12.0) if site.name == "NEW" else -self.rng.uniform(*story.deployed)
        phase = int(self.rng.integers(story.visits)) if story.visits else 0
        self.rows["modules"].append({"module": code, "type": "T"})
        self.rows["placements"].append({"module": code, "site": site.name, "from_on": self._day(start)})
        for place in range(story.positions):
            for fitted, ended, why in self._lives(site, start, phase):
                self._tell_life(site.name, code, place, fitted, ended, why)
        if story.visits:
            for at in np.arange(phase + NOON - story.visits * 1000, 0.0, story.visits):
                if at > start:
                    visit = {"module": code, "happened_at": self._noon(at), "left": "running"}
                    self.rows["visits"].append({"visit": f"V{len(self.rows['visits'])}", **visit})
        if story.strokes_a_day:
            for at in sorted({*np.arange(np.ceil(start), -1.0, 14.0), -1.0}):
                if at > start:
                    strokes = round(site.use(at + NOON) - site.use(start))
                    reading = {"module": code, "read_at": self._noon(at), "counter": "c", "strokes": strokes}
                    self.rows["readings"].append(reading)

    def _lives(self, site: _Site, start: float, phase: int) -> Iterator[tuple[float, float, str]]:
        """Fitted, ended and why of one part after the other; the last one never ends."""
        story, fitted = self.story, start
        while True:
            failing = self._failing(site, fitted)
            other = fitted + self.rng.exponential(1 / story.other_removals) if story.other_removals else np.inf
            due = fitted + story.planned if story.planned else np.inf
            ended = min(failing, other, due)
            why = "failed" if ended == failing else "taken with another" if ended == other else "planned"
            if story.visits:
                every, first = story.visits, phase + NOON
                upcoming = np.floor((fitted - first) / every + 1e-9) + 1
                upcoming = np.floor((fitted - first) / every + 1e-9) + 1
                ended = first + every * max(np.ceil((ended - first) / every), upcoming)
                why = "failed" if failing <= ended else why
            if ended >= self.end:
                yield fitted, np.inf, ""
                return
            yield fitted, ended, why
            fitted = ended

    def _failing(self, site: _Site, fitted: float) -> float:
        story, rng = self.story, self.rng
        early = rng.random() < story.infants
        standard = np.exp(0.6 * rng.standard_normal()) if story.family == "lognormal" else rng.weibull(self.shape)
        scale = self.scale * story.longer[self._design(fitted)]
        life = rng.exponential(5.0) if early else scale * standard * site.factor ** (-1 / self.shape)
        return site.until(site.use(fitted) + life) if story.strokes_a_day else fitted + life

    def _design(self, fitted: float) -> int:
        return sum(fitted >= -change for change in self.story.changes)

    def _tell_life(self, site: str, module: str, place: int, fitted: float, ended: float, why: str) -> None:
        story, part = self.story, f"N{self._design(fitted)}"
        if why == "failed" and ended >= story.gap:
            self.outcome.by_site[site] += 1
            self.outcome.by_part[part] += 1
            self.outcome.by_week[int((ended - story.gap) // 7)] += 1
        if fitted >= 0 or (story.records_from and ended < -story.records_from):
            return
        unknown = story.unknown_ages and fitted < -story.records_from
        row = {
            "fitting": f"F{len(self.rows['fittings'])}",
            "module": module,
            "position": f"P{place}",
            "part": part,
            "fitted_on": "" if unknown else self._day(fitted),
            "removed_on": "",
            "reason": "",
            "mode": "",
        }
        if ended < 0:
            row |= {"removed_on": self._day(ended), "reason": why, "mode": "WORN" if why == "failed" else ""}
            self.outcome.known += why == "failed"
        self.rows["fittings"].append(row)
