"""Anybody who sees a record may doubt it; the office settles the doubt."""

from __future__ import annotations

import pytest

from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed
from fleet.actions.record_visit import record_visit
from fleet.actions.say_looks_wrong import say_looks_wrong
from fleet.actions.settle_looks_wrong import settle_looks_wrong
from fleet.models import LooksWrong, Person, Placement
from tests.factories import Carriage, at

pytestmark = pytest.mark.django_db


def test_the_contact_doubts_a_visit_and_the_planner_confirms_it(weir: Carriage, ines: Person) -> None:
    visit = record_visit(by=weir.crew, module=weir.module, happened_at=at("2024-03-09"))
    doubt = say_looks_wrong(by=weir.contact, record=visit, word="nobody was here")
    assert (doubt.kind, doubt.record, doubt.module, doubt.site) == ("visit", visit.pk, weir.module, weir.site)
    assert LooksWrong.objects.waiting().get() == doubt
    settled = settle_looks_wrong(by=ines, doubt=doubt, outcome="confirmed", answer="they came by boat")
    assert (settled.settled_by, settled.answer, settled.version) == (ines, "they came by boat", 2)
    assert not LooksWrong.objects.waiting().exists()
    with pytest.raises(AlreadyDone, match="was settled on"):
        settle_looks_wrong(by=ines, doubt=doubt, outcome="corrected")


def test_every_kind_of_record_can_look_wrong(weir: Carriage) -> None:
    for record in (weir.fit(), weir.module, Placement.objects.get()):
        doubt = say_looks_wrong(by=weir.crew, record=record, word="odd")
        assert (doubt.record, doubt.site) == (record.pk, weir.site)
    with pytest.raises(BadValue, match="can look wrong"):
        say_looks_wrong(by=weir.crew, record=weir.n1, word="odd")


def test_the_same_doubt_waits_once(weir: Carriage) -> None:
    fitting = weir.fit()
    first = say_looks_wrong(by=weir.crew, record=fitting, word="odd")
    assert say_looks_wrong(by=weir.crew, record=fitting, word="odd ") == first
    assert LooksWrong.objects.count() == 1


@pytest.mark.parametrize("word", ["", "   ", "x" * 501, "\x00"])
def test_a_doubt_needs_a_word(weir: Carriage, word: str) -> None:
    with pytest.raises(BadValue) as refusal:
        say_looks_wrong(by=weir.crew, record=weir.fit(), word=word)
    assert refusal.value.field == "word"


def test_who_does_not_see_it_does_not_doubt_it_and_a_crew_does_not_settle(
    weir: Carriage, rosa: Person, tom: Person
) -> None:
    fitting = weir.fit()
    with pytest.raises(NotAllowed, match="none of yours"):
        say_looks_wrong(by=tom, record=fitting, word="odd")
    doubt = say_looks_wrong(by=rosa, record=fitting, word="odd")
    with pytest.raises(NotAllowed):
        settle_looks_wrong(by=rosa, doubt=doubt, outcome="confirmed")


def test_an_outcome_is_one_of_two(weir: Carriage, ines: Person) -> None:
    doubt = say_looks_wrong(by=weir.crew, record=weir.fit(), word="odd")
    with pytest.raises(BadValue) as refusal:
        settle_looks_wrong(by=ines, doubt=doubt, outcome="ignored")
    assert refusal.value.field == "outcome"
