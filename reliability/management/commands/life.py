"""How long the parts of a component live, as a table for people or one JSON document."""

from __future__ import annotations

import datetime as dt
import json
from argparse import ArgumentTypeError
from typing import Any

from django.core.management.base import BaseCommand, CommandError, CommandParser

from fleet.formats import number
from fleet.models.codes import clean_code

CLOCKS = ("days", "hours", "strokes")
GROUPINGS = ("part", "site", "type", "lot", "quarter")


class Command(BaseCommand):
    help = "Tells how long the parts of a component live, from all records up to a day."

    def add_arguments(self, parser: CommandParser) -> None:
        parser.add_argument("component", metavar="COMPONENT", type=clean_code, help="code of the component")
        parser.add_argument("--clock", choices=CLOCKS, help="what lives are counted in (the component's own)")
        parser.add_argument("--by", choices=GROUPINGS, help="one line for each")
        parser.add_argument(
            "--site", action="append", type=clean_code, metavar="CODE", help="only this site; repeatable"
        )
        parser.add_argument(
            "--part", action="append", type=clean_code, metavar="CODE", help="only this part; repeatable"
        )
        parser.add_argument(
            "--set", type=clean_code, metavar="SET", help="an imported set of lives instead of the fleet"
        )
        parser.add_argument("--mode", action="append", type=clean_code, metavar="CODE", help="only this failure mode")
        parser.add_argument("--as-of", type=day, metavar="DATE", help="as the records stood on this day (today)")
        parser.add_argument("--confidence", type=share, default=0.95, help="of all intervals (0.95)")
        parser.add_argument("--with-rigs", action="store_true", help="count test stands too")
        parser.add_argument("--json", action="store_true", help="one JSON document")

    def handle(self, *args: Any, **options: Any) -> None:
        from reliability.life_answer import life_document
        from reliability.life_errors import QuestionRefused
        from reliability.life_panels import whole_document
        from reliability.stats.errors import StatisticsError

        answered = whole_document if options["json"] else life_document
        try:
            document = answered(
                options["component"],
                clock=options["clock"],
                by=options["by"],
                sites=options["site"],
                parts=options["part"],
                modes=options["mode"],
                as_of=options["as_of"],
                life_set=options["set"],
                confidence=options["confidence"],
                with_rigs=options["with_rigs"],
            )
        except (QuestionRefused, StatisticsError) as error:
            raise CommandError(str(error)) from error
        if options["json"]:
            self.stdout.write(json.dumps(document, ensure_ascii=False, allow_nan=False, indent=1))
        else:
            self.stdout.write("\n".join(lines_of(document)))


def day(text: str) -> dt.date:
    try:
        return dt.date.fromisoformat(text)
    except ValueError:
        raise ArgumentTypeError(f"“{text}” is no day. Write it like 2026-03-09.") from None


def share(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = 0.0
    if not 0.0 < value < 1.0:
        raise ArgumentTypeError(f"“{text}” is no confidence. Write a number between 0 and 1, like 0.95.")
    return value


def lines_of(document: dict[str, Any]) -> list[str]:
    name = document["component_name"]
    head = f"{name[:1].upper()}{name[1:]}, lives in {document['clock']}, as of {document['as_of']}"
    lines = [head, ""]
    if not document["groups"]:
        lines.append("No life of this component is in the records that were chosen.")
    else:
        lines += [*table_of(document), ""]
        lines += [group["sentence"] for group in document["groups"]]
    notes = [f"{_group_name(group)}{note}" for group in document["groups"] for note in group["notes"]]
    for title, entries in (
        ("Left out", [f"{row['reason']}: {row['count']}" for row in document["left_out"]]),
        ("Notes", notes),
        ("Warnings", document["warnings"]),
    ):
        if entries:
            lines += ["", title, *(f"  {entry}" for entry in entries)]
    return [*lines, "", method_of(document)]


def _group_name(group: dict[str, Any]) -> str:
    return "" if group["group"] == "all" else f"{group['group']}: "


def table_of(document: dict[str, Any]) -> list[str]:
    heads = ["", "lives", "failed", "running", "B10", "median", "mean", "shape", "scale"]
    rows = [heads]
    for group in document["groups"]:
        weibull = group["weibull"] or {"shape": None, "scale": None}
        rows.append(
            [
                group["group"],
                number(group["lives"]),
                number(group["failures"]),
                number(group["running"]),
                *(estimate(group[name]) for name in ("b10", "median", "mean")),
                estimate(weibull["shape"], 3),
                estimate(weibull["scale"]),
            ]
        )
    widths = [max(len(row[column]) for row in rows) for column in range(len(heads))]
    return ["  ".join(_cell(text, widths[column], column) for column, text in enumerate(row)).rstrip() for row in rows]


def _cell(text: str, width: int, column: int) -> str:
    return text.ljust(width) if column == 0 else text.rjust(width)


def estimate(value: dict[str, Any] | None, digits: int | None = None) -> str:
    """An estimate with its limits in brackets; a limit that the records do not give is a dash."""
    if value is None or value["estimate"] is None:
        return "–"
    low, high = (
        "–" if value[end] is None else number(value[end], digits if digits is not None else _digits(value[end]))
        for end in ("lower", "upper")
    )
    return f"{number(value['estimate'], digits if digits is not None else _digits(value['estimate']))} [{low}, {high}]"


def _digits(value: float) -> int:
    return 0 if abs(value) >= 100 else 1


def method_of(document: dict[str, Any]) -> str:
    percent = number(100 * document["confidence"])
    differ = any(group["independent"] for group in document["groups"])
    sites = (
        " Where sites differ the figures are those of a typical site, with that spread in the intervals."
        if differ
        else ""
    )
    return (
        f"Weibull by maximum likelihood; in brackets {percent} % likelihood-ratio intervals, – where the records give "
        f"no limit.{sites} These figures plan stock; they do not certify safe life."
    )
