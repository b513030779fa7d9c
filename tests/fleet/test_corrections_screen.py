"""Correcting, striking out and doubting a record from its module's page."""

from __future__ import annotations

import pytest
from django.test import Client
from django.utils import timezone

from fleet.actions.entries import PartChange
from fleet.actions.record_visit import record_visit
from fleet.formats import long_day
from fleet.models import Fitting, LooksWrong, Visit
from tests.factories import Carriage, make_crew

pytestmark = pytest.mark.django_db


@pytest.fixture
def weir() -> Carriage:
    return Carriage()


def signed_in(person: object) -> Client:
    client = Client()
    client.force_login(person)
    return client


def logged(weir: Carriage) -> tuple[Visit, Fitting]:
    """The crew changes a nut that the manager had fitted."""
    nut = weir.fit()
    change = PartChange(position=weir.nut, reason="failed", mode=weir.worn, part=weir.n2)
    visit = record_visit(by=weir.crew, module=weir.module, happened_at=timezone.now(), changes=[change])
    nut.refresh_from_db()
    return visit, nut


def test_a_manager_corrects_a_note_and_the_history_keeps_why(weir: Carriage) -> None:
    visit, _ = logged(weir)
    client = signed_in(weir.manager)
    form = client.get(f"/correct/visit/{visit.pk}/").context["form"]
    entry = {name: form[name].value() or "" for name in form.fields} | {"note": "rain", "reason": "left out"}
    entry["happened_at"] = visit.happened_at.astimezone(weir.site.tz).strftime("%Y-%m-%dT%H:%M")
    answer = client.post(f"/correct/visit/{visit.pk}/", entry)
    assert answer.status_code == 302, answer.context["form"].errors
    visit.refresh_from_db()
    assert visit.note == "rain"
    assert "left out" in client.get("/history/?kind=visit").content.decode()


def test_a_crew_corrects_its_own_removal_of_somebody_elses_fitting(weir: Carriage) -> None:
    _, nut = logged(weir)
    assert signed_in(weir.crew).get(f"/correct/fitting/{nut.pk}/").status_code == 200
    assert signed_in(make_crew(weir.site)).get(f"/correct/fitting/{nut.pk}/").status_code == 403


def test_a_refused_reason_is_told_at_the_removal(weir: Carriage) -> None:
    _, nut = logged(weir)
    client = signed_in(weir.manager)
    form = client.get(f"/correct/fitting/{nut.pk}/").context["form"]
    entry = {name: form[name].value() or "" for name in form.fields} | {"reason": "typing", "removal": ""}
    answer = client.post(f"/correct/fitting/{nut.pk}/", {**entry, "age_at_fit": 0})
    assert answer.status_code == 422
    assert answer.context["form"].errors


def test_a_record_is_struck_out_with_a_reason_only(weir: Carriage) -> None:
    visit, _ = logged(weir)
    client = signed_in(weir.manager)
    shown = {"version": visit.version}
    assert client.post(f"/strike-out/visit/{visit.pk}/", {**shown, "reason": ""}).status_code == 422
    refused = client.post(f"/strike-out/visit/{visit.pk}/", {**shown, "reason": "wrong module"})
    assert refused.status_code == 422
    gone = client.post(f"/strike-out/visit/{visit.pk}/", {**shown, "reason": "wrong module", "with_all": "on"})
    assert gone.status_code == 302
    visit.refresh_from_db()
    assert visit.struck_out == "wrong module"


def test_a_contact_doubts_and_a_manager_settles(weir: Carriage) -> None:
    visit, _ = logged(weir)
    contact = signed_in(weir.contact)
    assert contact.post(f"/looks-wrong/visit/{visit.pk}/", {"word": ""}).status_code == 422
    assert contact.post(f"/looks-wrong/visit/{visit.pk}/", {"word": "nobody was here"}).status_code == 302
    mark = LooksWrong.objects.get()
    manager = signed_in(weir.manager)
    assert "nobody was here" in manager.get("/").content.decode()
    assert manager.get(f"/looks-wrong/{mark.pk}/").status_code == 200
    done = manager.post(f"/looks-wrong/{mark.pk}/", {"outcome": "confirmed", "answer": "Rosa was"})
    assert done.status_code == 302
    assert "nobody was here" not in manager.get("/").content.decode()


def test_a_record_is_named_in_words_not_by_its_code(weir: Carriage) -> None:
    visit, nut = logged(weir)
    client, day = signed_in(weir.manager), long_day(weir.site.day_of(visit.happened_at))
    lead = client.get(f"/correct/visit/{visit.pk}/").context["lead"]
    assert f"the visit of {day}" in lead
    assert visit.code not in lead
    lead = client.get(f"/strike-out/fitting/{nut.pk}/").context["lead"]
    assert f"{nut.part.code} at " in lead
    assert f"out {day}, failed" in lead
