"""A small fleet as files, changed here and there by the tests."""

from __future__ import annotations

import csv
import io
import zipfile
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

from fleet.models import Person, Work
from fleet.transfer.import_records import Import, Outcome
from fleet.transfer.sources import Table, open_bytes
from fleet.work import run_here
from fleet.work.progress import SilentProgress

FLEET = {
    "sites": """
site,name,kind,zone
WEIR,Weir at the mill,field,Europe/Lisbon
SHED,The shed,depot,Europe/Lisbon""",
    "people": """
person,name,role,sites,active
ANNA,Anna Alves,crew,WEIR,yes
MAX,Max Moor,manager,all,yes""",
    "components": """
component,name,clock
NUT,Drive nut,strokes
SCREW,Lead screw,days""",
    "modes": """
component,mode,name,mechanism,cause,goes_to_bench
NUT,WORN,Thread worn out,wear,sand,no
SCREW,BENT,Screw bowed,,,yes""",
    "types": """
type,name,cautions
BRUSH,Brush carriage,Isolate and lock out.""",
    "positions": """
type,position,component,order
BRUSH,N1,NUT,1
BRUSH,S1,SCREW,2""",
    "parts": """
part,component,revision,name,supersedes,fits_types,state,supplier,unit_cost,lead_time_days,pack,minimum
N-2,NUT,B,Nut with lip,N-1,BRUSH,on trial,,14.50,30,5,10
N-1,NUT,A,Nut,,,current,,12,,,
S-1,SCREW,,Screw,,,current,,,,,""",
    "modules": """
module,type,built_on,records_from,scrapped_on
K-9,BRUSH,2024-01-01,,
K-10,BRUSH,,,""",
    "placements": """
module,site,bay,from_on,to_on
K-9,WEIR,B1,2024-01-10,2024-06-01
K-9,SHED,,2024-06-01,2024-07-01
K-9,WEIR,B1,2024-07-01,
K-10,WEIR,B2,2024-01-10,""",
    "visits": """
visit,module,happened_at,crew,left,known_on,note
V-1,K-9,2024-03-01T10:00,ANNA,running,,mended""",
    "fittings": """
fitting,module,position,part,fitted_on,removed_on,reason,mode,removed_visit,caused_by,strokes_at_removal
F-1,K-9,N1,N-1,2024-01-10,2024-03-01,failed,WORN,V-1,,5000
F-2,K-9,N1,N-2,2024-03-01,,,,,,
F-3,K-9,S1,S-1,2024-01-10,2024-03-01,taken with another,,V-1,F-1,
F-4,K-10,N1,N-2,2024-01-10,,,,,,""",
    "findings": """
visit,position,finding,mode,note
V-1,S1,cleaned,,sand in it""",
    "stops": """
module,stopped_at,running_at,reported_by,known_on,visit,note
K-9,2024-02-28T08:00,2024-03-01T10:00,ANNA,,V-1,""",
    "readings": """
module,read_at,counter,restarts,strokes,hours,position,play_mm,visit,known_on,struck_out
K-9,2024-01-10T12:00,C1,,0,,,,,,
K-9,2024-03-01T10:00,C1,,5000,,,,V-1,,
K-9,2024-03-01T10:00,,,,,N1,0.4,V-1,,
K-9,2024-08-01T10:00,C2,,10,2.5,,,,,""",
    "lives": """
set,component,part,age,observed,entry_age,last_good_age,count,site,clock
CAGE,NUT,N-1,100.5,yes,,,2,,hours
CAGE,NUT,,200,no,50,,5,,hours
CAGE,NUT,,200,no,50,,5,,hours""",
}

# The same fleet with a bench at the shed, its shelf, and Anna's van.
STOCKED = {
    "stores": """
store,name,site,person,may_go_below_zero
SHELF,Shelf in the shed,SHED,,
VAN-A,Van of Anna,,ANNA,yes""",
    "supply": """
order,part,quantity,ordered_on,due_on,supplier,unit_cost
PO-1,N-1,10,2024-02-01,2024-02-20,Brandt,11.50
PO-1,S-1,2,2024-02-01,,Brandt,
PO-2,N-1,5,2024-05-02,2024-06-02,Brandt,""",
    "bench": """
job,module,depot,reason,received_on,stage,started_on,finished_on,outcome,waits_for,note
J-1,K-9,SHED,screw bowed,2024-06-01,,2024-06-03,2024-06-28,ready,,""",
    "hours": """
job,person,day,hours
J-1,MAX,2024-06-03,2.5
J-1,MAX,2024-06-04,1""",
    "capacity": """
week,hours
2024-06-03,40
2024-W24,32""",
    "moves": """
move,store,part,happened_on,quantity,kind,other_store,visit,job,order,condition,reason
SM-1,SHELF,N-1,2024-02-18,6,receipt,,,,PO-1,,
SM-2,SHELF,N-1,2024-03-05,4,receipt,,,,PO-1,,
SM-3,SHELF,S-1,2024-02-18,2,receipt,,,,PO-1,new,
SM-4,SHELF,N-1,2024-02-19,-2,transfer,VAN-A,,,,,
SM-5,VAN-A,N-1,2024-03-01,-1,issue,,V-1,,,,
SM-6,SHELF,S-1,2024-06-03,-1,issue,,,J-1,,,
SM-7,SHELF,N-1,2024-07-01,-1,count,,,,,,one missing
SM-8,SHELF,N-1,2024-07-02,1,receipt,,,,,used,from K-10
SM-9,SHELF,N-1,2024-07-03,-1,scrap,,,,,,dropped""",
}

# A nut with a lip that comes with a new guide, and the plan by which the carriages get both.
REDESIGNED = {
    "components": """
component,name,clock
NUT,Drive nut,strokes
SCREW,Lead screw,days
GUIDE,Carriage guide,days""",
    "positions": """
type,position,component,order
BRUSH,N1,NUT,1
BRUSH,S1,SCREW,2
BRUSH,G1,GUIDE,3""",
    "parts": """
part,component,name,unit_cost
N-0,NUT,First nut,11
N-1,NUT,Nut,12
N-2,NUT,Nut with lip,14.50
S-1,SCREW,Screw,
G-1,GUIDE,Guide,5
G-2,GUIDE,Guide for the lip,6""",
    "redesigns": """
redesign,name,hope,starts_on,cost_a_module,visits_a_failure,bench_hours_a_failure,stop_days_a_failure,note
LIP,Nut with a lip,1.4,2024-03-01,55.50,1,0.25,2,keeps sand out
SCREW-2,,,,,,,,""",
    "replacements": """
redesign,part,replaces
LIP,N-2,N-1 N-0
LIP,G-2,G-1
SCREW-2,S-2,S-1""",
    "rollout": """
redesign,module,order,planned_on
LIP,K-10,1,2024-03-01
LIP,K-9,2,2024-03-08""",
}
REDESIGNED["parts"] += "\nS-2,SCREW,Screw of another steel,"


def redesigned(**changed: str | bytes | None) -> dict[str, str | bytes]:
    """The small fleet with its redesigns and their plan."""
    return fleet(**{**{name: body.strip() + "\n" for name, body in REDESIGNED.items()}, **changed})


def text(name: str) -> str:
    return (FLEET | STOCKED)[name].strip() + "\n"


def stocked(**changed: str | bytes | None) -> dict[str, str | bytes]:
    """The small fleet with its stores and its bench; K-9 got a new screw on the bench."""
    more = {name: text(name) for name in STOCKED}
    fittings = with_cell("fittings", 2, "job", "") + "F-5,K-9,S1,S-1,2024-06-03,,,,,,,J-1\n"
    return fleet(**{**more, "fittings": fittings, **changed})


def zipped(files: Mapping[str, str | bytes]) -> bytes:
    content = io.BytesIO()
    with zipfile.ZipFile(content, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, body in files.items():
            archive.writestr(f"{name}.csv", body)
    return content.getvalue()


def fleet(**changed: str | bytes | None) -> dict[str, str | bytes]:
    """The small fleet; a file may be replaced, added, or left out with None."""
    files: Mapping[str, str | bytes] = {name: text(name) for name in FLEET}
    for name, body in changed.items():
        if body is None:
            files.pop(name, None)
        else:
            files[name] = body
    return files


def with_cell(name: str, row: int, column: str, value: str) -> str:
    """One file of the fleet with one cell changed; rows as a spreadsheet counts them. A new column is added."""
    rows = list(csv.reader(io.StringIO(text(name))))
    if column not in rows[0]:
        rows = [[*line, column if place == 0 else ""] for place, line in enumerate(rows)]
    rows[row - 1][rows[0].index(column)] = value
    target = io.StringIO()
    csv.writer(target, lineterminator="\n").writerows(rows)
    return target.getvalue()


def with_rows(name: str, *rows: str) -> str:
    return text(name) + "\n".join(rows) + "\n"


def tables(files: Mapping[str, str | bytes]) -> Callable[[], Sequence[Table]]:
    content = zipped(files)
    return lambda: open_bytes("fleet.zip", content)


def look(files: Mapping[str, str | bytes], *, person: Person | None = None, update: bool = False) -> Outcome:
    return Import(tables(files), person=person, update=update, progress=SilentProgress()).preview()


def bring_in(folder: Path, files: Mapping[str, str | bytes] | None = None, *, update: bool = False) -> Work:
    """Through the same work as the command; the files are written into the folder first."""
    path = folder / "fleet.zip"
    path.write_bytes(zipped(fleet() if files is None else files))
    arguments: dict[str, Any] = {"path": str(path), "update": update, "source": "command"}
    return run_here(Work.objects.create(kind="import_records", title="Import of fleet.zip", arguments=arguments))


def problems(outcome: Outcome) -> list[tuple[str, int, str, str]]:
    return [(each.file, each.row, each.column, each.message) for each in outcome.problems]
