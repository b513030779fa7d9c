"""A copy of the whole book put back."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.formats import counted
from fleet.models import Fitting, Module
from fleet.transfer.whole_book import CannotCopy, make_current, put_back


class Command(BaseCommand):
    help = "Puts a copy made by `backup` into an empty book. A book that holds records is left as it is."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("path", metavar="PATH", help="a file made by backup")
        parser.add_argument("--json", action="store_true", help="print one JSON document")

    def handle(self, *args: Any, path: str, **options: Any) -> None:
        try:
            put_back(Path(path).resolve())
            make_current()
        except CannotCopy as reason:
            raise CommandError(str(reason)) from None
        except OSError as fault:
            raise CommandError(f"{path} cannot be read: {fault.strerror}.") from None
        counts = {"modules": Module.objects.count(), "fittings": Fitting.objects.count()}
        if options["json"]:
            self.stdout.write(json.dumps(counts))
            return
        words = f"{counted(counts['modules'], 'module')} and {counted(counts['fittings'], 'fitting')}"
        self.stdout.write(f"The copy is back: {words}. Restart the web server and the worker.")
