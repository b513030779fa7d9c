"""Where spares lie: at a depot, at a site, in a van."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from django.conf import settings
from django.db import models
from django.db.models import Q

from fleet.history import kept_history
from fleet.models.codes import Coded
from fleet.models.mixins import Versioned, fold
from fleet.models.site import Site

if TYPE_CHECKING:
    from fleet.models.person import Person

KEEPERS = ("administrator", "manager", "planner")


class StoreQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> StoreQuerySet:
        """Stores at sites of theirs and their own van; the office sees the vans of the crews of its sites too."""
        if person.role == "contact" or not person.is_active:
            return self.none()
        if person.all_sites and person.role != "bench":
            return self
        sites = Site.objects.for_person(person)
        seen = Q(site__in=sites.values("pk")) | Q(person=person)
        if person.role in KEEPERS:
            crews = person.sites.through.objects.filter(site__in=sites.values("pk")).values("person")
            seen |= Q(site=None, person__in=crews)
        return self.filter(seen)

    def own_of(self, person: Person) -> StoreQuerySet:
        """What somebody carries along."""
        return self.filter(person=person)


class Store(Coded, Versioned):
    """A shelf at a site, or what a person carries along; both may stay empty."""

    name = models.CharField(max_length=120, blank=True, default="")
    site = models.ForeignKey(Site, on_delete=models.PROTECT, null=True, blank=True, related_name="stores")
    person = models.ForeignKey(
        settings.AUTH_USER_MODEL, on_delete=models.PROTECT, null=True, blank=True, related_name="stores"
    )
    may_go_below_zero = models.BooleanField("may go below zero", default=False)
    folded = models.CharField(max_length=300, editable=False, default="")
    history = kept_history(excluded_fields=["folded"])

    objects = StoreQuerySet.as_manager()

    def save(self, *args: Any, **kwargs: Any) -> None:
        self.folded = fold(self.code, self.name)
        super().save(*args, **kwargs)

    @property
    def title(self) -> str:
        return self.name or self.code
