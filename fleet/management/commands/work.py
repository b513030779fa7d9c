"""The background worker."""

from __future__ import annotations

from typing import Any

from django.core.management.base import BaseCommand, CommandParser

from fleet.work.worker import run_worker


class Command(BaseCommand):
    help = "Does the work of the background until it is told to stop. Several may run, on several machines."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--batch", action="store_true", help="end when nothing waits")
        parser.add_argument("--interval", type=float, default=0.5, help="seconds between two looks at the queue")

    def handle(self, *args: Any, batch: bool, interval: float, **options: Any) -> None:
        run_worker(interval=max(0.05, interval), batch=batch)
