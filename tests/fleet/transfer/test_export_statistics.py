"""Taken out and brought into an empty book, the records give the same estimates to the last digit."""

from __future__ import annotations

import io
import json
import random
from pathlib import Path
from typing import Any

import pytest
from django.core.management import call_command

from fleet.transfer.export_records import write_export
from fleet.transfer.scope import Scope
from tests.fleet.transfer.files import bring_in, fleet, text

pytestmark = pytest.mark.django_db(transaction=True)
AS_OF = "2026-06-01"


def long_fleet() -> dict[str, str | bytes]:
    """Thirty modules, their counters read now and then, nuts that fail after some time and screws that do not."""
    chance = random.Random(5)
    tags = [f"L-{number}" for number in range(30)]
    modules = text("modules") + "".join(f"{tag},BRUSH,,,\n" for tag in tags)
    stays = text("placements") + "".join(f"{tag},WEIR,,2024-01-10,\n" for tag in tags)
    fittings = ["fitting,module,position,part,fitted_on,removed_on,reason"]
    readings = ["module,read_at,strokes"]
    for tag in tags:
        strokes = 0
        for month in range(1, 13):
            strokes += chance.randint(500, 2000)
            readings.append(f"{tag},2025-{month:02d}-05T09:1{chance.randint(0, 9)},{strokes}")
        removed = [f"2025-{chance.randint(1, 6):02d}-1{chance.randint(0, 9)}", f"2025-1{chance.randint(0, 2)}-20"]
        days = ["2024-01-10", *removed]
        for life, day in enumerate(days):
            end = f"{days[life + 1]},{chance.choice(['failed', 'failed', 'planned'])}" if life < 2 else ","
            fittings.append(f"{tag}-{life},{tag},N1,N-{1 + life % 2},{day},{end}")
        fittings.append(f"{tag}-S,{tag},S1,S-1,2024-01-10,,")
    gone: dict[str, str | bytes | None] = {"visits": None, "findings": None, "stops": None}
    return fleet(modules=modules, placements=stays, fittings="\n".join(fittings), readings="\n".join(readings), **gone)


def estimates() -> list[Any]:
    answers = []
    for component in ("NUT", "SCREW"):
        for choice in (["--by", "part"], ["--clock", "days"]):
            out = io.StringIO()
            call_command("life", component, *choice, "--as-of", AS_OF, "--json", stdout=out)
            answers.append(json.loads(out.getvalue()))
    return answers


@pytest.mark.parametrize("form", ["again.zip", "again.xlsx"])
def test_life_is_the_same_after_an_export_and_an_import(form: str, tmp_path: Path) -> None:
    assert bring_in(tmp_path, long_fleet()).state == "done"
    before = estimates()
    write_export(tmp_path / form, Scope())
    call_command("flush", interactive=False, verbosity=0)

    call_command("import_records", str(tmp_path / form), stdout=io.StringIO())

    assert before[0]["groups"][0]["failures"] > 5
    assert estimates() == before
