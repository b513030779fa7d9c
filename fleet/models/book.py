"""Settings of the whole book (one row), and the version of its data."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from decimal import Decimal

from django.core.validators import MaxValueValidator, MinValueValidator
from django.db import models

from fleet.history import kept_history
from fleet.models.mixins import Versioned
from fleet.models.zones import validate_zone

_kept: ContextVar[dict[str, str] | None] = ContextVar("kept", default=None)


@contextmanager
def zone_read_once() -> Iterator[None]:
    """Inside (one request), the book's zone is read from the database once."""
    token = _kept.set({})
    try:
        yield
    finally:
        _kept.reset(token)


def book_zone() -> str:
    kept = _kept.get()
    if kept is None:
        return Book.load().zone
    if "zone" not in kept:
        kept["zone"] = Book.load().zone
    return kept["zone"]


class Book(Versioned):
    """One page of settings."""

    name = models.CharField(max_length=80, default="Halfnut")
    currency = models.CharField(max_length=3, default="EUR")
    zone = models.CharField(max_length=60, default="UTC", validators=[validate_zone])
    bench_target = models.PositiveIntegerField("modules the bench may have waiting", default=10)
    review_period_days = models.PositiveIntegerField("days between two orders", default=14)
    visit_cost = models.DecimalField(max_digits=10, decimal_places=2, default=Decimal(0))
    stop_cost_per_day = models.DecimalField(max_digits=10, decimal_places=2, default=Decimal(0))
    bench_hour_cost = models.DecimalField(max_digits=10, decimal_places=2, default=Decimal(0))
    service_level = models.FloatField(
        "wanted chance of not running out",
        default=0.95,
        validators=[MinValueValidator(0.5), MaxValueValidator(0.999)],
    )
    made_by_demo = models.BooleanField(default=False, editable=False)
    history = kept_history()

    class Meta:
        constraints = [models.CheckConstraint(condition=models.Q(pk=1), name="one_book")]

    def __str__(self) -> str:
        return self.name

    @classmethod
    def load(cls) -> Book:
        book = cls.objects.filter(pk=1).first()
        return book or cls.objects.get_or_create(pk=1)[0]


class DataVersion(models.Model):
    """Raised by every action that changes what estimates are made from; kept fits are keyed by it."""

    version = models.BigIntegerField(default=1)

    class Meta:
        constraints = [models.CheckConstraint(condition=models.Q(pk=1), name="one_data_version")]

    def __str__(self) -> str:
        return str(self.version)

    @classmethod
    def current(cls) -> int:
        return cls.objects.values_list("version", flat=True).filter(pk=1).first() or 0

    @classmethod
    def raise_version(cls) -> None:
        """Last in a transaction: the row is locked from here to the commit."""
        # no history: a counter
        if not cls.objects.filter(pk=1).update(version=models.F("version") + 1):
            cls.objects.get_or_create(pk=1)
