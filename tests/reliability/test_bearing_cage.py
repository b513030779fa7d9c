"""Real input from the field through files and commands: the bearing-cage fleet.

Published (from memory; data read in the stored package): shape 2.035, scale 11,792 h, B10 3,903 h with
likelihood-ratio interval about [2,093, 22,144]; Meeker & Escobar, Statistical Methods for Reliability Data (1998),
chapter 8. Recomputed with R's survreg: shape 2.035319, scale 11,792.18, B10 3,903.13, log likelihood -76.436896, and
with an own profile: B10 [2,094.3, 22,144.4].
"""

from __future__ import annotations

import io
import json
from pathlib import Path

import pytest
from django.core.management import call_command

from tests.bearing_cage import units, write_records

pytestmark = pytest.mark.django_db(transaction=True)


@pytest.fixture
def _fleet(tmp_path: Path) -> None:
    write_records(tmp_path / "cage")
    call_command("import_records", str(tmp_path / "cage"), stdout=io.StringIO())


def test_the_units_are_those_of_the_published_table() -> None:
    fleet = list(units())
    assert (len(fleet), sum(unit.failed for unit in fleet)) == (1703, 6)
    assert sum(unit.hours for unit in fleet) == 1_014_146


@pytest.mark.usefixtures("_fleet")
def test_the_life_command_prints_the_published_fit() -> None:
    told = io.StringIO()
    call_command("life", "CAGE", json=True, stdout=told)
    (group,) = json.loads(told.getvalue())["groups"]
    assert (group["lives"], group["failures"], group["running"], group["exposure"]) == (1703, 6, 1697, 1_014_146)
    assert group["weibull"]["shape"]["estimate"] == pytest.approx(2.035319, abs=1e-4)
    assert group["weibull"]["scale"]["estimate"] == pytest.approx(11_792.18, abs=0.5)
    assert group["weibull"]["log_likelihood"] == pytest.approx(-76.436896, abs=1e-5)
    assert group["b10"]["estimate"] == pytest.approx(3_903.13, abs=0.1)
    assert group["b10"]["lower"] == pytest.approx(2_094.3, abs=0.5)
    assert group["b10"]["upper"] == pytest.approx(22_144.4, abs=1.0)
    assert group["curve"]["at_risk"] == [1267, 1142, 1030, 354, 353, 21]


@pytest.mark.usefixtures("_fleet")
def test_the_table_for_people_says_the_same() -> None:
    printed = io.StringIO()
    call_command("life", "CAGE", stdout=printed)
    text = printed.getvalue().replace("\u00a0", " ").replace("\u202f", " ")
    assert "3 903 [2 094, 22 144]" in text
    assert "2.035 [0.971, 3.580]" in text
    assert "11 792 [4 045, 213 597]" in text
    assert "6 of 1 703 have failed; 1 697 are still running." in text
