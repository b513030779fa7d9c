"""What the Life screen can be asked; all of it stands in the address."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Any

from django import forms
from django.core.exceptions import ValidationError
from django.utils import timezone

from fleet.formats import long_day
from fleet.forms.record import DayInput
from fleet.models import Clock, Component, FailureMode, LifeSet, Part, Site, SiteKind
from fleet.models.codes import CODE_PATTERN, clean_code

GROUPINGS = [
    ("part", "part"),
    ("site", "site"),
    ("type", "module type"),
    ("quarter", "quarter fitted"),
    ("lot", "lot"),
    ("all", "all together"),
]
CONFIDENCES = [("0.8", "80 %"), ("0.9", "90 %"), ("0.95", "95 %"), ("0.99", "99 %")]
COMMON_CONFIDENCE = "0.95"
LONGEST_QUOTED = 60
NOT_A_CHOICE = "“%(value)s” is not among the choices. Choose one of the list."
NARROWING = ("site", "part", "mode", "set", "rigs", "worn")


@dataclass(frozen=True)
class Choices:
    """What there is to choose from, read once: a fixed number of queries whatever is chosen."""

    components: list[Component]
    component: Component | None
    sites: list[Site]
    parts: list[Part]
    modes: list[FailureMode]
    sets: list[LifeSet]
    of_others: dict[str, set[str]]  # codes in the address that belong to another component, by field

    @classmethod
    def seen(cls, request: Any, components: list[Component], component: Component | None) -> Choices:
        own = {"component": component}
        sets = request.seen(LifeSet).filter(lives__component=component).distinct() if component else []
        known = {
            "part": list(request.seen(Part).filter(**own)) if component else [],
            "mode": list(request.seen(FailureMode).filter(**own)) if component else [],
            "set": list(sets),
        }
        others: dict[str, set[str]] = {}
        for name, model in (("part", Part), ("mode", FailureMode), ("set", LifeSet)):
            strange = codes_in(request.GET, name) - {each.code for each in known[name]}
            found = request.seen(model).filter(code__in=strange).values_list("code", flat=True) if strange else ()
            others[name] = set(found)
        return cls(
            components=components,
            component=component,
            sites=list(request.seen(Site).exclude(kind=SiteKind.DEPOT)),
            parts=known["part"],
            modes=known["mode"],
            sets=known["set"],
            of_others=others,
        )


def codes_in(address: Any, name: str) -> set[str]:
    """What may be a code among the values of a field; anything else is refused by the form."""
    return {code for code in map(clean_code, address.getlist(name)) if CODE_PATTERN.match(code)}


class LifeForm(forms.Form):
    component = forms.ChoiceField()
    clock = forms.ChoiceField(required=False, label="Counted in")
    by = forms.ChoiceField(choices=GROUPINGS, required=False, label="Grouped by")
    as_of = DayInput(required=False, label="Records up to")
    confidence = forms.ChoiceField(choices=CONFIDENCES, required=False, label="How sure")
    part = forms.MultipleChoiceField(required=False, label="Only these parts", widget=forms.CheckboxSelectMultiple)
    site = forms.MultipleChoiceField(required=False, label="Only these sites", widget=forms.CheckboxSelectMultiple)
    mode = forms.MultipleChoiceField(
        required=False, label="If only these modes acted", widget=forms.CheckboxSelectMultiple
    )
    set = forms.ChoiceField(required=False, label="Lives from")
    worn = forms.ChoiceField(
        choices=[("", "failures"), ("withdrawn", "removals in good order")],
        required=False,
        label="Parts worn to the limit count as",
    )
    rigs = forms.BooleanField(required=False, label="Count test stands too")

    def __init__(self, data: Any, *, choices: Choices) -> None:
        super().__init__(_of_component(data, choices))
        component = choices.component
        for field in self.fields.values():
            field.error_messages["invalid_choice"] = NOT_A_CHOICE
        self.offer("component", [(each.code, each.title) for each in choices.components])
        own = component.clock if component else "its own clock"
        others = [(value, value) for value in Clock.values if component is None or value != component.clock]
        self.offer("clock", [("", own), *others])
        self.offer("site", [(each.code, each.title) for each in choices.sites])
        self.offer("part", [(each.code, each.title) for each in choices.parts])
        self.offer("mode", [(each.code, each.title) for each in choices.modes])
        self.offer("set", [("", "the fleet's records"), *((each.code, f"set {each.code}") for each in choices.sets)])
        known: dict[str, list[Any]] = {"site": choices.sites, "part": choices.parts, "mode": choices.modes}
        self.shown = {name for name, records in known.items() if len(records) > 1}
        if choices.sets:
            self.shown.add("set")

    def offer(self, name: str, choices: list[tuple[str, str]]) -> None:
        field: Any = self.fields[name]
        field.choices = choices

    def clean_as_of(self) -> dt.date | None:
        day: dt.date | None = self.cleaned_data["as_of"]
        if day is not None and day > timezone.localdate():
            raise ValidationError(f"{long_day(day)} has not come yet. Choose today or an earlier day.")
        return day

    def narrowed(self) -> list[str]:
        """Which of the choices that stand folded away are in use."""
        chosen = self.cleaned_data if self.is_valid() else {}
        return [name for name in NARROWING if chosen.get(name)]

    def question(self) -> dict[str, Any]:
        """The choices as arguments of `life_document`, beside the component."""
        asked = self.cleaned_data
        by = asked["by"] or "part"
        return {
            "clock": asked["clock"] or None,
            "by": None if by == "all" else by,
            "sites": sorted(asked.get("site") or []) or None,
            "parts": sorted(asked.get("part") or []) or None,
            "modes": sorted(asked.get("mode") or []) or None,
            "life_set": asked.get("set") or None,
            "as_of": asked["as_of"] or timezone.localdate(),
            "confidence": float(asked["confidence"] or COMMON_CONFIDENCE),
            "with_rigs": asked["rigs"],
            "worn_is_failure": asked["worn"] != "withdrawn",
        }


def quotable(value: str) -> str:
    """A message may quote it: bounded, and without what no page can hold."""
    return value[:LONGEST_QUOTED].replace("\0", "\N{REPLACEMENT CHARACTER}")


def _of_component(data: Any, choices: Choices) -> Any:
    """The address with the defaults filled in; parts and modes that went with another component fall away."""
    chosen = data.copy()
    for name, values in list(chosen.lists()):
        chosen.setlist(name, [quotable(value) for value in values])
    if choices.component is not None:
        chosen["component"] = choices.component.code
        if chosen.get("clock") == choices.component.clock:
            chosen["clock"] = ""
    chosen.setdefault("by", "part")
    if not chosen.get("confidence"):
        chosen["confidence"] = COMMON_CONFIDENCE
    for name in ("part", "mode", "set", "site"):
        codes = [clean_code(value) for value in chosen.getlist(name)]
        chosen.setlist(name, [code for code in codes if code not in choices.of_others.get(name, ())])
    return chosen
