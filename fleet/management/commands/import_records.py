"""Brings records in from files."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.history import writing
from fleet.models import Work, WorkState
from fleet.transfer.command_words import error_lines, report_table
from fleet.transfer.import_records import Import
from fleet.transfer.sources import open_source
from fleet.work import run_here
from fleet.work.fence import change_state
from fleet.work.progress import SilentProgress


class Command(BaseCommand):
    help = "Brings records in from a folder or .zip of CSV files, or from one .xlsx workbook: all of it or nothing."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("path", metavar="PATH", help="folder, .zip, .xlsx or a single .csv")
        parser.add_argument("--preview", action="store_true", help="say what would be added, store nothing")
        parser.add_argument("--update", action="store_true", help="overwrite records that the files say differently")
        parser.add_argument("--json", action="store_true", help="print one JSON document")

    def handle(self, *args: Any, path: str, preview: bool, update: bool, **options: Any) -> None:
        place = Path(path).resolve()
        result, message = self.look(place, update) if preview else self.bring_in(place, update)
        if options["json"]:
            self.stdout.write(json.dumps(result, ensure_ascii=False))
        if result.get("error_count"):
            raise CommandError("\n".join(error_lines(result)))
        if message:
            raise CommandError(message)
        if not options["json"]:
            self.stdout.write(report_table(result, preview=preview))
            self.stdout.write("Nothing was stored: this was a preview." if preview else "Stored.")

    def look(self, path: Path, update: bool) -> tuple[dict[str, Any], str]:
        importer = Import(lambda: open_source(path), person=None, update=update, progress=SilentProgress())
        return importer.preview().as_dict(), ""

    def bring_in(self, path: Path, update: bool) -> tuple[dict[str, Any], str]:
        work = Work.objects.create(
            kind="import_records",
            title=f"Import of {path.name}"[:200],
            arguments={"path": str(path), "update": update, "source": "command"},
        )
        try:
            with writing(source="command"):
                run_here(work)
        except KeyboardInterrupt:
            ended = {"state": WorkState.CANCELLED, "message": "Stopped at the keyboard."}
            change_state(Work.objects.filter(pk=work.pk, state=WorkState.RUNNING), **ended)
            raise CommandError("Stopped. Look with --preview whether the records are in.") from None
        return work.result, "" if work.state == WorkState.DONE else work.message
