"""Whether what the lists of stock show is what the moves add up to."""

from __future__ import annotations

import json
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.actions.rebuild_balances import rebuild_balances, wrong_balances
from fleet.history import writing
from fleet.models import Part, Store


class Command(BaseCommand):
    help = (
        "Holds the derived balances of stock against the ledger, which alone is true. "
        "Exit status 1 if they differ; with --repair they are made again."
    )

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--repair", action="store_true", help="make wrong balances again from the moves")
        parser.add_argument("--json", action="store_true", help="print one JSON document")

    def handle(self, *args: Any, **options: Any) -> None:
        with writing(source="command", reason="stock checked"):
            wrong = rebuild_balances() if options["repair"] else wrong_balances()
        stores, parts = Store.objects.in_bulk(), Part.objects.in_bulk()
        rows = [
            {
                "store": stores[store].code,
                "part": parts[part].code,
                "condition": condition,
                "shown": shown,
                "moves": true,
            }
            for (store, part, condition), (shown, true) in sorted(wrong.items())
        ]
        if options["json"]:
            self.stdout.write(json.dumps({"differing": rows, "repaired": options["repair"]}))
        else:
            self.stdout.write(words(rows, repaired=options["repair"]))
        if rows and not options["repair"]:
            raise CommandError(f"{len(rows)} balances differ from the moves. Make them again with --repair.")


def words(rows: list[dict[str, Any]], *, repaired: bool) -> str:
    if not rows:
        return "Every balance is what the moves add up to."
    lines = [
        f"{row['store']}  {row['part']} ({row['condition']}): {row['shown']} shown, {row['moves']} by the moves"
        for row in rows
    ]
    return "\n".join([*lines, *(["All of these were made again."] if repaired else [])])
