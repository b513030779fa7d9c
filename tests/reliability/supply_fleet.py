"""A fleet of nuts with stores, deliveries and a bench: small enough to count by hand, old enough to learn from."""

from __future__ import annotations

import datetime as dt

from fleet.actions.place_supply_order import OrderedPart, place_supply_order
from fleet.actions.receive_stock import receive_delivery
from fleet.models import BenchCapacity, BenchHours, BenchJob, Component, Placement, Site, Store
from reliability.forecasts.coming_use import ComingUse, kept_uses
from tests.factories import make_depot, make_manager, make_store, stock
from tests.reliability.small_fleet import SmallFleet, day
from tests.reliability.test_forecast import AS_OF, lived_fleet

TODAY = day(AS_OF)


def count_today() -> dict[str, ComingUse]:
    """As the worker does before anybody looks."""
    return kept_uses(Component.objects.all(), count=True)


class SupplyFleet:
    """Nuts N1 (old) and N2 (in force) at LOCK and WEIR, a depot with a shelf, a box at LOCK, and the bench's past."""

    def __init__(self, modules: int = 30, on_hand: int = 12) -> None:
        self.fleet: SmallFleet = lived_fleet(modules)
        self.n1, self.n2 = self.fleet.n1, self.fleet.n2
        for part, cost in ((self.n1, 10), (self.n2, 20)):
            part.unit_cost, part.lead_time_days, part.supplier, part.pack = cost, 21, "Cooper", 5
            part.save()
        self.manager = make_manager()
        self.depot: Site = make_depot(code="YARD", zone="UTC")
        self.shelf: Store = make_store(code="SHELF", site=self.depot)
        self.box: Store = make_store(code="BOX", site=Site.objects.get(code="LOCK"))
        if on_hand:
            stock(self.shelf, self.n2, on_hand, happened_on=day(AS_OF - 200))
        stock(self.box, self.n2, 2, happened_on=day(AS_OF - 200))

    def deliver(self, ordered: int, received: int, quantity: int) -> None:
        """Ordered and received so many days ago."""
        order = place_supply_order(
            by=None, lines=[OrderedPart(self.n2, quantity)], ordered_on=TODAY - dt.timedelta(days=ordered)
        )
        line = order.lines.get()
        receive_delivery(
            by=None, store=self.shelf, quantities={line: quantity}, happened_on=TODAY - dt.timedelta(days=received)
        )

    def job(self, received: int, finished: int | None, hours: float = 4.0, reason: str = "Drive nut: worn") -> BenchJob:
        """A module came so many days ago and was finished so many days ago, None while it is there."""
        number = BenchJob.objects.count() + 1
        module = self.fleet.module(f"B-{number}", None)
        came = TODAY - dt.timedelta(days=received)
        Placement.objects.create(module=module, site=self.depot, from_on=came)
        over = None if finished is None else TODAY - dt.timedelta(days=finished)
        job = BenchJob.objects.create(
            code=f"J-{number}", module=module, depot=self.depot, reason=reason, received_on=came, finished_on=over,
            stage="waiting" if over is None else "finished", outcome="" if over is None else "ready",
        )  # fmt: skip
        if over is not None:
            BenchHours.objects.create(job=job, person=self.manager, day=over, hours=hours)
        return job

    def hours(self, a_week: float, weeks: int = 30) -> None:
        monday = TODAY - dt.timedelta(days=TODAY.weekday())
        for place in range(weeks):
            BenchCapacity.objects.create(week=monday + dt.timedelta(weeks=place), hours=a_week)
