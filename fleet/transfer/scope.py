"""What somebody may take out: all of the book, or what happened at some sites."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from django.db.models import Exists, OuterRef, Q, QuerySet

from fleet.models import (
    BenchCapacity,
    BenchHours,
    BenchJob,
    Finding,
    Fitting,
    Module,
    Person,
    Placement,
    Reading,
    Redesign,
    RolloutStep,
    Site,
    StockMove,
    Stop,
    Store,
    SupplyLine,
    Visit,
)
from fleet.rights import BENCH, COSTS, LIFE, PEOPLE, STOCK, STORES, may


@dataclass(frozen=True)
class Scope:
    """`sites` None means everywhere."""

    sites: frozenset[int] | None = None
    costs: bool = True
    all_people: bool = True
    stock: bool = True  # stores and what lies there
    orders: bool = True
    bench: bool = True
    redesigns: bool = True

    @property
    def everywhere(self) -> bool:
        return self.sites is None

    def rows(self, query: QuerySet[Any], path: str) -> QuerySet[Any]:
        return query if self.sites is None else query.filter(**{f"{path}__in": self.sites})

    def sites_rows(self) -> QuerySet[Site]:
        return self.rows(Site.objects.all(), "pk")

    def placements(self) -> QuerySet[Placement]:
        return self.rows(Placement.objects.standing(), "site")

    def modules(self) -> QuerySet[Module]:
        if self.sites is None:
            return Module.objects.all()
        return Module.objects.filter(Exists(self.placements().filter(module=OuterRef("pk"))))

    def visits(self) -> QuerySet[Visit]:
        return self.rows(Visit.objects.standing(), "site").filter(module__in=self.modules())

    def redesign_rows(self) -> QuerySet[Redesign]:
        """They belong to no site, like the catalogue; their costs are shown apart."""
        return Redesign.objects.all() if self.redesigns else Redesign.objects.none()

    def steps(self) -> QuerySet[RolloutStep]:
        rows = RolloutStep.objects.standing() if self.redesigns else RolloutStep.objects.none()
        return rows.filter(module__in=self.modules())

    def stops(self) -> QuerySet[Stop]:
        return self.rows(Stop.objects.standing(), "site").filter(module__in=self.modules())

    def readings(self) -> QuerySet[Reading]:
        return self.rows(Reading.objects.all(), "site").filter(module__in=self.modules())

    def findings(self) -> QuerySet[Finding]:
        return Finding.objects.standing().filter(visit__in=self.visits())

    def fittings(self) -> QuerySet[Fitting]:
        """Those whose stay touches a stay of the module at one of the sites."""
        if self.sites is None:
            return Fitting.objects.all()
        here = self.placements().filter(
            Q(to_on=None) | Q(to_on__gte=OuterRef("fitted_on")) | Q(to_on__gte=OuterRef("removed_on")),
            module=OuterRef("module_id"),
        )
        begun = Q(from_on__lte=OuterRef("removed_on")) | Q(to_on=None)
        return Fitting.objects.filter(
            Exists(here.filter(begun)) | Exists(here.filter(from_on__lte=OuterRef("fitted_on")))
        )

    def moves(self) -> QuerySet[StockMove]:
        rows = StockMove.objects.standing() if self.stock else StockMove.objects.none()
        if self.sites is None:
            return rows
        return rows.filter(Q(store__site__in=self.sites) | Q(other_store__site__in=self.sites))

    def stores(self) -> QuerySet[Store]:
        """Those at the sites, and the other ends of their moves: without these a transfer would lead nowhere."""
        rows = Store.objects.all() if self.stock else Store.objects.none()
        if self.sites is None:
            return rows
        moves = self.moves()
        ends = Q(pk__in=moves.values("store")) | Q(pk__in=moves.exclude(other_store=None).values("other_store"))
        return rows.filter(Q(site__in=self.sites) | ends)

    def supply(self) -> QuerySet[SupplyLine]:
        """Everywhere all of it; of some sites what came to their stores."""
        rows = SupplyLine.objects.standing() if self.orders else SupplyLine.objects.none()
        if self.sites is None:
            return rows
        return rows.filter(pk__in=self.moves().exclude(line=None).values("line"))

    def jobs(self) -> QuerySet[BenchJob]:
        rows = BenchJob.objects.standing() if self.bench else BenchJob.objects.none()
        return self.rows(rows, "depot").filter(module__in=self.modules())

    def hours(self) -> QuerySet[BenchHours]:
        return BenchHours.objects.standing().filter(job__in=self.jobs())

    def capacity(self) -> QuerySet[BenchCapacity]:
        return BenchCapacity.objects.all() if self.bench and self.everywhere else BenchCapacity.objects.none()

    def people(self) -> QuerySet[Person]:
        """Everybody for a manager; else those whom the records name."""
        if self.all_people and self.everywhere:
            return Person.objects.all()
        named = Q(pk__in=self.visits().values("crew")) | Q(pk__in=self.stops().values("reported_by"))
        named |= Q(pk__in=self.stores().values("person")) | Q(pk__in=self.hours().values("person"))
        if self.all_people:
            named |= Q(pk__in=Person.sites.through.objects.filter(site__in=self.sites or ()).values("person"))
        return Person.objects.filter(named)


def scope_of(person: Person | None, site: Site | None = None) -> Scope:
    """A command takes everything, a person what they may see; `site` narrows either."""
    if person is None:
        return Scope(None if site is None else frozenset([site.pk]))
    seen = None
    if not person.all_sites or site is not None or person.role == "bench":
        own = Site.objects.for_person(person)
        seen = frozenset(
            own.filter(pk=site.pk).values_list("pk", flat=True) if site else own.values_list("pk", flat=True)
        )
    return Scope(
        seen,
        costs=may(person, COSTS),
        all_people=may(person, PEOPLE),
        stock=may(person, STORES),
        orders=may(person, STOCK),
        bench=may(person, BENCH),
        redesigns=may(person, LIFE),
    )
