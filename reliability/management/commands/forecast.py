"""What a coming stretch of days will break and use, as a table for people or one JSON document."""

from __future__ import annotations

import json
from argparse import ArgumentTypeError
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.models import Component
from fleet.models.codes import clean_code
from reliability import forecast_words as words
from reliability.management.commands.life import day, share

BY = ("week", "part", "site", "type")


class Command(BaseCommand):
    help = "Counts failures and parts used, by default for 13 weeks from the next calendar quarter's first Monday."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("--from", dest="begin", type=day, metavar="DATE", help="first day counted")
        parser.add_argument("--days", type=horizon, default=91, help="how many days (91)")
        parser.add_argument("--as-of", type=day, metavar="DATE", help="as the records stood on this day (today)")
        parser.add_argument("--component", type=clean_code, metavar="CODE", help="only this component")
        parser.add_argument("--by", choices=BY, default="part", help="one line for each (part)")
        parser.add_argument("--bands", type=shares, default=[0.5, 0.8, 0.95], help="0.5,0.8,0.95")
        parser.add_argument("--json", action="store_true", help="one JSON document")

    def handle(self, *args: Any, **options: Any) -> None:
        documents = [self.document(component, options) for component in chosen(options["component"])]
        if options["json"]:
            told = documents[0] if options["component"] else {"forecasts": documents}
            self.stdout.write(json.dumps(told, ensure_ascii=False, allow_nan=False, indent=1))
            return
        for document in documents:
            self.stdout.write("\n".join([*lines_of(document), ""]))

    def document(self, component: Component, options: dict[str, Any]) -> dict[str, Any]:
        from reliability.forecasts.next_quarter import forecast_document, question_of
        from reliability.life_errors import QuestionRefused
        from reliability.stats.errors import StatisticsError

        as_of, begin, by = options["as_of"], options["begin"], options["by"]
        if begin and as_of and begin < as_of:
            raise CommandError(f"--from {begin} lies before --as-of {as_of}. A forecast begins on that day or later.")
        try:
            question = question_of(component, begin=begin, days=options["days"], as_of=as_of, by_type=by == "type")
            document = forecast_document(question, bands=options["bands"])
        except (QuestionRefused, StatisticsError) as error:
            raise CommandError(str(error)) from error
        groups, weeks = document.pop("groups"), document["weeks"]
        rows = [{"group": week["from"], **week} for week in weeks] if by == "week" else groups[by]
        return {**document, "title": component.title, "by": by, "rows": rows}


def chosen(code: str | None) -> list[Component]:
    components = list(Component.objects.all())
    if code is None:
        return components
    found = [each for each in components if each.code == code]
    if not found:
        known = ", ".join(each.code for each in components) or "none yet"
        raise CommandError(f"There is no component {code}. The book has: {known}.")
    return found


def lines_of(document: dict[str, Any]) -> list[str]:
    """The document as a table; the parts to plan for go beyond failures, which take others along."""
    bands = list(document["total"]["bands"])
    head = f"{document['by']:<24}{'expected':>10}" + "".join(f"{100 * float(band):>9.0f} %" for band in bands)
    rows = [{"group": "total", **document["total"]}, *document["rows"]]
    table = [
        f"{row['group']:<24}{row['mean']:>10.1f}"
        + "".join(f"{words.between(row['bands'][band]).replace(' to ', '–'):>11}" for band in bands)
        + f"{row['parts_used']['plan_for']['0.95'] if 'parts_used' in row else '–':>11}"
        for row in rows
    ]
    notes = [f"! {warning}" for warning in document["warnings"]]
    titles = [f"{document['title']}: {words.heading(document)}", words.lead(document, document["title"])]
    return [*titles, f"{head}   plan for", *table, words.positions(document), *notes]


def horizon(text: str) -> int:
    if not text.isdigit() or not 1 <= int(text) <= 3660:
        raise ArgumentTypeError(f"“{text}” is no number of days. Write 1 to 3660.")
    return int(text)


def shares(text: str) -> list[float]:
    found = [share(each) for each in text.split(",") if each.strip()]
    if not found:
        raise ArgumentTypeError("Write bands like 0.5,0.8,0.95.")
    return found
