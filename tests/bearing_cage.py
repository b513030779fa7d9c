"""The bearing-cage fleet as records files: `python -m tests.bearing_cage FOLDER` writes them, ready to be imported.

1,703 units of staggered age, all still in the field, six of which broke a bearing cage (Abernethy et al.,
AFWAL-TR-83-2079, 1983; Meeker & Escobar, Statistical Methods for Reliability Data, 1998, chapter 8; the data are in
`tests/reference/bearing_cage.csv`). Hours come from the published table; days, tags and the ten hours a day are
invented here, so that each unit has a history that ends at its hours.
"""

from __future__ import annotations

import csv
import datetime as dt
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

DATA = Path(__file__).parent / "reference" / "bearing_cage.csv"
LAST_DAY = dt.date(2024, 6, 30)
HOURS_PER_DAY = 10.0
SITE, COMPONENT, PART, MODE, TYPE, POSITION = "FIELD", "CAGE", "CAGE-1", "BROKEN", "ENGINE", "BEARING"


@dataclass(frozen=True)
class Unit:
    tag: str
    hours: float
    failed: bool
    fitted_on: dt.date
    ended_on: dt.date  # failed then, or read then and still running


def units(data: Path = DATA) -> Iterator[Unit]:
    """One for each of the published lives; those that failed did so a week apart, the last before the reading."""
    number = failures = 0
    with data.open(encoding="utf-8", newline="") as lines:
        for row in csv.DictReader(lines):
            hours, failed = float(row["hours"]), row["event"] == "1"
            for _ in range(int(row["count"])):
                number += 1
                failures += failed
                ended_on = LAST_DAY - dt.timedelta(weeks=failures) if failed else LAST_DAY
                days = -(-hours // HOURS_PER_DAY)  # whole days, so that no unit ran more than ten hours a day
                yield Unit(f"U-{number:04}", hours, failed, ended_on - dt.timedelta(days=days), ended_on)


def write_records(folder: Path) -> None:
    """The smallest set of files that tells this fleet."""
    folder.mkdir(parents=True, exist_ok=True)
    fleet = list(units())
    _write(
        folder / "sites.csv",
        "site,name,kind,zone,hours_per_day,reports_at_once",
        [[SITE, "All fields", "field", "UTC", HOURS_PER_DAY, "yes"]],
    )
    _write(folder / "components.csv", "component,name,clock", [[COMPONENT, "Bearing cage", "hours"]])
    _write(folder / "modes.csv", "component,mode,name", [[COMPONENT, MODE, "cage broken"]])
    _write(folder / "types.csv", "type,name", [[TYPE, "Engine"]])
    _write(folder / "positions.csv", "type,position,component", [[TYPE, POSITION, COMPONENT]])
    _write(folder / "parts.csv", "part,component,name", [[PART, COMPONENT, "Bearing cage"]])
    _write(folder / "modules.csv", "module,type,built_on", [[unit.tag, TYPE, unit.fitted_on] for unit in fleet])
    _write(folder / "placements.csv", "module,site,from_on", [[unit.tag, SITE, unit.fitted_on] for unit in fleet])
    _write(
        folder / "fittings.csv",
        "fitting,module,position,part,fitted_on,hours_at_fit,failed_on,removed_on,hours_at_removal,reason,mode",
        [_fitting(unit) for unit in fleet],
    )
    _write(
        folder / "readings.csv",
        "module,read_at,hours",
        [[unit.tag, f"{unit.ended_on}T12:00:00Z", unit.hours] for unit in fleet],
    )


def _fitting(unit: Unit) -> list[object]:
    begun: list[object] = [f"C-{unit.tag}", unit.tag, POSITION, PART, unit.fitted_on, 0]
    ended = [unit.ended_on, unit.ended_on, unit.hours, "failed", MODE] if unit.failed else [""] * 5
    return begun + ended


def _write(path: Path, heads: str, rows: list[list[object]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as lines:
        writer = csv.writer(lines)
        writer.writerow(heads.split(","))
        writer.writerows(rows)


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("Usage: python -m tests.bearing_cage FOLDER")
    write_records(Path(sys.argv[1]))
