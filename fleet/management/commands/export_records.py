"""Takes records out as files."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.formats import number
from fleet.models import Site
from fleet.models.codes import clean_code
from fleet.transfer.export_records import write_export
from fleet.transfer.problems import Unreadable
from fleet.transfer.scope import scope_of


class Command(BaseCommand):
    help = "Takes the records out as a folder of CSV files, or as one .zip or .xlsx by the ending of PATH."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("path", metavar="PATH", help="a folder, or a new file that ends with .zip or .xlsx")
        parser.add_argument("--site", metavar="CODE", help="only what happened at this site")
        parser.add_argument("--json", action="store_true", help="print one JSON document")

    def handle(self, *args: Any, path: str, site: str | None, **options: Any) -> None:
        place = None
        if site is not None:
            place = Site.objects.filter(code=clean_code(site)).first()
            if place is None:
                raise CommandError(f"No site has the code {site}. Look it up under Sites.")
        try:
            counts = write_export(Path(path), scope_of(None, place))
        except FileExistsError:
            raise CommandError(f"{path} exists already. Give a new name, or move it away.") from None
        except Unreadable as fault:
            raise CommandError(f"{fault.file} {fault.message}") from None
        except OSError as fault:
            raise CommandError(f"{path} cannot be written: {fault.strerror}.") from None
        if options["json"]:
            self.stdout.write(json.dumps({"files": [{"file": f"{name}.csv", "rows": n} for name, n in counts.items()]}))
            return
        width = max(len(name) for name in counts)
        for name, count in counts.items():
            self.stdout.write(f"{name.ljust(width)}  {number(count).rjust(9)}")
