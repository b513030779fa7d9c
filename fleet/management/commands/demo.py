"""Loads the demo fleet into an empty book."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser
from django.utils import timezone

from fleet.demo.load import NotEmpty, NotLoaded, load_demo
from fleet.demo.people import demo_people_table


class Command(BaseCommand):
    help = "Loads an invented fleet of brush carriages, three years long, into an empty book."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--modules", type=int, default=320, help="how many modules (default 320)")
        parser.add_argument("--years", type=float, default=3, help="how long its story is (default 3)")
        parser.add_argument("--seed", type=int, default=7, help="another seed tells another story (default 7)")
        parser.add_argument("--until", type=dt.date.fromisoformat, help="its last day (default: yesterday)")

    def handle(self, *args: Any, modules: int, years: float, seed: int, **options: Any) -> None:
        if modules < 20 or not 0.5 <= years <= 20:
            raise CommandError("The story needs at least 20 modules and between half a year and 20 years.")
        until = options["until"] or timezone.localdate() - dt.timedelta(days=1)
        try:
            report = load_demo(modules=modules, years=years, seed=seed, until=until)
        except (NotEmpty, NotLoaded) as refusal:
            raise CommandError(str(refusal)) from refusal
        for file in report["files"]:
            self.stdout.write(f"{file['file']:<18}{file['added']:>8}")
        self.stdout.write(demo_people_table())
