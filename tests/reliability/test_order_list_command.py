"""The order list at the command line: a table for people, one document for a machine, refusals in words."""

from __future__ import annotations

import datetime as dt
import json
from io import StringIO

import pytest
import time_machine
from django.core.management import CommandError, call_command

from tests.reliability.supply_fleet import TODAY, SupplyFleet

pytestmark = pytest.mark.django_db


def run(*arguments: str) -> str:
    out = StringIO()
    with time_machine.travel(dt.datetime.combine(TODAY, dt.time(12), tzinfo=dt.UTC), tick=False):
        SupplyFleet(modules=12, on_hand=1)
        call_command("order_list", *arguments, stdout=out)
    return out.getvalue()


def test_a_table_with_the_reasons_of_what_is_to_be_ordered() -> None:
    told = run()
    assert "to order today for" in told.splitlines()[0]
    assert any(line.startswith("N2 ") for line in told.splitlines())
    assert "N2: 3 on hand last" in told.replace("\u00a0", " ")


def test_one_document_without_what_is_only_kept() -> None:
    document = json.loads(run("--json", "--service", "99"))
    line = next(line for line in document["lines"] if line["part"] == "N2")
    assert line["service_level"] == 0.99
    assert "state" not in line


def test_an_impossible_chance_is_refused() -> None:
    with pytest.raises(CommandError, match="Give 50 to"):
        run("--service", "100")
