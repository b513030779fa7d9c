"""Does a new part live longer than those it replaces: the evidence as a table for people or one JSON document."""

from __future__ import annotations

import json
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.formats import number
from fleet.models.codes import clean_code
from reliability import redesign_words as words
from reliability.management.commands.life import day, share


class Command(BaseCommand):
    help = (
        "Holds a new part against the old ones: verdict, life ratio, chances, tests. Old parts are those it supersedes."
    )

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("new_part", type=clean_code, metavar="NEW_PART", help="number of the new part")
        parser.add_argument(
            "--before", type=clean_code, nargs="+", action="extend", metavar="PART", help="old parts (those superseded)"
        )
        parser.add_argument("--hope", type=hope, default=None, help="times as long a life is hoped for (1.5)")
        parser.add_argument("--as-of", type=day, metavar="DATE", help="as the records stood on this day (today)")
        parser.add_argument("--confidence", type=share, default=0.95, help="of the intervals (0.95)")
        parser.add_argument("--json", action="store_true", help="one JSON document")

    def handle(self, *args: Any, **options: Any) -> None:
        from reliability.life_errors import QuestionRefused
        from reliability.redesigns.document import redesign_document
        from reliability.redesigns.question import question_for
        from reliability.stats.errors import StatisticsError

        choices = {name: options[name] for name in ("hope", "as_of", "confidence") if options[name] is not None}
        try:
            document = redesign_document(question_for(options["new_part"], options["before"], **choices))
        except (QuestionRefused, StatisticsError) as error:
            raise CommandError(str(error)) from error
        if options["json"]:
            self.stdout.write(json.dumps(document, ensure_ascii=False, allow_nan=False, indent=1))
            return
        self.stdout.write("\n".join(lines_of(document)))


def hope(text: str) -> float:
    from argparse import ArgumentTypeError

    try:
        value = float(text)
    except ValueError:
        raise ArgumentTypeError(f"{text} is no number. Give a factor above 1, like 1.5.") from None
    if not 1.0 < value <= 100:
        raise ArgumentTypeError(f"{text} is no hope of a longer life. Give a factor above 1, like 1.5.")
    return value


def lines_of(document: dict[str, Any]) -> list[str]:
    told = [words.lead(document), words.strength(document), words.ahead(document)]
    if document["few"]:
        told.append(words.few_sentence(document))
    told += [f"Read with care: {warning}" for warning in words.warnings(document)]
    return ["\n\n".join(told), "", *ratio_lines(document), "", *side_lines(document)]


def ratio_lines(document: dict[str, Any]) -> list[str]:
    found = document["same_dates"]["ratio"] or {}
    rows = [f"{'Times as long':<42}{'B10':>22}{'median':>22}"]
    for way, ratio in found.items():
        if ratio is not None:
            rows.append(f"{words.ASSUMED[way]:<42}{ends(ratio['b10']):>22}{ends(ratio['median']):>22}")
    return rows if len(rows) > 1 else []


def side_lines(document: dict[str, Any]) -> list[str]:
    rows = [f"{'Over the same dates':<24}{'lives':>8}{'failed':>8}{'running':>9}"]
    for group in (document["same_dates"]["curves"] or {"groups": []})["groups"]:
        rows.append(f"{group['group']:<24}{group['lives']:>8}{group['failures']:>8}{group['running']:>9}")
    return rows


def ends(ratio: dict[str, Any]) -> str:
    lower = number(ratio["lower"], 2) if ratio["lower"] is not None else "0"
    upper = number(ratio["upper"], 2) if ratio["upper"] is not None else "no end"
    return f"{number(ratio['estimate'], 2)} ({lower}–{upper})"
