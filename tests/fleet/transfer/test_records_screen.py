"""Records in and out on the screen. Cast: Mona manages everything, Piet plans one site, Cleo is crew."""

from __future__ import annotations

from typing import Any

import pytest
from django.core.files.uploadedfile import SimpleUploadedFile
from django.test import Client
from django.urls import reverse

from fleet.models import Book, Fitting, KeptFile, Site, Work
from fleet.transfer.sources import open_bytes
from fleet.work import run_here
from tests import factories as make
from tests.fleet.transfer.files import fleet, text, with_cell, zipped

pytestmark = pytest.mark.django_db


@pytest.fixture
def mona() -> Client:
    client = Client()
    client.force_login(make.make_manager(code="MONA"))
    return client


def upload(client: Client, *files: tuple[str, bytes], **fields: Any) -> Any:
    given = [SimpleUploadedFile(name, content) for name, content in files]
    return client.post(reverse("records"), {"records": given, **fields})


def page(client: Client, work: Work) -> str:
    reply = client.get(reverse("work", args=[work.pk]))
    assert reply.status_code == 200
    return reply.content.decode()


def previewed(client: Client, files: dict[str, str | bytes], **fields: Any) -> Work:
    reply = upload(client, ("fleet.zip", zipped(files)), **fields)
    work = Work.objects.get(kind="preview_records")
    assert reply["Location"] == reverse("work", args=[work.pk])
    return work


def test_from_the_file_to_the_book(mona: Client) -> None:
    work = previewed(mona, fleet())
    waiting = page(mona, work)
    assert "Waiting" in waiting
    assert 'hx-trigger="every 1s"' in waiting
    assert "Look again" in waiting

    run_here(work)
    shown = page(mona, work)
    assert "every 1s" not in shown
    assert "would be added" in shown
    assert "2 visits would be made" in shown.replace("\N{NO-BREAK SPACE}", " ")
    assert not Site.objects.exists()

    reply = mona.post(reverse("confirm_import", args=[work.pk]))
    imported = Work.objects.get(kind="import_records")
    assert reply["Location"] == reverse("work", args=[imported.pk])
    run_here(imported)

    assert imported.state == "done", imported.result
    assert "were added" in page(mona, imported)
    assert Fitting.objects.count() == 4
    fitting = Fitting.objects.first()
    assert fitting is not None
    assert (fitting.entered_by.code, fitting.history.first().source) == ("MONA", "file")
    again = mona.post(reverse("confirm_import", args=[work.pk]))
    assert again["Location"] == reverse("work", args=[imported.pk])  # a double tap brings it in once
    assert "Import of fleet.zip" in mona.get(reverse("records")).content.decode()


def test_only_what_was_previewed_is_brought_in(mona: Client) -> None:
    work = run_here(previewed(mona, fleet()))
    Site.objects.create(code="WEIR", name="Weir at the mill", zone="Europe/Lisbon")
    mona.post(reverse("confirm_import", args=[work.pk]))

    imported = run_here(Work.objects.get(kind="import_records"))

    assert imported.state == "failed"
    assert "changed since the preview" in page(mona, imported)
    assert not Fitting.objects.exists()


def test_errors_row_by_row_and_as_a_file(mona: Client) -> None:
    work = run_here(previewed(mona, fleet(sites=with_cell("sites", 2, "kind", "<river>"))))

    shown = page(mona, work)
    listed = b"".join(mona.get(reverse("work", args=[work.pk]) + "?as=csv").streaming_content).decode()

    assert "&lt;river&gt;" in shown
    assert "Write one of: field, rig, depot." in shown
    assert "Bring these records in" not in shown
    assert "sites.csv,2,kind,<river>," in listed
    mona.post(reverse("confirm_import", args=[work.pk]))
    assert not Work.objects.filter(kind="import_records").exists()


def test_nothing_new(mona: Client) -> None:
    Site.objects.create(code="WEIR")
    work = run_here(previewed(mona, {"sites": "site\nWEIR\n"}))

    shown = page(mona, work)
    assert "Everything in these files is in the book already." in shown
    assert "Bring these records in" not in shown


def test_several_files_are_packed_together(mona: Client) -> None:
    upload(mona, ("sites.csv", text("sites").encode()), ("components.csv", text("components").encode()))

    kept = KeptFile.objects.get()
    assert [table.name for table in open_bytes(kept.name, bytes(kept.content))] == ["sites", "components"]


@pytest.mark.parametrize(
    ("files", "words"),
    [
        ([], "No file was chosen"),
        ([("sites.csv", b"")], "The file is empty"),
        ([("photo.png", b"x")], "is no records file"),
        ([("a.zip", b"x"), ("b.csv", b"x")], "comes alone"),
    ],
)
def test_bad_uploads(mona: Client, files: list[tuple[str, bytes]], words: str) -> None:
    reply = upload(mona, *files)

    assert reply.status_code == 422
    assert words in reply.content.decode()
    assert not Work.objects.exists()


def test_too_large_an_upload(mona: Client, settings: Any) -> None:
    settings.IMPORT_MAX_BYTES = 10
    reply = upload(mona, ("sites.csv", b"site\nA-LONG-CODE\n"))

    assert reply.status_code == 422
    assert "are larger than" in reply.content.decode()


def test_a_damaged_file_is_told_by_the_preview(mona: Client) -> None:
    upload(mona, ("fleet.xlsx", b"PK nothing"))
    work = run_here(Work.objects.get())

    assert "is damaged" in page(mona, work)


def test_taken_out_as_a_file(mona: Client) -> None:
    Site.objects.create(code="WEIR")
    reply = mona.post(reverse("export_records"), {"form": "zip", "site": ""})
    work = run_here(Work.objects.get())

    assert reply["Location"] == reverse("work", args=[work.pk])
    assert reverse("work_file", args=[work.pk]) in page(mona, work)
    file = mona.get(reverse("work_file", args=[work.pk]))
    assert file["Content-Disposition"].startswith('attachment; filename="halfnut-')
    assert "sites" in [table.name for table in open_bytes("records.zip", file.content)]
    assert mona.post(reverse("export_records"), {"form": "pdf"}).status_code == 422
    assert mona.post(reverse("export_records"), {"form": "zip", "site": "MARS"}).status_code == 422


def test_a_planner_of_one_site_takes_out_that_site_and_brings_nothing_in() -> None:
    weir, ford = Site.objects.create(code="WEIR"), Site.objects.create(code="FORD")
    client = Client()
    client.force_login(make.make_planner(code="PIET", sites=[weir]))

    assert upload(client, ("sites.csv", b"site\nA\n")).status_code == 422
    assert client.post(reverse("export_records"), {"form": "zip", "site": ford.code}).status_code == 422
    client.post(reverse("export_records"), {"form": "zip"})
    work = run_here(Work.objects.get())
    tables = open_bytes("records.zip", client.get(reverse("work_file", args=[work.pk])).content)
    rows = next(list(table.rows()) for table in tables if table.name == "sites")
    assert [cells[0] for _, cells in rows] == ["site", "WEIR"]


def test_a_planner_brings_in_no_people() -> None:
    client = Client()
    client.force_login(make.make_planner(code="PIET"))
    work = run_here(previewed(client, fleet()))

    assert "which only a manager may do" in page(client, work)


def test_others_see_nothing_of_it(mona: Client) -> None:
    work = run_here(previewed(mona, fleet()))
    planner, crew = Client(), Client()
    planner.force_login(make.make_planner(code="PIET"))
    crew.force_login(make.make_crew(code="CLEO"))

    assert planner.get(reverse("work", args=[work.pk])).status_code == 404
    assert planner.post(reverse("confirm_import", args=[work.pk])).status_code == 404
    assert planner.post(reverse("cancel_work", args=[work.pk])).status_code == 404
    assert planner.get(reverse("work_file", args=[work.pk])).status_code == 404
    assert crew.get(reverse("records")).status_code == 403
    assert crew.post(reverse("export_records")).status_code == 403
    assert crew.get(reverse("work", args=[work.pk])).status_code == 404


def test_a_right_lost_meanwhile_stops_the_import(mona: Client) -> None:
    work = run_here(previewed(mona, fleet()))
    mona.post(reverse("confirm_import", args=[work.pk]))
    imported = Work.objects.get(kind="import_records")
    assert imported.person is not None
    imported.person.role = "crew"
    imported.person.save()

    run_here(imported)

    assert "may not bring records in" in imported.message
    assert not Fitting.objects.exists()


def test_stopped_by_its_button(mona: Client) -> None:
    work = previewed(mona, fleet())
    reply = mona.post(reverse("cancel_work", args=[work.pk]), follow=True)

    assert "Stopped before it began." in reply.content.decode()
    assert run_here(work).state == "cancelled"
    assert mona.get(reverse("cancel_work", args=[work.pk])).status_code == 405


def test_the_list_costs_the_same_however_long(mona: Client, django_assert_num_queries: Any) -> None:
    Book.load()  # whose clock the times are told by
    mona.get(reverse("records"))
    Work.objects.create(kind="import_records", person=make.make_manager())
    with django_assert_num_queries(5) as few:
        mona.get(reverse("records"))
    for _ in range(10):
        Work.objects.create(kind="import_records", person=make.make_manager())
    with django_assert_num_queries(len(few.captured_queries)):
        mona.get(reverse("records"))
