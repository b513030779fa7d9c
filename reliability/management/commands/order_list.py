"""What to order today, as a table for people or one JSON document."""

from __future__ import annotations

import json
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.models import Book


class Command(BaseCommand):
    help = "Says what to order today: on hand, due, expected use, what is enough, how many, and why."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument(
            "--service", type=float, metavar="CASES", help="enough in so many of 100 cases (the book's)"
        )
        parser.add_argument("--json", action="store_true", help="one JSON document")

    def handle(self, *args: Any, **options: Any) -> None:
        from reliability.forecasts.kept_order import order_document

        level = options["service"]
        if level is not None and not 50 <= level <= 99.9:
            raise CommandError(f"--service {level:g} is out of reach. Give 50 to 99.9.")
        document = order_document(Book.load().currency, service_level=None if level is None else level / 100)
        if options["json"]:
            lines = [{name: value for name, value in line.items() if name != "state"} for line in document["lines"]]
            told = {**document, "lines": lines}
            self.stdout.write(json.dumps(told, ensure_ascii=False, allow_nan=False, indent=1))
            return
        self.stdout.write("\n".join(lines_of(document)))


def lines_of(document: dict[str, Any]) -> list[str]:
    head = (
        f"{'part':<16}{'on hand':>9}{'due':>7}{'use':>9}{'80 of 100':>14}{'enough':>8}{'order':>7}  5 % chance out by"
    )
    rows = []
    for line in document["lines"]:
        low, high = line["use_bands"].get("0.8", ("", ""))
        use = f"{line['use_mean']:.1f}" if line["known"] else "?"
        enough = line["order_up_to"] if line["known"] else "?"
        band = f"{low}–{high}" if line["known"] else ""
        rows.append(
            f"{line['part']:<16}{line['on_hand']:>9}{line['due']:>7}{use:>9}{band:>14}{enough:>8}{line['quantity']:>7}"
            f"  {line['tell_on'] or '–'}"
        )
    reasons = [f"{line['part']}: {line['reasons'][0]}" for line in document["lines"] if line["quantity"]]
    return [document["sentence"], head, *rows, *reasons]
