"""Groups, filters, imported sets, refusals, and the plan the database makes of the question."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import pytest
from django.db import connection

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Component, LifeSet, ModuleType, Part, SetLife
from reliability.life_errors import NothingNamed
from reliability.life_sql import LifeQuestion, grouped_lives, left_out_fittings, single_lives
from tests.reliability.small_fleet import SmallFleet, day, left_out, rows_of

pytestmark = pytest.mark.django_db


@pytest.fixture
def fleet() -> SmallFleet:
    """Ada's N1 of lot A at the lock failed in the first quarter, Ben's N2 runs at K-10 since the second."""
    fleet = SmallFleet()
    fleet.fit(fleet.module("ADA", fleet.site()), 10, 61, "failed", lot="A")
    fleet.fit(fleet.module("BEN", fleet.site("K-10")), 95, part=fleet.n2)
    fleet.fit(fleet.module("CY", fleet.site("K-9")), 95, 99, "planned", part=fleet.n2)
    return fleet


@pytest.mark.parametrize(
    ("by", "groups"),
    [
        ("part", ("N1", "N2")),
        ("site", ("K-9", "K-10", "LOCK")),
        ("type", ("CARRIAGE",)),
        ("lot", ("A", "no lot")),
        ("quarter", ("2024-Q1", "2024-Q2")),
        (None, ("",)),
    ],
)
def test_groups_are_told_by_code_in_natural_order(fleet: SmallFleet, by: str | None, groups: tuple[str, ...]) -> None:
    found = fleet.lives(120, by=by)
    assert found.groups == groups
    assert found.lifetimes.count == 3
    earlier = fleet.lives(120, by=by, known_on=120)
    assert earlier.groups == groups


def test_filters_take_codes_or_records(fleet: SmallFleet) -> None:
    assert fleet.lives(120, parts=["n2"]).lifetimes.count == 2
    assert fleet.lives(120, parts=[fleet.n1]).lifetimes.count == 1
    assert fleet.lives(120, sites=["LOCK", "K-9"]).lifetimes.count == 2
    assert fleet.lives(120, types=[fleet.type]).lifetimes.count == 3
    other = ModuleType.objects.create(code="OTHER")
    assert fleet.lives(120, types=[other]).lifetimes is None
    assert fleet.lives(120, sites=["LOCK"], known_on=120).lifetimes.count == 1


@pytest.mark.parametrize(
    "wrong", [{"clock": "years"}, {"by": "crew"}, {"sites": ["NOWHERE"]}, {"parts": ["N9"]}, {"modes": ["BENT"]}]
)
def test_names_that_do_not_exist_are_refused_with_those_that_do(fleet: SmallFleet, wrong: dict[str, object]) -> None:
    with pytest.raises(NothingNamed, match=r"There is no .*\. Choose one of"):
        fleet.lives(120, **wrong)


def test_counts_by_state(fleet: SmallFleet) -> None:
    found = fleet.lives(120, by="part")
    assert found.count("failed") == 1
    assert found.count("running", group="N2") == 1
    assert found.count("withdrawn", "running") == 2


def test_an_imported_set_stands_alone(fleet: SmallFleet) -> None:
    rows = [
        {"age": 50, "observed": True, "count": 2, "site": "LOCK"},
        {"age": 50, "observed": True, "site": "LOCK"},
        {"age": 70, "observed": False, "entry_age": 20},
        {"age": 60, "observed": True, "last_good_age": 40},
        {"age": 60, "observed": False, "clock": "strokes"},
        {"age": 0, "observed": False},
    ]
    trial = LifeSet.objects.create(code="TRIAL")
    for row in rows:
        SetLife.objects.create(set=trial, component=fleet.component, **{"clock": "days", "part": fleet.n1, **row})
    found = fleet.lives(120, life_set="trial")
    assert rows_of(found) == [
        (0, 50, "failed", None, 3),
        (0, 60, "failed", 40, 1),
        (20, 70, "withdrawn", None, 1),
    ]
    assert left_out(found) == {"counted on another clock": 1, "nothing observed yet: age 0": 1}
    assert fleet.lives(120, life_set="TRIAL", by="site").groups == ("LOCK", "no place")
    with pytest.raises(NothingNamed, match="no set"):
        fleet.lives(120, life_set="OTHER")


QUESTIONS: dict[str, Any] = {
    "by nothing": lambda question: grouped_lives(question),
    "by part": lambda question: grouped_lives(replace(question, by="part")),
    "by lot": lambda question: grouped_lives(replace(question, by="lot")),
    "by part and mode": lambda question: grouped_lives(replace(question, by="part", also="mode")),
    "by part and module": lambda question: grouped_lives(replace(question, by="part", also="module")),
    "one by one": lambda question: single_lives(question),
    "left out": lambda question: left_out_fittings(question, "age 0"),
}


@pytest.mark.parametrize("asked", QUESTIONS)
def test_the_question_is_answered_from_indexes(fleet: SmallFleet, asked: str) -> None:
    """No table that grows with the fleet is read from end to end, and no more is sorted than the component's lives."""
    crowd_of_another_component(fleet)
    question = LifeQuestion(fleet.component.pk, "strokes", False, day(120).toordinal(), day(120).isoformat())
    sql, parameters = QUESTIONS[asked](question)
    with connection.cursor() as cursor:
        if connection.vendor == "postgresql":
            cursor.execute("SET LOCAL enable_seqscan = off")  # so small a fleet would be read whole
            cursor.execute("EXPLAIN (ANALYZE, FORMAT JSON) " + sql, parameters)
            nodes = list(nodes_of(cursor.fetchone()[0][0]["Plan"]))
        else:
            cursor.execute("EXPLAIN QUERY PLAN " + sql, parameters)
            nodes = [str(row) for row in cursor.fetchall()]
    if connection.vendor == "postgresql":
        growing = {"fleet_fitting", "fleet_fittingclock", "fleet_clockpoint"}
        whole = [node for node in nodes if node["Node Type"] == "Seq Scan" and node["Relation Name"] in growing]
        sorted_rows = [node["Actual Rows"] for node in nodes if "Sort" in node["Node Type"]]
        assert max(sorted_rows, default=0) <= LIVES, nodes
    else:
        whole = [line for line in nodes if "SCAN f'" in line or "SCAN k" in line or "SCAN c'" in line]
        assert any("SEARCH p USING COVERING INDEX fleet_part_component_id" in line for line in nodes)
        assert any("SEARCH f USING INDEX fleet_fitti_part_id" in line for line in nodes)
    assert not whole, nodes


LIVES = 3  # of the component that is asked for


def crowd_of_another_component(fleet: SmallFleet) -> None:
    other = Component.objects.create(code="SEAL", clock="days")
    seal = Part.objects.create(code="E1", component=other)
    module = fleet.module("DEE", fleet.site("MILL"))
    for age in range(40):
        fleet.fit(module, age, age + 5, "failed", part=seal)
    rebuild_clocks()


def nodes_of(plan: dict[str, Any]) -> Iterator[dict[str, Any]]:
    yield plan
    for below in plan.get("Plans", []):
        yield from nodes_of(below)
