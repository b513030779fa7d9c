"""One visit in one submission: the sheet of a module, its positions, its counter, how it was left."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Sequence
from typing import Any

from django import forms
from django.core.exceptions import ValidationError

from fleet.actions.errors import CounterWentBack, RecordError
from fleet.formats import long_day
from fleet.forms.choosing import PickField, TileField
from fleet.forms.counter import CounterForm
from fleet.forms.errors import add_record_error
from fleet.forms.instants import DayField, SiteTimeForm, TimeOfDayField, instant_of
from fleet.forms.log_choices import LogChoices
from fleet.forms.log_position import REMOVALS, PositionForm
from fleet.models import FAILURE_REASONS, Left, Store

LEFT = [
    (Left.RUNNING.value, "Running"),
    (Left.STOPPED.value, "Stopped"),
    (Left.TO_BENCH.value, "To the bench"),
]
NO_SPARE = "no spare"
NO_STORE = "none"
# Where an action names a field by another word than the form does.
FIELD_WORDS = {
    "happened_at": "time",
    "restarts": "restart",
    "counter": "serial",
    "reason": "outcome",
    "position": "outcome",
    "finding": "outcome",
    "play_mm": "play",
    "caused_by": "cause",
    "caused_by_position": "cause",
    "stopped_at": "stood_time",
    "removed_on": "day",
    "fitted_on": "day",
    "strokes_at_fit": "strokes",
    "strokes_at_removal": "strokes",
}


class EntryKeyField(forms.UUIDField):
    """Made when the form is opened, kept when it comes back with errors: sent twice, recorded once."""

    widget = forms.HiddenInput(attrs={"autocomplete": "off"})
    default_error_messages = {
        "required": "The form has lost its entry key. Look at it once more and send it again.",
        "invalid": "The form has lost its entry key. Look at it once more and send it again.",
    }


class VisitForm(SiteTimeForm, CounterForm):
    """What holds for the whole visit."""

    entry_key = EntryKeyField()
    all_well = forms.BooleanField(required=False, label="All well, nothing changed")
    left = TileField(choices=LEFT, initial=Left.RUNNING.value, widget=forms.RadioSelect, label="How you leave it")
    stood_day = DayField(zone=dt.UTC, required=False, label="Had stood still since, day")
    stood_time = TimeOfDayField(required=False, label="Time")
    note = forms.CharField(
        max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 3}), label="Note on the visit"
    )

    def __init__(self, *args: Any, stores: Sequence[Store] = (), **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        if stores:
            self.fields["issue_from"] = PickField(
                [(store, store.title) for store in stores], nothing="Not from a store", nothing_value=NO_STORE,
                required=False, widget=forms.RadioSelect, initial=stores[0], label="New parts come from",
            )  # fmt: skip
        self.fields["stood_day"].zone = self.zone
        self.fields["entry_key"].initial = uuid.uuid4()

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean()
        cleaned["stopped_at"] = self.stood_since(cleaned)
        self.check_leap(cleaned)
        if "entry_key" in self.errors:
            self.data = self.data.copy()
            self.data["entry_key"] = str(uuid.uuid4())
        return cleaned

    def stood_since(self, cleaned: dict[str, Any]) -> dt.datetime | None:
        day, time, visited = cleaned.get("stood_day"), cleaned.get("stood_time"), cleaned.get("instant")
        if time and not day:
            self.add_error("stood_day", "On which day did it stop? Enter it, or clear the time.")
        if not day or not visited:
            return None
        try:
            since = instant_of(day, time or dt.time(), self.zone)
        except ValidationError as error:
            self.add_error("stood_time", error)
            return None
        if since > visited:
            self.add_error("stood_day", "It cannot have stopped after the visit. Enter an earlier time.")
            return None
        return since


class LogSheet:
    """The visit's form and a form a position: checked together, recorded by one action."""

    def __init__(self, choices: LogChoices, data: Any = None) -> None:
        self.choices = choices
        zone = choices.standing.zone
        self.no_spare = bool(data) and data.get("finish") == NO_SPARE
        self.visit = VisitForm(data, zone=zone, stores=choices.stores)
        self.visit.standing = choices.standing
        self.positions = [
            PositionForm(each, [other for other in choices.positions if other is not each], zone, data)
            for each in choices.positions
        ]

    def is_valid(self) -> bool:
        if not all([self.visit.is_valid(), *[form.is_valid() for form in self.positions]]):
            self.mark_loose_notes()
            return False
        day = self.visit.cleaned_data["day"]
        for form in self.positions:
            form.check_day_of_visit(day)
        self.mark_loose_notes()
        self.check_causes()
        self.check_something_said()
        return not any(form.errors for form in [self.visit, *self.positions])

    def mark_loose_notes(self) -> None:
        for form in self.positions:
            if not form.outcome_said and form.cleaned_data.get("note") and "outcome" not in form.errors:
                form.add_error("outcome", "What happened here? Choose it, or write the note on the whole visit.")

    def check_causes(self) -> None:
        came_out = {form.position for form in self.positions if form.outcome_said in REMOVALS}
        names = {form.position: form.name for form in self.positions}
        for form in self.positions:
            cause = form.cleaned_data.get("cause")
            if form.outcome_said == "taken with another" and cause and cause not in came_out:
                form.add_error(
                    "cause", f"No {names[cause]} came out in this visit. Say what happened there, or choose another."
                )

    def check_something_said(self) -> None:
        said = [form for form in self.positions if form.outcome_said]
        well = self.visit.cleaned_data.get("all_well")
        if said and well:
            names = ", ".join(form.name for form in said)
            self.visit.add_error("all_well", f"All well, yet something happened at {names}. Choose one of the two.")
        if self.no_spare and not any(form.reason in FAILURE_REASONS for form in said):
            self.visit.add_error(None, "Nothing failed in this entry, so no spare is missing. Choose what failed.")
        measured = any(form.cleaned_data.get("play") is not None for form in self.positions)
        if not (said or well or measured or self.visit.cleaned_data.get("note")):
            self.visit.add_error(None, "Nothing is said yet. Choose a position, or tick “All well”.")

    def entry(self, person: Any) -> dict[str, Any]:
        """The arguments of `log_visit`."""
        said = self.visit.cleaned_data
        left = Left.STOPPED if self.no_spare and said["left"] == Left.RUNNING else said["left"]
        said_at = [form for form in self.positions if form.outcome_said]
        return {
            "happened_at": said["instant"],
            "left": left,
            "crew": person if person.role in {"crew", "bench"} else None,
            "note": said["note"],
            "counter": self.visit.entry(said["day"], said["entry_key"]),
            "play": {
                form.position: form.cleaned_data["play"]
                for form in self.positions
                if form.cleaned_data["play"] is not None
            },
            "changes": [form.change(no_spare=self.no_spare) for form in said_at if form.changes_part],
            "findings": [form.finding() for form in said_at if not form.changes_part],
            "stopped_at": said["stopped_at"],
            "entry_key": said["entry_key"],
            "issue_from": said.get("issue_from"),
        }

    def add_error(self, error: RecordError) -> None:
        """Beside the field it speaks of: of the visit, of the position it names, or of the only position in hand."""
        if isinstance(error, CounterWentBack):
            self.visit.ask(error)
            return
        error.field = FIELD_WORDS.get(error.field, error.field)
        add_record_error(self.form_of(error), error)

    def form_of(self, error: RecordError) -> forms.Form:
        told = [form for form in self.positions if form.position.code == error.data.get("position")]
        in_hand = told or [form for form in self.positions if form.outcome_said]
        if len(in_hand) == 1 and error.field in in_hand[0].fields and (told or error.field not in self.visit.fields):
            return in_hand[0]
        return self.visit

    @property
    def visit_words(self) -> str:
        """`1 December 2026, 06:44`, as far as day and time are readable."""
        day, time = (self.visit[name].value() for name in ("day", "time"))
        if hasattr(self.visit, "cleaned_data"):
            day, time = (self.visit.cleaned_data.get(name) for name in ("day", "time"))
        told = long_day(day) if day else "day not said"
        return f"{told}, {time:%H:%M}" if time else f"{told}, time not said"

    @property
    def more_open(self) -> bool:
        """Whether something in the folded part of the visit was typed or is at fault."""
        names = {"day", "time", "stood_day", "stood_time", "note"}
        typed = any(self.visit[name].value() for name in ("stood_day", "stood_time", "note"))
        return typed or bool(names & set(self.visit.errors))

    @property
    def faults(self) -> list[str]:
        """Every error with the name of its place, for the summary at the top."""
        found = []
        for form in [self.visit, *self.positions]:
            where = f"{form.name}: " if isinstance(form, PositionForm) else ""
            for errors in form.errors.values():
                found.extend(f"{where}{error}" for error in errors)
        return found
