"""The demo fleet's three years, seeded: the same numbers give the same records."""

from __future__ import annotations

import datetime as dt
import random
from typing import Any

from fleet.demo import catalogue, people, places, supply
from fleet.demo.bench import Bench
from fleet.demo.carriage import Calendar, Carriage
from fleet.demo.places import PLACES, Place
from fleet.demo.sheets import Sheets

Tables = dict[str, list[dict[str, Any]]]


def calendar(years: float, until: dt.date) -> Calendar:
    """The turns of the story as shares of its length, so that a longer or shorter one keeps its shape."""
    span = round(365.25 * years)
    begin = until - dt.timedelta(days=span)

    def at(share: float) -> dt.date:
        return begin + dt.timedelta(days=round(span * share))

    return Calendar(begin, until, at(0.84), at(0.45), at(0.66), at(0.36), at(0.46), at(0.55))


def homes(modules: int) -> list[Place]:
    """The place of each module, by the sites' shares."""
    total = sum(place.share for place in PLACES)
    counts = {place.code: max(1, round(modules * place.share / total)) for place in PLACES if place.share}
    largest = max(counts, key=lambda code: counts[code])
    counts[largest] = max(1, counts[largest] + modules - sum(counts.values()))
    return [place for place in PLACES for _ in range(counts.get(place.code, 0))][:modules]


def tell(*, modules: int = 320, years: float = 3, seed: int = 7, until: dt.date) -> Tables:
    """Records files as tables of rows (file name without ending → rows)."""
    dice = random.Random(seed)
    days = calendar(years, until)
    sheets = Sheets(dice)
    bench = Bench(begin=days.begin, end=days.end, modules=modules, dice=random.Random(dice.random()))
    fleet: list[Carriage] = []
    span = (days.end - days.begin).days
    bays: dict[str, int] = {}
    for number, home in enumerate(homes(modules), start=1):
        bays[home.code] = bays.get(home.code, 0) + 1
        begin = days.begin + dt.timedelta(days=int(span * 0.55 * dice.random() ** 1.6))
        bay = f"{'ABCDEFGH'[(bays[home.code] - 1) // 8 % 8]}-{(bays[home.code] - 1) % 8 + 1:02d}"
        kind = "BC36" if dice.random() < 0.4 else "BC20"
        own = random.Random(dice.random())
        fleet.append(Carriage(f"BC-{number:04d}", kind, home, bay, begin, days, sheets, bench, own))
        fleet[-1].stands_at_the_end = number % 90 == 41 and home.reports_at_once is True
    live(fleet, days)
    first_day = records_began(days)
    tables: Tables = catalogue.rows() | places.rows(first_day) | people.rows() | dict(sheets.rows)
    tables["modules"] = [{"module": each.tag, "type": each.kind, "built_on": each.begin} for each in fleet]
    tables |= bench.write_down()
    drop_what_was_not_written(tables, fleet, first_day, dice)
    tables |= supply.rows(
        tables, sheets.fitted_on_bench, begin=days.begin, end=days.end,
        late=(days.bad_lot_from, days.bad_lot_to), dice=random.Random(dice.random()),
    )  # fmt: skip
    for visit in tables["visits"]:
        del visit["day"]
    return tables


def live(fleet: list[Carriage], days: Calendar) -> None:
    """Day by day for all of them: they meet at the bench, which takes them in the order in which they come."""
    day = days.begin
    while day <= days.end:
        for carriage in fleet:
            if day > carriage.begin:
                carriage.live_day(day)
        day += dt.timedelta(days=1)


def records_began(days: Calendar) -> dict[str, object]:
    """records_from of sites that began late, and the next planned visit of each."""
    told: dict[str, object] = {}
    for place in PLACES:
        if place.records_late_by:
            share = place.records_late_by / 1096
            told[place.code] = days.begin + dt.timedelta(days=round((days.end - days.begin).days * share))
        if place.visit_every:
            told[f"next {place.code}"] = days.end + dt.timedelta(days=3 + sum(map(ord, place.code)) % place.visit_every)
    return told


def drop_what_was_not_written(
    tables: Tables, fleet: list[Carriage], first_day: dict[str, object], dice: random.Random
) -> None:
    """Where records began late, only the parts that stood there then are known, some with their day."""
    began = {each.tag: first_day[each.place.code] for each in fleet if each.place.code in first_day}
    gone = {v["visit"] for v in tables["visits"] if v["module"] in began and v["day"] < began[v["module"]]}
    tables["visits"] = [v for v in tables["visits"] if v["visit"] not in gone]
    for sheet in ("readings", "findings"):
        tables[sheet] = [row for row in tables[sheet] if row["visit"] not in gone]
    tables["stops"] = [
        row for row in tables["stops"] if row["module"] not in began or row["stopped_at"].date() >= began[row["module"]]
    ]
    kept = []
    for row in tables["fittings"]:
        start = began.get(row["module"])
        if start is not None and row.get("removed_on") and row["removed_on"] < start:
            continue
        if start is not None and row["fitted_on"] < start:
            row["fitted_visit"] = row["strokes_at_fit"] = row["fitted_known_on"] = ""
            if dice.random() < 0.4:
                row["fitted_on"] = row["lot"] = ""
        kept.append(row)
    tables["fittings"] = kept
