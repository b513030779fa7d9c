"""What lists can be narrowed by; choices are only what the person may see."""

from __future__ import annotations

from typing import Any

import django_filters
from django.db.models import Q, QuerySet

from fleet.models import Component, ModuleState, ModuleType, Part, PartState, Role, SiteKind


class SeenChoice(django_filters.ModelChoiceFilter):
    """A choice among the rows that the person may see."""

    def __init__(self, model: type, **kwargs: Any) -> None:
        self.model_seen = model
        kwargs.setdefault("to_field_name", "code")
        kwargs.setdefault("empty_label", "all")
        super().__init__(queryset=self.rows, **kwargs)

    def rows(self, request: Any) -> QuerySet[Any]:
        return request.seen(self.model_seen)


def folded(rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
    """Search on a folded column, one condition a word."""
    for word in value.casefold().split()[:8]:
        rows = rows.filter(**{f"{name}__contains": word})
    return rows


class SiteFilter(django_filters.FilterSet):
    q = django_filters.CharFilter(label="Name or code", field_name="folded", method=folded)
    kind = django_filters.ChoiceFilter(choices=SiteKind.choices, label="Kind", empty_label="all")


def module_words(rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
    """Part of a tag, or of the code or name of the site where it stands."""
    for word in value.split()[:8]:
        rows = rows.filter(
            Q(code__contains=word.upper())
            | Q(placements__to_on=None, placements__struck_out="", placements__site__folded__contains=word.casefold())
        )
    return rows.distinct()


def module_state(rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
    return rows.in_state(value)  # type: ignore[attr-defined]


class ModuleFilter(django_filters.FilterSet):
    q = django_filters.CharFilter(label="Tag or site", method=module_words)
    site = django_filters.CharFilter(label="Site code", field_name="now_site_code", lookup_expr="iexact")
    type = SeenChoice(ModuleType, field_name="type", label="Type")
    state = django_filters.ChoiceFilter(
        choices=ModuleState.choices, label="State", method=module_state, empty_label="all"
    )


class PartFilter(django_filters.FilterSet):
    q = django_filters.CharFilter(label="Number or name", field_name="folded", method=folded)
    component = SeenChoice(Component, field_name="component", label="Component")
    state = django_filters.ChoiceFilter(choices=PartState.choices, label="State", empty_label="all")

    class Meta:
        model = Part
        fields: list[str] = []


class PersonFilter(django_filters.FilterSet):
    q = django_filters.CharFilter(label="Name or code", method="words")
    role = django_filters.ChoiceFilter(choices=Role.choices, label="Role", empty_label="all")
    active = django_filters.ChoiceFilter(
        choices=[("yes", "may sign in"), ("no", "may not")], label="Sign-in", method="by_active", empty_label="all"
    )

    def words(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        for word in value.split()[:8]:
            rows = rows.filter(Q(code__contains=word.upper()) | Q(name__icontains=word))
        return rows

    def by_active(self, rows: QuerySet[Any], name: str, value: str) -> QuerySet[Any]:
        return rows.filter(is_active=value == "yes")
