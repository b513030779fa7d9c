"""What every action stands on: one transaction, its writer, its key, and words where the database refuses."""

from __future__ import annotations

import uuid

import pytest
from django.db import IntegrityError, OperationalError

from fleet.actions.base import change, fingerprint, once
from fleet.actions.entries import CounterEntry, PartChange
from fleet.actions.errors import BadValue, Collided, NotAllowed
from fleet.history import writing
from fleet.models import DataVersion, EntryKey, Module, Person, Site
from fleet.rights import LOG, PEOPLE
from tests.factories import Carriage, make_bench, make_depot, make_module, make_site, make_type

pytestmark = pytest.mark.django_db


def test_a_change_locks_reads_and_raises_the_version(weir: Carriage, rosa: Person) -> None:
    Module.objects.filter(pk=weir.module.pk).update(code="M-NOW")
    before = DataVersion.current()
    with change(by=rosa, right=LOG, module=weir.module) as module:
        assert module.code == "M-NOW"
    assert DataVersion.current() == before + 1


def test_a_failed_change_raises_nothing(weir: Carriage, rosa: Person) -> None:
    before = DataVersion.current()
    with pytest.raises(BadValue), change(by=rosa, right=LOG, module=weir.module):
        fail_after(make_site(code="LOST"))
    assert DataVersion.current() == before
    assert not Site.objects.filter(code="LOST").exists()


def fail_after(site: Site) -> None:
    raise BadValue(f"{site.code} is none. Choose another.")


def test_history_says_who_from_where_and_why(weir: Carriage, rosa: Person) -> None:
    with writing(source="api"), change(by=rosa, right=LOG, module=weir.module, reason="read again"):
        site = make_site()
    row = site.history.get()
    assert (row.history_user, row.source, row.history_change_reason) == (rosa, "api", "read again")


def test_a_role_without_the_right_is_refused_and_a_command_is_not(weir: Carriage, rosa: Person) -> None:
    with pytest.raises(NotAllowed, match="A crew may not do this"), change(by=rosa, right=PEOPLE):
        pass
    with change(by=None, right=PEOPLE, module=weir.module) as module:
        assert module == weir.module


def test_the_bench_reaches_modules_at_depots_only(weir: Carriage) -> None:
    depot = make_depot()
    here = make_module(type=make_type(), site=depot)
    for bench in (make_bench(depot, weir.site), make_bench(all_sites=True)):
        with change(by=bench, right=LOG, module=here):
            pass
        with pytest.raises(NotAllowed), change(by=bench, right=LOG, module=weir.module):
            pass


@pytest.mark.parametrize(
    ("error", "words"),
    [
        (IntegrityError("fitting_no_overlap"), "at the same moment"),
        (OperationalError("database is locked"), "was busy for too long"),
        (OperationalError("deadlock detected"), "was busy for too long"),
    ],
)
def test_what_the_database_refuses_is_told_in_words(rosa: Person, error: Exception, words: str) -> None:
    with pytest.raises(Collided, match=words), change(by=rosa, right=LOG):
        raise error


def test_a_broken_database_is_not_called_busy(rosa: Person) -> None:
    with pytest.raises(OperationalError), change(by=rosa, right=LOG):
        raise OperationalError("disk I/O error")


def test_a_key_is_one_persons_for_one_verb(weir: Carriage, rosa: Person, tom: Person) -> None:
    key = uuid.uuid4()
    with once(key, by=rosa, verb="sing") as answer:
        answer["song"] = 7
    with once(key, by=rosa, verb="sing") as answer:
        assert answer["song"] == 7
    for person, verb in ((tom, "sing"), (rosa, "dance"), (None, "sing")):
        with pytest.raises(BadValue, match="used for another entry"), once(key, by=person, verb=verb):
            pass
    with once(None, by=rosa, verb="sing") as answer:
        assert answer == {}
    assert EntryKey.objects.count() == 1


def test_equal_submissions_have_one_fingerprint_and_others_another(weir: Carriage) -> None:
    def said(**fields: object) -> str:
        entry = {"position": weir.nut, "part": weir.n1, "reason": "failed", **fields}
        return fingerprint((weir.module, [PartChange(**entry)], CounterEntry(strokes=5), {weir.nut: 0.5}))  # type: ignore[arg-type]

    again = Module.objects.get(pk=weir.module.pk)
    assert fingerprint(again) == fingerprint(weir.module)
    assert said() == said()
    others = [said(part=weir.n2), said(part=None), said(reason="planned"), said(age_at_fit=1.0), said(lot="L")]
    assert len({said(), *others}) == 6
