"""Every reason for which a fitting counts for nothing: its count on the page, and the rows behind the count."""

from __future__ import annotations

from typing import Any

import pytest
from django.test import Client

from fleet.actions.rebuild_clocks import rebuild_clocks
from reliability.life_rules import Reason
from reliability.life_words import REMEDIES
from tests.factories import make_manager
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_life_screen import lines_of

pytestmark = pytest.mark.django_db
AS_OF = 100
# Imported sets have a clock of their own; and whoever fits a part has looked at its module.
NOT_OF_FITTINGS = {Reason.OTHER_CLOCK, Reason.NOT_SEEN}


class LeftOutFleet(SmallFleet):
    """One life that counts, and for each reason fittings that do not; their modules are named after it."""

    def __init__(self) -> None:
        super().__init__(clock="days")
        lock = self.site("LOCK", strokes_per_day=50)
        self.fit(self.module("GOOD", lock), 0, 40, "failed")
        self.fit(self.module("RIG", self.site("STAND", kind="rig", strokes_per_day=50)), 0, 40, "failed")
        self.fit(self.module("DAY_NOT_KNOWN", lock), None, 40, "failed")
        late = self.site("SLOW", strokes_per_day=50)
        self.fit(self.module("TOLD-LATE", late), 0, 40, "failed", known=55)  # so SLOW reports 15 days late
        self.fit(self.module("TOO_LATE", late), 95)
        self.fit(self.module("USED", lock), 10, 40, "failed", age_at_fit=7)
        self.fit(self.module("NO_CLOCK", self.site("MUTE")), 0, 40, "failed")
        self.fit(
            self.module("BEFORE_RECORDS", self.site("YOUNG", records_from=day(60), strokes_per_day=50)), 0, 40, "failed"
        )
        self.fit(self.module("NO_AGE", lock), 40, 40, "planned")
        self.fit(self.module("STRUCK_OUT", lock), 0, 40, "failed", struck_out="entered twice")
        rebuild_clocks()


@pytest.fixture
def ines() -> Client:
    client = Client()
    client.force_login(make_manager())
    return client


def ask(client: Client, **choices: Any) -> dict[str, dict[str, Any]]:
    reply = client.get("/life/", {"component": "NUT", "as_of": day(AS_OF).isoformat(), **choices})
    assert reply.status_code == 200
    return {row["reason"]: row for row in reply.context["left_out"]}


@pytest.mark.parametrize(
    "reason", [reason for reason in Reason if reason not in NOT_OF_FITTINGS], ids=lambda each: each.name
)
def test_each_reason_leads_to_its_rows(ines: Client, reason: Reason) -> None:
    LeftOutFleet()
    # strokes bring in the reasons that only another clock than the component's own can have
    left_out = ask(ines, clock="strokes")
    assert set(left_out) == {each.value for each in Reason if each not in NOT_OF_FITTINGS}
    row = left_out[reason.value]
    listed = lines_of(ines.get(row["url"] + "&as=csv"))
    assert {line["Module"] for line in listed} == {reason.name}
    assert len(listed) == row["count"]
    assert row["remedy"] == REMEDIES[reason.value]
    assert row["remedy"]


def test_what_counts_and_what_does_not_add_up_to_all(ines: Client) -> None:
    fleet = LeftOutFleet()
    reply = ines.get("/life/", {"component": "NUT", "as_of": day(AS_OF).isoformat()})
    lives = sum(group["lives"] for group in reply.context["document"]["groups"])
    assert lives + sum(row["count"] for row in reply.context["left_out"]) == fleet.n1.fittings.count()


def test_a_choice_goes_along_to_the_rows(ines: Client) -> None:
    fleet = LeftOutFleet()
    fleet.fit(
        fleet.module("N2-TWICE", fleet.n1.fittings.first().module.placements.first().site),
        0,
        9,
        "failed",
        part=fleet.n2,
        struck_out="twice",
    )
    left_out = ask(ines, part="N2")
    assert left_out["struck out"]["count"] == 1
    (line,) = lines_of(ines.get(left_out["struck out"]["url"] + "&as=csv"))
    assert line["Module"] == "N2-TWICE"


def test_every_reason_has_a_remedy() -> None:
    assert set(REMEDIES) == {reason.value for reason in Reason}
