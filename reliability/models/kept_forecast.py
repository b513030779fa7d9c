"""Forecasts that somebody kept, to be held against what happened. They never change."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from django.conf import settings
from django.db import models

from fleet.models import Component, Site

if TYPE_CHECKING:
    from fleet.models import Person


class KeptForecastsNeverChange(TypeError):
    """Nothing in the program may change or take away a kept forecast; the database of a team refuses it as well."""


class KeptForecastQuerySet(models.QuerySet):
    def for_person(self, person: Person) -> KeptForecastQuerySet:
        """Whoever sees all sites sees every one; others those that count nothing but sites of theirs."""
        if not person.is_active:
            return self.none()
        if person.all_sites and person.role != "bench":
            return self
        theirs = Site.objects.for_person(person)
        elsewhere = KeptForecast.sites.through.objects.exclude(site__in=theirs).values("keptforecast")
        return self.filter(of_all_sites=False).exclude(pk__in=elsewhere)

    def update(self, **_: Any) -> int:
        raise KeptForecastsNeverChange("A kept forecast is never changed. Keep another one.")

    def delete(self) -> tuple[int, dict[str, int]]:
        raise KeptForecastsNeverChange("A kept forecast is never taken away.")


class KeptForecast(models.Model):
    """A question, the whole document that answered it, and what it was made with."""

    component = models.ForeignKey(Component, on_delete=models.PROTECT, related_name="kept_forecasts")
    begin = models.DateField()
    days = models.PositiveIntegerField()
    as_of = models.DateField()
    of_all_sites = models.BooleanField()
    sites = models.ManyToManyField(Site, related_name="+")  # empty where all are counted
    question = models.JSONField()
    document = models.JSONField()
    version = models.CharField(max_length=40)  # of the program
    data_version = models.BigIntegerField()
    note = models.CharField(max_length=500, blank=True, default="")
    made_by = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, related_name="+")
    made_at = models.DateTimeField(auto_now_add=True)

    objects = KeptForecastQuerySet.as_manager()

    class Meta:
        ordering = ["-made_at", "-id"]

    def __str__(self) -> str:
        return f"{self.component.title} from {self.begin:%Y-%m-%d}, kept {self.made_at:%Y-%m-%d}"

    def save(self, *args: Any, **kwargs: Any) -> None:
        if not self._state.adding:
            raise KeptForecastsNeverChange("A kept forecast is never changed. Keep another one.")
        super().save(*args, **kwargs)

    def delete(self, *args: Any, **kwargs: Any) -> tuple[int, dict[str, int]]:
        raise KeptForecastsNeverChange("A kept forecast is never taken away.")
