"""Where the evidence on a redesign is thin or the records are open, its sentences say so."""

from __future__ import annotations

import random

import pytest

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Fitting, Position, Site
from reliability import redesign_words as words
from reliability.redesigns.document import redesign_document
from reliability.redesigns.question import question_for
from tests.reliability.rollout_fleet import BEGAN, TODAY, RolloutFleet
from tests.reliability.small_fleet import SmallFleet, day

pytestmark = pytest.mark.django_db


def plain(text: str) -> str:
    return text.replace("\u00a0", " ")


class Side(RolloutFleet):
    """Ten modules at one site; half of them change on day 200. failed: how many of each side fail on day 300."""

    def __init__(self, old_failed: int, new_failed: int) -> None:
        SmallFleet.__init__(self, "days")
        self.n2.supersedes = self.n1
        self.n2.save()
        self.position = Position.objects.create(type=self.type, code="NUT", component=self.component)
        site = self.site()
        for number in range(20):
            module, new = self.module(f"M-{number}", site), number % 2 == 1
            if new:
                self.put(module, self.n1, number, BEGAN, "upgrade")
            begun, part = (BEGAN, self.n2) if new else (number, self.n1)
            fails = number // 2 < (new_failed if new else old_failed)
            self.put(module, part, begun, 300 + number if fails else None, "failed" if fails else "")
        rebuild_clocks()


def test_a_ratio_of_few_failures_is_not_left_to_stand_alone() -> None:
    Side(6, 1)
    lead = plain(words.lead(redesign_document(question_for("N2", as_of=day(TODAY)))))
    assert "times as long" in lead
    assert "Failed have only 1 of the N2: too few to rest a decision on." in lead


def test_a_median_beyond_the_oldest_part_is_said_to_be() -> None:
    RolloutFleet(2.0, sites=6, modules=10)
    seen = redesign_document(question_for("N2", as_of=day(TODAY)))
    assert "beyond what has been seen" not in words.lead(seen)
    early = redesign_document(question_for("N2", as_of=day(BEGAN + 70)))
    after = early["same_dates"]["curves"]["groups"][1]
    assert after["failures"] >= 5
    assert after["median"]["estimate"] > after["curve"]["last_age"]
    assert "Of N2 none has run so long yet: this carries the fitted curve on beyond" in words.lead(early)


def test_failures_of_one_side_at_other_ages_are_not_denied() -> None:
    """Five old parts fail beside the new ones, at ages that no new one has reached."""
    Side(5, 0)
    document = redesign_document(question_for("N2", as_of=day(TODAY)))
    assert document["verdict"]["boundary"] is None
    assert words.strength(document).startswith("No part has yet failed while old and new parts of its age ran beside")


def test_sites_that_may_not_report_and_removals_without_a_reason_are_warned_of() -> None:
    RolloutFleet(2.0)
    document = redesign_document(question_for("N2", as_of=day(TODAY)))
    assert not any("Nobody has said" in each or "not known" in each for each in words.warnings(document))
    Site.objects.filter(code="SITE-2").update(reports_at_once=None)
    dice = random.Random(1)
    for fitting in Fitting.objects.filter(reason="failed"):
        if dice.random() < 0.1:
            Fitting.objects.filter(pk=fitting.pk).update(reason="not known", mode=None)
    rebuild_clocks()
    told = words.warnings(redesign_document(question_for("N2", as_of=day(TODAY))))
    assert any("reported at once at SITE-2. Until then" in each for each in told)
    assert any("removals is not known. They count as removals in good order" in plain(each) for each in told)


def test_tiny_and_great_ratios_are_written_so() -> None:
    assert [plain(words.times_of(value)) for value in (2e-5, 0.05, 1.477, 346.13)] == [
        "less than 0.01",
        "0.05",
        "1.48",
        "350",
    ]


def test_a_bound_without_failures_holds_for_ages_that_were_seen() -> None:
    Side(6, 0)
    said = words.few_sentence(redesign_document(question_for("N2", as_of=day(TODAY))))
    assert "as long as they are no older than these. Parts that wear fail more often later." in said
