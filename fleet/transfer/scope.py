"""What somebody may take out: all of the book, or what happened at some sites."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from django.db.models import Exists, OuterRef, Q, QuerySet

from fleet.models import Finding, Fitting, Module, Person, Placement, Reading, Site, Stop, Visit
from fleet.rights import COSTS, PEOPLE, may


@dataclass(frozen=True)
class Scope:
    """`sites` None means everywhere."""

    sites: frozenset[int] | None = None
    costs: bool = True
    all_people: bool = True

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

    def people(self) -> QuerySet[Person]:
        """Everybody for a manager; else those whom the records name."""
        if self.all_people and self.everywhere:
            return Person.objects.all()
        named = Q(pk__in=self.visits().values("crew")) | Q(pk__in=self.stops().values("reported_by"))
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
    return Scope(seen, costs=may(person, COSTS), all_people=may(person, PEOPLE))
