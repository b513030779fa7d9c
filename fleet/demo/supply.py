"""The demo's stores: who carried what, what was ordered, and in how many deliveries it came."""

from __future__ import annotations

import datetime as dt
import random
from collections import defaultdict
from dataclasses import dataclass, field
from typing import Any

from fleet.demo.catalogue import PARTS
from fleet.demo.people import PEOPLE

Row = dict[str, Any]
MAIN = "SHELF-N"
SHELVES = {"SHELF-N": "DEPOT-N", "SHELF-S": "DEPOT-S"}
BOXES = {"BOX-TERN": "TERN", "BOX-WITHY": "WITHY", "BOX-BRACK": "BRACK"}
VANS = {f"VAN-{each.code}": each.code for each in PEOPLE if each.role == "crew"}
ORDER_EVERY = 14  # days
TOP_UP_EVERY = 7
BOX_EVERY = 28
COUNT_EVERY = 91
TRAILING = 70  # days of use that a level is set by


@dataclass(frozen=True)
class Use:
    """One part that went in somewhere."""

    day: dt.date
    part: str
    stores: tuple[str, ...]  # where it is looked for, in this order
    visit: str = ""
    job: str = ""


@dataclass
class Coming:
    day: dt.date
    part: str
    quantity: int
    order: str


@dataclass
class Storekeeper:
    """Lives through the days in the stores; what happens becomes rows of moves.csv and supply.csv."""

    dice: random.Random
    begin: dt.date
    end: dt.date
    late: tuple[dt.date, dt.date]  # the stretch in which the seals' supplier falls behind
    on_hand: dict[tuple[str, str], int] = field(default_factory=lambda: defaultdict(int))
    used: dict[str, list[dt.date]] = field(default_factory=lambda: defaultdict(list))
    coming: list[Coming] = field(default_factory=list)
    moves: list[Row] = field(default_factory=list)
    supply: list[Row] = field(default_factory=list)
    orders: int = 0

    def move(self, day: dt.date, store: str, part: str, quantity: int, kind: str, **more: Any) -> None:
        self.on_hand[store, part] += quantity
        if "other_store" in more:
            self.on_hand[more["other_store"], part] -= quantity
        row = {"move": f"SM-{len(self.moves) + 1:06d}", "store": store, "part": part, "happened_on": day}
        self.moves.append(row | {"quantity": quantity, "kind": kind} | more)

    def rate(self, part: str, day: dt.date) -> float:
        """Used a day, lately."""
        since = day - dt.timedelta(days=TRAILING)
        days = self.used[part]
        while days and days[0] < since:
            days.pop(0)
        return len(days) / TRAILING

    def open(self, first: dict[str, int]) -> None:
        """What lay there on the first day was counted."""
        for part, count in first.items():
            self.move(self.begin, MAIN, part, count, "count", reason="opening count")

    def use(self, use: Use) -> None:
        self.used[use.part].append(use.day)
        store = next((each for each in use.stores if self.on_hand[each, use.part] > 0), "")
        if not store:
            store = use.stores[0]
            self.move(use.day, store, use.part, 1, "receipt", reason="bought on the spot")
        link = {"visit": use.visit} if use.visit else {"job": use.job}
        self.move(use.day, store, use.part, -1, "issue", **link)

    def live_day(self, day: dt.date, uses: list[Use]) -> None:
        age = (day - self.begin).days
        for each in [each for each in self.coming if each.day == day]:
            self.move(day, MAIN, each.part, each.quantity, "receipt", order=each.order)
            self.coming.remove(each)
        if age % TOP_UP_EVERY == 1:
            self.top_up(day, [*VANS, "SHELF-S"], share=0.24, days=14)
        if age % BOX_EVERY == 2:
            self.top_up(day, list(BOXES), share=0.06, days=40)
        for use in uses:
            self.use(use)
        if age % ORDER_EVERY == 3:
            self.order(day)
        if age % COUNT_EVERY == 60:
            self.count(day)

    def top_up(self, day: dt.date, stores: list[str], *, share: float, days: int) -> None:
        for store in stores:
            for part in sorted(self.used):
                rate = self.rate(part, day)
                wanted = round(rate * days * share + (0.8 if rate > 0.05 else 0)) - self.on_hand[store, part]
                some = min(wanted, self.on_hand[MAIN, part])
                if some > 0:
                    self.move(day, MAIN, part, -some, "transfer", other_store=store)

    def order(self, day: dt.date) -> None:
        """Up to what is used until the order after this one has come, and some more."""
        by_supplier: dict[str, list[tuple[Row, int]]] = defaultdict(list)
        for part in PARTS:
            code, lead, pack = str(part["part"]), int(str(part["lead_time_days"])), int(str(part["pack"]))
            held = sum(count for (_, each), count in self.on_hand.items() if each == code)
            due = sum(each.quantity for each in self.coming if each.part == code)
            level = self.rate(code, day) * 1.15 * (lead + ORDER_EVERY + 25)
            packs = -(-(level - held - due) // pack)
            if packs > 0 and level > 0.4:
                by_supplier[str(part["supplier"])].append((part, int(packs) * pack))
        for supplier, lines in by_supplier.items():
            self.place(day, supplier, lines)

    def place(self, day: dt.date, supplier: str, lines: list[tuple[Row, int]]) -> None:
        self.orders += 1
        code = f"PO-{self.orders:04d}"
        slow = 1.7 if supplier.startswith("Tidewrack") and self.late[0] <= day <= self.late[1] else 1.0
        spread = self.dice.lognormvariate(0, 0.22)
        for part, quantity in lines:
            lead = int(part["lead_time_days"])
            self.supply.append({
                "order": code, "part": part["part"], "quantity": quantity, "ordered_on": day,
                "due_on": day + dt.timedelta(days=lead), "supplier": supplier, "unit_cost": part["unit_cost"],
            })  # fmt: skip
            took = max(3, round(lead * slow * spread * self.dice.lognormvariate(0, 0.08)))
            self.deliver(day + dt.timedelta(days=took), str(part["part"]), quantity, int(part["pack"]), code)

    def deliver(self, day: dt.date, part: str, quantity: int, pack: int, order: str) -> None:
        """Larger orders often come in two or three deliveries."""
        packs = quantity // pack
        parts = self.dice.choices([1, 2, 3], [60, 28, 12])[0] if packs >= 3 else 1
        while packs > 0:
            some = packs if parts == 1 else max(1, packs // parts)
            self.coming.append(Coming(day, part, some * pack, order))
            packs, parts = packs - some, parts - 1
            day += dt.timedelta(days=self.dice.randrange(4, 19))

    def count(self, day: dt.date) -> None:
        """Most counts agree; now and then one is missing, or one more lies behind the rack."""
        for (store, part), held in sorted(self.on_hand.items()):
            if held <= 0:
                continue
            found = self.dice.choices([0, -1, 1], [90, 7, 3])[0]
            reason = {0: "", -1: "one missing, nobody knows why", 1: "one more than written down"}[found]
            self.move(day, store, part, found, "count", reason=reason)


def stores() -> list[Row]:
    names = {"SHELF-N": "North depot shelf", "SHELF-S": "South depot shelf", "BOX-TERN": "Box at Ternmouth",
             "BOX-WITHY": "Box at Withy Lock", "BOX-BRACK": "Box at Brack"}  # fmt: skip
    people = {each.code: each.name.split()[0] for each in PEOPLE}
    rows: list[Row] = [{"store": code, "name": names[code], "site": site} for code, site in (SHELVES | BOXES).items()]
    return rows + [{"store": code, "name": f"Van of {people[who]}", "person": who} for code, who in VANS.items()]


def uses_of(tables: dict[str, list[Row]], on_bench: dict[str, str]) -> dict[dt.date, list[Use]]:
    """Every part that a visit or a job put in, by day."""
    visits = {row["visit"]: row for row in tables["visits"]}
    depots = {row["job"]: row["depot"] for row in tables["bench"]}
    where = site_of_modules(tables)
    boxes = {site: box for box, site in BOXES.items()}
    shelves = {site: shelf for shelf, site in SHELVES.items()}
    found: dict[dt.date, list[Use]] = defaultdict(list)
    for row in tables["fittings"]:
        if row.get("fitted_visit"):
            visit = visits[row["fitted_visit"]]
            near = tuple(filter(None, [boxes.get(where[row["module"]])]))
            stores = (f"VAN-{visit['crew']}", *near, MAIN)
            found[visit["day"]].append(Use(visit["day"], row["part"], stores, visit=row["fitted_visit"]))
        elif row["fitting"] in on_bench and row["fitted_on"]:  # some days before records began are not known
            job = on_bench[row["fitting"]]
            found[row["fitted_on"]].append(Use(row["fitted_on"], row["part"], (shelves[depots[job]], MAIN), job=job))
    return found


def site_of_modules(tables: dict[str, list[Row]]) -> dict[str, str]:
    homes: dict[str, str] = {}
    for row in tables["placements"]:
        homes.setdefault(row["module"], row["site"])
    return homes


def rows(
    tables: dict[str, list[Row]],
    on_bench: dict[str, str],
    *,
    begin: dt.date,
    end: dt.date,
    late: tuple[dt.date, dt.date],
    dice: random.Random,
) -> dict[str, list[Row]]:
    """stores.csv, supply.csv and moves.csv of everything that went in."""
    uses = uses_of(tables, on_bench)
    keeper = Storekeeper(dice, begin, end, late)
    soon: dict[str, int] = defaultdict(int)
    for day, some in uses.items():
        for use in some:
            soon[use.part] += day < begin + dt.timedelta(days=150)
    keeper.open({part: max(2, count) for part, count in sorted(soon.items()) if count} | {"UB-1": 2})
    day = begin
    while day <= end:
        keeper.live_day(day, uses.get(day, []))
        day += dt.timedelta(days=1)
    return {"stores": stores(), "supply": keeper.supply, "moves": keeper.moves}
