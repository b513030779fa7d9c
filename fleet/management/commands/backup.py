"""A copy of the whole book."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.formats import number
from fleet.transfer.whole_book import CannotCopy, back_up


class Command(BaseCommand):
    help = "Writes a whole copy of the book to PATH while people work. `restore` puts it into an empty book."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("path", metavar="PATH", help="a new file")
        parser.add_argument("--json", action="store_true", help="print one JSON document")

    def handle(self, *args: Any, path: str, **options: Any) -> None:
        target = Path(path).resolve()
        try:
            back_up(target)
        except CannotCopy as reason:
            raise CommandError(str(reason)) from None
        except OSError as fault:
            raise CommandError(f"{path} cannot be written: {fault.strerror}.") from None
        size = target.stat().st_size
        if options["json"]:
            self.stdout.write(json.dumps({"path": str(target), "bytes": size}))
        else:
            self.stdout.write(f"The book is copied to {target} ({number(size / 1e6, 1)} MB).")
