"""What was found and done at one position of the module."""

from __future__ import annotations

import datetime as dt
from typing import Any

from django import forms
from django.core.validators import MaxValueValidator, MinValueValidator

from fleet.actions.entries import FindingEntry, PartChange
from fleet.formats import long_day
from fleet.forms.choosing import PickField, TileField
from fleet.forms.instants import DayField
from fleet.forms.log_choices import PositionChoices
from fleet.models import FAILURE_REASONS, FoundBy, FoundKind, RemovalReason

FITTED = "fitted"
FAILED_IN_PLACE = "failed in place"
CAME_OUT = [
    (RemovalReason.FAILED.value, "Failed"),
    (RemovalReason.WORN_TO_LIMIT.value, "Worn to its limit"),
    (RemovalReason.PLANNED.value, "Planned change"),
    (RemovalReason.TAKEN_WITH_ANOTHER.value, "Taken with another part"),
    (RemovalReason.UPGRADE.value, "Upgrade to another design"),
    (RemovalReason.MODULE_WITHDRAWN.value, "Module withdrawn"),
    (RemovalReason.NOT_KNOWN.value, "Not known why"),
]
STAYS_IN = [
    (FoundKind.ADJUSTED.value, "Adjusted"),
    (FoundKind.CLEANED.value, "Cleaned"),
    (FAILED_IN_PLACE, "Failed, stays in for now"),
    (FoundKind.NOTHING.value, "Nothing found"),
]
EMPTY = [(FITTED, "A part went in"), (FoundKind.CLEANED.value, "Cleaned"), (FoundKind.NOTHING.value, "Nothing found")]
REMOVALS = {value for value, _ in CAME_OUT}
WITH_MODE = {*FAILURE_REASONS, RemovalReason.TAKEN_WITH_ANOTHER, RemovalReason.NOT_KNOWN, FAILED_IN_PLACE}
ASKS_MODE = {*FAILURE_REASONS, FAILED_IN_PLACE}
DETAILS = {"failed_on", "last_good_on", "found_by", "serial", "lot", "age_at_fit", "play", "note"}
BY_AGE, LOOKED_WORN = "age", "worn"
UNSAID = "not known"
MOST_AGE = 1e12


class PositionForm(forms.Form):
    """Fields that do not belong to the chosen outcome are passed over, not refused: a phone may have hidden them."""

    holds = forms.IntegerField(required=False, min_value=0, max_value=2**62, widget=forms.HiddenInput)
    outcome = TileField(required=False, widget=forms.RadioSelect, label="What happened?")
    because = TileField(
        choices=[(BY_AGE, "By its age"), (LOOKED_WORN, "It looked worn")],
        required=False,
        widget=forms.RadioSelect,
        label="Why was it changed?",
    )
    serial = forms.CharField(max_length=60, required=False, label="Serial number of the new part")
    lot = forms.CharField(max_length=60, required=False, label="Lot of the new part")
    age_at_fit = forms.FloatField(
        required=False, validators=[MinValueValidator(0), MaxValueValidator(MOST_AGE)], label="Age of a used part"
    )
    found_by = TileField(required=False, choices=[("", "not said"), *FoundBy.choices], label="Found by")
    play = forms.FloatField(
        required=False, validators=[MinValueValidator(0), MaxValueValidator(1000)], label="Measured play, mm"
    )
    note = forms.CharField(
        max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 2}), label="Note on this position"
    )

    def __init__(self, choices: PositionChoices, others: list[PositionChoices], zone: Any, data: Any = None) -> None:
        super().__init__(data, prefix=f"p{choices.position.pk}")
        self.choices, self.position, self.name = choices, choices.position, choices.name
        fields = self.fields
        fields["holds"].initial = choices.fitting.pk if choices.fitting else 0
        fields["outcome"].choices = [*CAME_OUT, *STAYS_IN] if choices.fitting else EMPTY
        fields["outcome"].error_messages["invalid_choice"] = self.unknown_outcome()
        fields["mode"] = PickField(
            [(mode, mode.title) for mode in choices.modes],
            nothing="Not known",
            nothing_value=UNSAID,
            required=False,
            widget=forms.RadioSelect,
            label="How did it fail?",
        )
        fields["cause"] = PickField(
            [(other.position, other.name) for other in others],
            nothing="Not known, or an earlier failure",
            nothing_value=UNSAID,
            required=False,
            widget=forms.RadioSelect,
            label="Which part took it along?",
        )
        fields["part"] = PickField(
            [(part, part_words(part, choices.carried.get(part.pk))) for part in choices.parts],
            nothing="Nothing, left empty",
            required=False,
            initial=choices.likely,
            label="What went in?",
        )
        fields["failed_on"] = DayField(
            zone=zone, required=False, label="Failed on another day", initial=choices.failed_on
        )
        fields["last_good_on"] = DayField(zone=zone, required=False, label="Last seen working on")
        fields["age_at_fit"].label = f"Age of a used part, {choices.component.clock}"
        fields["age_at_fit"].help_text = "Empty counts as new."

    def unknown_outcome(self) -> str:
        if self.choices.fitting is None:
            return "No part is fitted here now, so none came out. Somebody may have logged it a moment ago: look again."
        return "A part is fitted here already. Somebody may have logged it a moment ago: say what came out, and why."

    @property
    def outcome_said(self) -> str:
        return self.cleaned_data.get("outcome", "") if hasattr(self, "cleaned_data") else ""

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        unsaid = not cleaned.get("because") and "because" not in self.errors
        if cleaned.get("outcome") == RemovalReason.PLANNED and unsaid:
            self.add_error("because", "By its age, or because it looked worn? Choose one: they count differently.")
        if self.reason in FAILURE_REASONS:
            self.clean_days(cleaned)
        if self.outcome_said == FITTED and not cleaned.get("part") and "part" not in self.errors:
            self.add_error("part", "A part went in, but which one? Choose it.")
        self.clean_upgrade(cleaned)
        return cleaned

    def clean_upgrade(self, cleaned: dict[str, Any]) -> None:
        """The same design again is no upgrade; as one it would count as a step of a rollout."""
        fitting, part = self.choices.fitting, cleaned.get("part")
        if self.outcome_said == RemovalReason.UPGRADE and fitting and part == fitting.part:
            same = f"{part.code} came out and {part.code} went in: that is no upgrade."
            self.add_error("part", f"{same} Choose the new design, or another reason.")

    def clean_days(self, cleaned: dict[str, Any]) -> None:
        """Failed and last good, against the day the part went in."""
        failed, good = cleaned.get("failed_on"), cleaned.get("last_good_on")
        fitted = self.choices.fitting.fitted_on if self.choices.fitting else None
        for name, day in (("failed_on", failed), ("last_good_on", good)):
            if day and fitted and day < fitted:
                self.add_error(name, f"It was fitted on {long_day(fitted)}. Enter a day from then on.")
        if failed and good and good > failed:
            self.add_error("last_good_on", f"It failed on {long_day(failed)}. Enter a day up to then.")

    def check_day_of_visit(self, day: dt.date) -> None:
        """What can only be judged once the day of the visit is known."""
        for name in ("failed_on", "last_good_on"):
            said = self.cleaned_data.get(name)
            if said and said > day and self.reason in FAILURE_REASONS:
                self.add_error(name, f"The visit was on {long_day(day)}. Enter a day up to then.")
        fitting = self.choices.fitting
        if fitting and fitting.fitted_on and fitting.fitted_on > day and self.outcome_said in REMOVALS:
            self.add_error(
                "outcome", f"This part was fitted on {long_day(fitting.fitted_on)}, after the visit of {long_day(day)}."
            )

    @property
    def has_detail_faults(self) -> bool:
        """Whether a fault lies in the folded part of the form."""
        return bool(
            {"failed_on", "last_good_on", "found_by", "serial", "lot", "age_at_fit", "play", "note"} & set(self.errors)
        )

    @property
    def reason(self) -> str:
        """The removal reason to record; what looked worn counts as worn to its limit."""
        said = self.outcome_said
        if said == RemovalReason.PLANNED and self.cleaned_data.get("because") == LOOKED_WORN:
            return RemovalReason.WORN_TO_LIMIT
        return said if said in REMOVALS else ""

    @property
    def has_mode(self) -> bool:
        return self.outcome_said in WITH_MODE

    @property
    def changes_part(self) -> bool:
        return self.outcome_said in REMOVALS or self.outcome_said == FITTED

    def change(self, *, no_spare: bool) -> PartChange:
        said, reason = self.cleaned_data, self.reason
        failure = reason in FAILURE_REASONS
        part = None if no_spare and failure else said["part"]
        return PartChange(
            position=self.position,
            reason=reason,
            mode=said["mode"] if self.has_mode else None,
            found_by=said["found_by"] if failure else "",
            failed_on=said["failed_on"] if failure else None,
            last_good_on=said["last_good_on"] if failure else None,
            part=part,
            serial=said["serial"] if part else "",
            lot=said["lot"] if part else "",
            age_at_fit=(said["age_at_fit"] or 0) if part else 0,
            caused_by_position=said["cause"] if reason == RemovalReason.TAKEN_WITH_ANOTHER else None,
            note=said["note"],
            holds=said["holds"],
        )

    def finding(self) -> FindingEntry:
        said = self.cleaned_data
        kind = FoundKind.FAILED if self.outcome_said == FAILED_IN_PLACE else self.outcome_said
        mode = said["mode"] if self.outcome_said == FAILED_IN_PLACE else None
        return FindingEntry(position=self.position, finding=kind, mode=mode, note=said["note"])


def part_words(part: Any, carried: int | None = None) -> str:
    """`N3 nut with wiper lip`, its state where it is not the current one, and how many the person carries along."""
    with_you = f"{part.code}, {carried} with you: {part.name}".removesuffix(": ")
    said = with_you if carried else part.title
    return said if part.state == "current" else f"{said} ({part.state})"
