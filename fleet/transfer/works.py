"""Imports, previews and exports as work in the background."""

from __future__ import annotations

import tempfile
import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any

from django.db import transaction
from django.utils import timezone

from fleet.formats import counted
from fleet.history import writing
from fleet.models import KeptFile, Site, Work
from fleet.rights import CATALOGUE, may
from fleet.transfer.export_records import write_export
from fleet.transfer.import_records import Import, Outcome, make_clocks_again, sweep_before
from fleet.transfer.outcome_words import outcome_sentence
from fleet.transfer.problems import Unreadable
from fleet.transfer.scope import scope_of
from fleet.transfer.sources import Table, open_bytes, open_source
from fleet.work import Progress, WorkFailed, work_kind
from fleet.work.fence import write_fenced

GONE = "The command was ended before anything was stored. Run it again."
CONTENT_TYPES = {
    "zip": "application/zip",
    "xlsx": "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
}
NO_FILE = "The file is no longer kept. Choose it again."


@work_kind("preview_records")
def preview_records(work: Work, progress: Progress) -> dict[str, Any]:
    """Arguments: file (of this work), update."""
    started = time.monotonic()
    outcome = importer(work, progress).preview()
    return told(work, finished(outcome, started))


@work_kind("import_records")
def import_records(work: Work, progress: Progress) -> dict[str, Any]:
    """Arguments: file (a kept one) or path (of a command), update, and the plan that a preview promised."""
    started = time.monotonic()
    if not work.result.get("stored"):
        if work.attempt > 1 and "path" in work.arguments:
            sweep_before(work)
            raise WorkFailed(GONE)
        with writing(source=work.arguments.get("source", "file"), reason=work.title):
            outcome = importer(work, progress).store(work, work.arguments.get("plan"))
        if not outcome.stored:
            raise WorkFailed(refused(outcome), finished(outcome, started))
        work.refresh_from_db(fields=["result"])
    make_clocks_again(work.result["touched"], progress)
    result = {key: value for key, value in work.result.items() if key != "touched"}
    return told(work, result | {"seconds": round(time.monotonic() - started, 1)})


def importer(work: Work, progress: Progress) -> Import:
    person = work.person
    if person is not None and not (may(person, CATALOGUE) and person.all_sites):
        raise WorkFailed(f"{person.name} may not bring records in. Ask a manager or planner who sees all sites.")
    update = bool(work.arguments.get("update"))
    return Import(tables_of(work), person=person, update=update, progress=progress)


def tables_of(work: Work) -> Callable[[], Sequence[Table]]:
    if "path" in work.arguments:
        path = Path(work.arguments["path"])
        return lambda: open_source(path)

    def kept() -> Sequence[Table]:
        file = KeptFile.objects.filter(pk=work.arguments["file"]).first() if "file" in work.arguments else None
        file = file or work.files.filter(role="input").first()
        if file is None:
            raise Unreadable(NO_FILE)
        return open_bytes(file.name, bytes(file.content))

    return kept


def finished(outcome: Outcome, started: float) -> dict[str, Any]:
    return outcome.as_dict() | {"seconds": round(time.monotonic() - started, 1)}


def told(work: Work, result: dict[str, Any]) -> dict[str, Any]:
    return result | {"message": outcome_sentence(work.kind, result)}


def refused(outcome: Outcome) -> str:
    return f"{counted(outcome.problems.count, 'error')}. Nothing was stored."


@work_kind("export_records")
def export_records(work: Work, progress: Progress) -> dict[str, Any]:
    """Arguments: form (zip or xlsx), site. The file is kept beside the work; a second attempt makes it again."""
    form = work.arguments.get("form", "zip")
    code = work.arguments.get("site")
    site = Site.objects.filter(code=code).first() if code else None
    if code and site is None:
        raise WorkFailed(f"Site {code} is not in the book any more. Choose another.")
    progress.step(message="Reading the book")
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / f"records.{form}"
        try:
            counts = write_export(path, scope_of(work.person, site))
        except Unreadable as fault:
            raise WorkFailed(f"{fault.file} {fault.message}") from None
        content = path.read_bytes()
    progress.step(1, 1, "Keeping the file")
    name = f"halfnut-{code.lower() + '-' if code else ''}{timezone.localdate().isoformat()}.{form}"
    with transaction.atomic():
        write_fenced(work.pk, work.attempt)
        KeptFile.objects.filter(work=work, role="result").delete()
        KeptFile.objects.create(work=work, role="result", name=name, content_type=CONTENT_TYPES[form], content=content)
    files = [{"file": f"{table}.csv", "rows": rows} for table, rows in counts.items()]
    return told(work, {"files": files, "name": name, "bytes": len(content)})
