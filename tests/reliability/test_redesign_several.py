"""Several components in one redesign, several candidates beside each other, and older parts against newer ones."""

from __future__ import annotations

import math
from io import StringIO
from typing import Any

import pytest
from django.core.management import call_command
from django.test import Client
from django.urls import reverse

from fleet.actions.plan_rollout import plan_rollout
from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.save_redesign import PartReplaced, save_redesign
from fleet.models import Fitting, Module, Part
from fleet.rollout import done_words, positions_left
from reliability import redesign_words as words
from reliability.redesign_files import lines
from reliability.redesign_page import page_of
from reliability.redesigns.document import redesign_document
from reliability.redesigns.plan_left import plan_left
from reliability.redesigns.question import question_for
from reliability.stats.few_failures import success_run_size
from tests.factories import make_book, make_manager
from tests.reliability.kit_fleet import KitFleet
from tests.reliability.rollout_fleet import TODAY, RolloutFleet
from tests.reliability.small_fleet import day

pytestmark = pytest.mark.django_db
AS_OF = day(TODAY).isoformat()


def plain(text: str) -> str:
    return text.replace("\u00a0", " ").replace("\u202f", " ")


class Screen:
    def __init__(self) -> None:
        self.fleet = KitFleet(2.0, sites=5, modules=8)
        self.redesign = self.fleet.kit(cost_a_module=50)
        make_book(visit_cost=100)
        self.client = Client()
        self.client.force_login(make_manager())

    def text(self, name: str = "redesign", **asked: Any) -> str:
        reply = self.client.get(reverse(name, args=["KIT"]), {"as_of": AS_OF, **asked})
        assert reply.status_code == 200
        return plain(reply.content.decode())


def test_each_component_has_its_evidence_and_names_the_other() -> None:
    screen = Screen()
    nut, guide = screen.text(component="NUT"), screen.text(component="GUIDE")
    assert "Clear: the N2 drive nuts live longer than N1." in nut
    assert "Of the same redesign, Carriage guide. Not yet shown: the records do not tell the G2" in nut
    assert "component=GUIDE" in nut
    assert "G2 carriage guides" in guide
    assert "Of the same redesign, Drive nut. Clear" in guide
    # what is chosen of one component is no question to the other
    assert (
        screen.client.get(reverse("redesign", args=["KIT"]), {"component": "GUIDE", "mode": "WORN"}).status_code == 422
    )


def test_money_is_counted_together_and_the_rollout_paid_once() -> None:
    screen = Screen()
    modules = [screen.fleet.modules[f"M-1-{number}"] for number in (2, 4, 6)]  # the even ones keep the old parts
    plan_rollout(by=None, redesign=screen.redesign, modules=modules, first_on=day(TODAY), modules_a_week=3)
    plan, positions = plan_left(screen.redesign)
    assert (plan.modules, positions) == (3, {screen.fleet.component.pk: 3, screen.fleet.guide.pk: 3})
    screen.fleet.n2.unit_cost = 20
    screen.fleet.n2.save()
    text = screen.text("redesign_money")
    assert f"The {3 * 50 + 3 * 20 + 3 * 6} EUR for what is left of the rollout" in text, "a module is paid for once"
    assert "What each component adds" in text
    assert "Counted with the ratios of the same dates and sites, as the verdict: N2 over N1" in text
    assert "G2 over G1" in text
    assert "If the new parts lived each only as long as the lower end" in text
    other = screen.text("redesign_money", component="GUIDE")
    assert section(text) == section(other), "the money is that of the redesign"


def section(text: str) -> str:
    return text[text.index('<section id="money"') :].split("</section>")[0]


def test_the_print_has_one_sheet_to_decide_and_one_for_each_component() -> None:
    text = Screen().text("redesign_print")
    assert text.count('class="redesign-sheet') == 3
    assert text.count("For the engineer:") == 2
    assert text.count("Does it pay") == 1
    assert "G2 in place of G1" in text
    ids = [piece.split('"')[0] for piece in text.split('data-chart="')[1:]]
    assert len(ids) == len(set(ids)) == 4, ids


def test_modules_are_done_when_every_component_is() -> None:
    fleet = KitFleet(2.0, sites=2, modules=4)
    kit = fleet.kit()
    both, none = fleet.modules["M-1-1"], fleet.modules["M-1-2"]
    assert positions_left(kit, [(both.pk, both.type_id)]) == {fleet.component.pk: 0, fleet.guide.pk: 0}
    assert positions_left(kit, [(none.pk, none.type_id)]) == {fleet.component.pk: 1, fleet.guide.pk: 1}
    assert plain(done_words(1, 1, 2)) == "1 of 1 planned module has the new parts in every position."
    assert plain(done_words(0, 3, 1)) == "0 of 3 planned modules have the new part in every position."


def test_three_candidates_beside_each_other_one_of_them_on_a_rig_only() -> None:
    KitFleet(2.0, sites=5, modules=8)
    document = redesign_document(question_for("N2", as_of=day(TODAY), also=("N3", "N4")))
    first, second, third = document["candidates"]
    assert first["longer"] == pytest.approx(document["chances"]["longer"]), "the same chance as above"
    assert first["ratio"]["median"]["estimate"] == pytest.approx(
        document["same_dates"]["ratio"]["sites differ"]["median"]["estimate"]
    )
    assert (second["lives"], second["failures"], second["sites"]) == (8, 5, 1)
    assert (third["lives"], third["ratio"], third["longer"]) == (0, None, None)
    assert third["why_not"] == "It has run on test stands only; see below."
    old, new = document["rigs"]
    assert (old["part"], old["rig_lives"], new["part"], new["rig_lives"]) == ("N1", 4, "N4", 4)
    assert old["factor"]["lower"] < old["factor"]["estimate"] < old["factor"]["upper"]
    assert (new["factor"], new["why_not"]) == (None, "It has not run in the field yet.")
    # 40, 60, 80, 100 days against 30, 40, 50, 60 on the same stand
    assert new["over_old"]["lower"] < 70 / 45 < new["over_old"]["upper"]
    assert document["all_history"]["curves"]["groups"][0]["lives"] < 300
    rows = {line[0]: line[3:] for line in lines(document)}
    assert rows["chance longer of N3"][0] == second["longer"]
    assert rows["on stands, new over old, N4"] == [new["over_old"][end] for end in ("estimate", "lower", "upper")]
    table = page_of(document)["rigs"]
    assert [column["label"] for column in table["columns"]][-1] == "On stands, new over old"


def test_lives_on_a_rig_are_in_no_figure_of_the_field() -> None:
    fleet = KitFleet(2.0, sites=5, modules=8)
    asked = question_for("N2", as_of=day(TODAY))
    before = redesign_document(asked)
    for module in Module.objects.filter(code__startswith="R-"):
        fleet.put(module, fleet.n2, 250, 251, "failed")
    rebuild_clocks()
    after = redesign_document(asked)
    for name in ("verdict", "chances", "same_dates", "few"):
        assert after[name] == before[name], name
    assert {row["part"]: row["rig_lives"] for row in after["rigs"]} == {"N1": 4, "N2": 8}


def test_an_older_part_against_its_successor_is_warned_of() -> None:
    fleet = RolloutFleet(2.0)
    back = redesign_document(question_for("N1", ["N2"], as_of=day(TODAY)))
    assert back["newer"] == ["N2"]
    assert "an older part is held against its successor" in words.warnings(back)[0]
    forward = redesign_document(question_for("N2", as_of=day(TODAY)))
    assert not any("successor" in each for each in words.warnings(forward))
    save_redesign(by=None, code="BACK", changes=[PartReplaced(fleet.n1, [fleet.n2])])
    client = Client()
    client.force_login(make_manager())
    assert (
        "held against its successor"
        in client.get(reverse("redesign", args=["BACK"]), {"as_of": AS_OF}).content.decode()
    )
    out = StringIO()
    call_command("redesign", "N1", "--before", "N2", "--as-of", AS_OF, stdout=out)
    assert "held against its successor" in out.getvalue()


def test_a_chance_says_what_it_rests_on() -> None:
    RolloutFleet(2.0, sites=6, modules=10)
    document = redesign_document(question_for("N2", as_of=day(TODAY)))
    ratio = document["same_dates"]["ratio"]["positions differ"]["median"]
    told = plain(words.chance_sentence(document))
    assert told.startswith(f"Allowing for what each position did before ({ratio['estimate']:.2f} times, ")
    document["same_dates"]["ratio"] = None
    document["same_dates"]["curves"]["groups"][1]["failures"] = 0
    assert words.chance_sentence(document).startswith(
        "None of the N2 has failed over the same dates, so this rests on how long they have run without it"
    )


def test_parts_of_which_none_has_failed_have_a_page_a_file_and_a_print() -> None:
    """Old and new side by side for 200 days without a failure: a bound, the hope as an assumption, no chance."""
    fleet = RolloutFleet(2.0, sites=3, modules=6)
    Fitting.objects.filter(reason="failed").update(reason="planned", mode=None)
    rebuild_clocks()
    fleet.redesign()
    client = Client()
    client.force_login(make_manager())
    for name in ("redesign", "redesign_print", "redesign_money"):
        reply = client.get(reverse(name, args=["LIP"]), {"as_of": AS_OF})
        assert reply.status_code == 200, name
        text = plain(reply.content.decode())
        assert "_" not in " ".join(each.split("<")[0] for each in text.split("<p>")[1:]), "no word of a program"
        if name != "redesign_money":
            assert "no chance is told" in text
            assert "No failures in" in text
    assert "Counted with the hope, N2 over N1 1.50 times: an assumption, no evidence." in text
    assert client.get(reverse("redesign", args=["LIP"]), {"as_of": AS_OF, "as": "csv"}).status_code == 200


def test_a_part_that_nobody_has_fitted_is_said_so() -> None:
    fleet = KitFleet(2.0, sites=2, modules=4)
    Part.objects.create(code="N5", component=fleet.component, supersedes=fleet.n1)
    document = redesign_document(question_for("N5", as_of=day(TODAY)))
    assert words.lead(document) == "Not yet shown: of the N5 drive nuts none has run in the field yet."
    page = page_of(document)
    assert (page["curves"], page["path"], page["tests"]) == (None, None, None)
    assert page["history"] is not None


def test_notes_speak_no_program() -> None:
    notes = [
        "None of 8 old parts has failed, so there is no ratio. Ask for the bound under an assumed shape "
        "(known_shape_bounds), and for the posterior probability.",
        "The search for the life ratio did not settle. Use common_shape=True, or wait for more failures.",
        "The search for the life ratio did not settle. Use common_shape=True, or wait for more failures.",
        "Nothing can be compared at site A. Wait.",
    ]
    assert words.plain_notes(notes) == [
        "None of 8 old parts has failed, so there is no ratio.",
        "The search for the life ratio did not settle.",
        "Nothing can be compared at site A. Wait.",
    ]


def test_the_demonstration_test_by_hand() -> None:
    """n = ln(1 - C) / (m^shape ln R) for none failed; 29, 46, 61, 76 parts for 0 to 3 failures at 95 % and R 0.9.

    Values from memory, common practice of success-run tests.
    """
    sizes = [success_run_size(0.9, 0.95, failures=count, life_ratio=1.0, shape=2.0) for count in range(4)]
    assert sizes == [29, 46, 61, 76]
    for length in (0.5, 1.5, 2.0):
        by_hand = math.ceil(math.log(0.05) / (length**1.48 * math.log(0.9)))
        assert success_run_size(0.9, 0.95, failures=0, life_ratio=length, shape=1.48) == by_hand
