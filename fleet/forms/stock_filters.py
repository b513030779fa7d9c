"""What the lists of stock, moves, supply orders and bench jobs can be narrowed by."""

from __future__ import annotations

from typing import Any

import django_filters
from django import forms
from django.db.models import F, Q, QuerySet
from django.utils import timezone

from fleet.forms.filters import SeenChoice, folded
from fleet.models import BenchJob, Component, MoveKind, Outcome, Part, Site, Stage, StockMove, SupplyLine
from fleet.models.codes import clean_code

DAY = forms.DateInput(attrs={"type": "date"}, format="%Y-%m-%d")


class StockFilter(django_filters.FilterSet):
    q = django_filters.CharFilter(label="Number or name", field_name="folded", method=folded)
    component = SeenChoice(Component, field_name="component", label="Component")
    shows = django_filters.ChoiceFilter(
        label="Which",
        method="which",
        empty_label="kept or due",
        choices=[("short", "below minimum"), ("due", "on order"), ("every", "every part")],
    )

    class Meta:
        model = Part
        fields: list[str] = []

    def which(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        if value == "short":
            return rows.filter(Q(on_hand__lt=F("minimum")) | Q(on_hand__lt=0))
        return rows.filter(due__gt=0) if value == "due" else rows

    def filter_queryset(self, queryset: QuerySet[Any]) -> QuerySet[Any]:
        from fleet.stock import kept_parts

        rows = super().filter_queryset(queryset)
        return rows if self.form.cleaned_data.get("shows") else kept_parts(rows)


class SeenStockFilter(django_filters.FilterSet):
    """For those who see some of the stores: what lies there, or any part."""

    q = django_filters.CharFilter(label="Number or name", field_name="folded", method=folded)
    component = SeenChoice(Component, field_name="component", label="Component")
    shows = django_filters.ChoiceFilter(
        label="Which", method="which", empty_label="what lies here", choices=[("every", "every part")]
    )

    class Meta:
        model = Part
        fields: list[str] = []

    def which(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows

    def filter_queryset(self, queryset: QuerySet[Any]) -> QuerySet[Any]:
        rows = super().filter_queryset(queryset)
        return rows if self.form.cleaned_data.get("shows") else rows.exclude(on_hand=0)


class MoveFilter(django_filters.FilterSet):
    store = django_filters.CharFilter(label="Store code", method="at_store")
    part = django_filters.CharFilter(label="Part number", method="of_part")
    kind = django_filters.ChoiceFilter(choices=MoveKind.choices, label="Kind", empty_label="all")
    begin = django_filters.DateFilter(label="From", field_name="happened_on", lookup_expr="gte", widget=DAY)
    until = django_filters.DateFilter(label="Until", field_name="happened_on", lookup_expr="lte", widget=DAY)

    class Meta:
        model = StockMove
        fields: list[str] = []

    def at_store(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        code = clean_code(value)
        return rows.filter(Q(store__code=code) | Q(other_store__code=code))

    def of_part(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows.filter(part__code=clean_code(value))


class SupplyFilter(django_filters.FilterSet):
    order = django_filters.CharFilter(label="Order or supplier", method="words")
    part = django_filters.CharFilter(label="Part number", method="of_part")
    shows = django_filters.ChoiceFilter(
        label="Which",
        method="which",
        empty_label="still to come",
        choices=[("late", "overdue"), ("every", "all lines")],
    )

    class Meta:
        model = SupplyLine
        fields: list[str] = []

    def words(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows.filter(Q(order__code__contains=clean_code(value)) | Q(order__supplier__icontains=value.strip()))

    def of_part(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows.filter(part__code=clean_code(value))

    def which(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows.filter(due__gt=0, due_on__lt=timezone.localdate()) if value == "late" else rows

    def filter_queryset(self, queryset: QuerySet[Any]) -> QuerySet[Any]:
        rows = super().filter_queryset(queryset)
        return rows if self.form.cleaned_data.get("shows") else rows.filter(due__gt=0)


class DeliveryFilter(django_filters.FilterSet):
    part = django_filters.CharFilter(label="Part number", method="of_part")
    supplier = django_filters.CharFilter(label="Supplier", field_name="line__order__supplier", lookup_expr="icontains")

    class Meta:
        model = StockMove
        fields: list[str] = []

    def of_part(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows.filter(part__code=clean_code(value))


class JobFilter(django_filters.FilterSet):
    module = django_filters.CharFilter(label="Module", method="of_module")
    depot = SeenChoice(Site, field_name="depot", label="Depot")
    stage = django_filters.ChoiceFilter(choices=Stage.choices, label="Stage", empty_label="all")
    outcome = django_filters.ChoiceFilter(choices=Outcome.choices, label="Outcome", empty_label="all")

    class Meta:
        model = BenchJob
        fields: list[str] = []

    def of_module(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows.filter(module__code__contains=clean_code(value))
