"""Work in the background belongs to whoever began it: its page, its file, its end.

Cast: Ines and Otto, planners; Nils, who manages the weir alone; Mona, who manages all of it.
"""

from __future__ import annotations

from importlib import import_module

import pytest
from django.test import Client

from fleet.models import KeptFile, Person, Work, WorkState
from fleet.rights import seen_by
from tests.factories import make_manager, make_planner, make_site

pytestmark = pytest.mark.django_db


def exported(person: Person) -> Work:
    work = Work.objects.create(kind="export_records", person=person, state=WorkState.DONE, title="Records of all sites")
    KeptFile.objects.create(work=work, role="result", name="all.zip", content=b"every site")
    return work


@pytest.mark.parametrize("who", ["Otto", "Nils", "Mona"])
def test_a_file_of_all_sites_is_opened_by_those_who_see_all_sites(who: str) -> None:
    ines, weir = make_planner(name="Ines"), make_site()
    others = {
        "Otto": make_planner(name="Otto"),
        "Nils": make_manager(name="Nils", sites=[weir]),
        "Mona": make_manager(name="Mona"),
    }
    work, running = exported(ines), Work.objects.create(kind="export_records", person=ines, state=WorkState.RUNNING)
    client, sees = Client(), who == "Mona"
    client.force_login(others[who])
    assert (client.get(f"/work/{work.pk}/file/").status_code == 200) is sees
    assert (client.get(f"/work/{work.pk}/").status_code == 200) is sees
    assert (client.get(f"/work/{work.pk}/?as=json").status_code == 200) is sees
    assert ("Records of all sites" in client.get("/records/").content.decode()) is sees
    client.post(f"/work/{running.pk}/cancel/")
    running.refresh_from_db()
    assert running.cancel_asked is sees
    assert seen_by(others[who], KeptFile).exists() is sees


def test_work_that_goes_back_in_line_while_it_is_stopped_stays_stopped() -> None:
    """Between two looks at its state a worker may put it back for the next one."""
    enqueue = import_module("fleet.work.enqueue")
    work = Work.objects.create(kind="export_records", person=make_planner(), state=WorkState.RUNNING)
    change_state = enqueue.change_state

    def put_back_meanwhile(rows: object, **columns: object) -> int:
        changed = change_state(rows, **columns)
        Work.objects.filter(pk=work.pk).update(state=WorkState.WAITING)
        return changed

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(enqueue, "change_state", put_back_meanwhile)
        enqueue.ask_to_cancel(work)
    work.refresh_from_db()
    assert work.cancel_asked
