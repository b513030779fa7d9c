"""Collects what the demo's crews write down, as rows of records files."""

from __future__ import annotations

import datetime as dt
import random
from collections import defaultdict
from typing import TYPE_CHECKING, Any

from fleet.demo.catalogue import POSITIONS

if TYPE_CHECKING:
    from fleet.demo.carriage import Carriage, Fitted

Row = dict[str, Any]
COMPONENT_OF = dict(POSITIONS)


class Sheets:
    """Rows by file; a late site's rows from before its records began are dropped at the end."""

    def __init__(self, dice: random.Random) -> None:
        self.dice = dice
        self.rows: dict[str, list[Row]] = defaultdict(list)
        self.numbers: dict[str, int] = defaultdict(int)
        self.fitted_on_bench: dict[str, str] = {}  # fitting → job

    def number(self, prefix: str) -> str:
        self.numbers[prefix] += 1
        return f"{prefix}-{self.numbers[prefix]:05d}"

    def add(self, sheet: str, row: Row) -> Row:
        self.rows[sheet].append(row)
        return row

    def place(self, module: Carriage, site: str, day: dt.date, bay: str | None = None) -> Row:
        bay = module.bay if bay is None else bay
        return self.add("placements", {"module": module.tag, "site": site, "bay": bay, "from_on": day, "to_on": ""})

    def end_place(self, placement: Row | None, day: dt.date) -> None:
        if placement is not None:
            placement["to_on"] = day

    def visit(self, module: Carriage, day: dt.date, called: bool) -> Row:
        at = dt.datetime.combine(day, dt.time(self.dice.randrange(9, 17), self.dice.randrange(60)))
        lag = self.dice.choices([0, 1, 2, 4, 7], [76, 12, 6, 4, 2])[0]
        known = min(day + dt.timedelta(days=lag), module.calendar.end)
        return self.add(
            "visits",
            {
                "visit": self.number("V"),
                "module": module.tag,
                "happened_at": at,
                "crew": module.place.crew,
                "left": "running",
                "known_on": known if known != day else "",
                "note": "",
                "day": day,
            },
        )

    @staticmethod
    def known(visit: Row) -> dt.date:
        return visit["known_on"] or visit["day"]

    def fitting(
        self,
        module: Carriage,
        position: str,
        part: str,
        lot: str,
        day: dt.date,
        visit: str | None,
        known: dt.date | None,
    ) -> Row:
        return self.add(
            "fittings",
            {
                "fitting": self.number("F"),
                "module": module.tag,
                "position": position,
                "part": part,
                "lot": lot,
                "fitted_on": day,
                "strokes_at_fit": round(module.strokes) if visit else "",
                "fitted_visit": visit or "",
                "fitted_known_on": known if known and known != day else "",
            },
        )

    def remove(
        self,
        module: Carriage,
        part: Fitted,
        visit: Row,
        reason: str,
        mode: str | None,
        known: dt.date,
        caused_by: str = "",
    ) -> None:
        failed = reason == "failed"
        reported = module.place.reports_at_once is not False
        part.row |= {
            "removed_on": visit["day"],
            "reason": reason,
            "mode": mode if failed and mode else "",
            "failed_on": part.dead_since if failed and reported and part.dead_since else "",
            "found_by": ("when needed" if reported else "planned visit") if failed else "",
            "strokes_at_removal": round(module.strokes),
            "caused_by": caused_by,
            "removed_visit": visit["visit"],
            "removed_known_on": known if known != visit["day"] else "",
        }

    def found_failed(self, visit: Row, part: Fitted) -> None:
        """Seen, and left in until the bench takes it out."""
        row = {"visit": visit["visit"], "position": part.position, "finding": "failed", "mode": part.mode}
        self.add("findings", row)
        part.found_on = visit["day"]

    def remove_on_bench(
        self, module: Carriage, part: Fitted, job: str, day: dt.date, reason: str, caused_by: str = ""
    ) -> None:
        failed = reason == "failed"
        reported = module.place.reports_at_once is not False
        part.row |= {
            "removed_on": day,
            "reason": reason,
            "mode": part.mode if failed else "",
            "failed_on": (part.dead_since if reported else part.found_on) if failed else "",
            "found_by": ("when needed" if reported else "planned visit") if failed else "",
            "caused_by": caused_by,
            "job": job,
        }

    def belongs_to(self, row: Row, job: str) -> None:
        row["job"] = self.fitted_on_bench[row["fitting"]] = job

    def stop_of(self, module: Carriage, visit: Row) -> Row:
        """Nobody had reported it: it stands still since the visit that sent it away."""
        row = {"module": module.tag, "stopped_at": visit["happened_at"], "running_at": ""}
        return self.add("stops", row | {"reported_by": module.place.crew, "visit": visit["visit"]})

    @staticmethod
    def end_stop_on(stop: Row | None, day: dt.date) -> None:
        """It came to the depot, where nothing stands still."""
        if stop is not None:
            stop["running_at"] = max(stop["stopped_at"], dt.datetime.combine(day, dt.time()))

    def reading(self, module: Carriage, visit: Row) -> None:
        row: Row = {
            "module": module.tag,
            "read_at": visit["happened_at"],
            "counter": module.counter,
            "strokes": round(module.counter_face),
            "visit": visit["visit"],
            "known_on": visit["known_on"],
        }
        self.add("readings", row)
        nut = module.fitted.get("NUT")
        if nut is not None and self.dice.random() < 0.12 and nut.since < visit["day"]:
            wear = max(0.05, 2.4 - 2.2 * max(nut.left, 0) / 66_000) * self.dice.uniform(0.85, 1.15)
            self.add(
                "readings",
                {
                    "module": module.tag,
                    "read_at": visit["happened_at"] + dt.timedelta(minutes=1),
                    "position": "NUT",
                    "play_mm": round(wear, 2),
                    "visit": visit["visit"],
                    "known_on": visit["known_on"],
                },
            )

    def finding(self, module: Carriage, visit: Row) -> None:
        if self.dice.random() < 0.25:
            position = self.dice.choice(["NUT", "ROLL-1", "SCREW", "COUPLING"])
            found = self.dice.choice(["adjusted", "cleaned", "nothing found"])
            self.add("findings", {"visit": visit["visit"], "position": position, "finding": found})

    def stop(self, module: Carriage, day: dt.date, hour: int) -> Row:
        reporter = "PILAR" if module.place.sandy and self.dice.random() < 0.5 else module.place.crew
        return self.add(
            "stops",
            {
                "module": module.tag,
                "stopped_at": dt.datetime.combine(day, dt.time(hour, self.dice.randrange(60))),
                "running_at": "",
                "reported_by": reporter,
                "visit": "",
            },
        )

    @staticmethod
    def end_stop(stop: Row, visit: Row) -> None:
        stop["running_at"] = visit["happened_at"] + dt.timedelta(minutes=25)
        stop["visit"] = visit["visit"]
