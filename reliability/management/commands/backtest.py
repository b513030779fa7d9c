"""How good past forecasts would have been, as a table for people or one JSON document."""

from __future__ import annotations

import json
from argparse import ArgumentTypeError
from typing import Any

from django.core.management.base import BaseCommand, CommandParser

from fleet.models.codes import clean_code
from reliability import forecast_words
from reliability.forecasts.backtest_works import MOST_QUARTERS, QUARTERS
from reliability.management.commands.forecast import chosen


class Command(BaseCommand):
    help = "Judges the forecasts of past quarters by what happened, beside two plain rivals, and keeps the answer."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--quarters", type=quarters, default=QUARTERS, help=f"how many past quarters ({QUARTERS})")
        parser.add_argument("--component", type=clean_code, metavar="CODE", help="only this component")
        parser.add_argument("--json", action="store_true", help="one JSON document")

    def handle(self, *args: Any, **options: Any) -> None:
        from reliability.forecasts.backtest import backtest

        def tell(done: int, total: int, message: str) -> None:
            if not options["json"] and self.stderr.isatty():
                self.stderr.write(f"{done} of {total}: {message}")

        documents = backtest(chosen(options["component"]), options["quarters"], tell=tell)
        if options["json"]:
            told = documents[0] if options["component"] else {"backtests": documents}
            self.stdout.write(json.dumps(told, ensure_ascii=False, allow_nan=False, indent=1))
            return
        for document in documents:
            self.stdout.write("\n".join([*lines_of(document), ""]))


def lines_of(document: dict[str, Any]) -> list[str]:
    """The document as sentences and a table."""
    from reliability.forecasts import backtest_words as words

    line = words.line(document)
    first = [f"{document['title']}: {line['sentence']} {line['note']}".rstrip()]
    if not document["judged"]:
        return first
    about, between = forecast_words.about, forecast_words.between
    summed = document["measures"]["failures"]
    bands = "".join(f"{100 * float(band):>9.0f} %" for band in document["bands"])
    table = [f"{'quarter from':<14}{'happened':>9}{'expected':>10}{bands}{'missed by':>11}"]
    for row in summed["quarters"]:
        ends = "".join(f"{between(row['bands'][band]).replace(' to ', '–'):>11}" for band in document["bands"])
        mark = "" if row["held"]["0.8"] else "   outside the 80 % band"
        table.append(
            f"{row['from']:<14}{row['actual']:>9}{about(row['hoped']):>10}{ends}{about(row['crps']):>11}{mark}"
        )
    said = [words.bias(document), words.other_bands(document), *words.rivals(document)]
    used = [f"Parts used: {words.bias(document, 'parts_used')} {words.line(document, 'parts_used')['sentence']}"]
    return [*first, *table, *said, *used, *filter(None, (words.came_later(document), words.missing(document)))]


def quarters(text: str) -> int:
    if not text.isdigit() or not 1 <= int(text) <= MOST_QUARTERS:
        raise ArgumentTypeError(f"“{text}” is no number of quarters. Write 1 to {MOST_QUARTERS}.")
    return int(text)
