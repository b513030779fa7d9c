"""Taking a module in, what is done during a job, and the hours that there are."""

from __future__ import annotations

import datetime as dt
import uuid
from collections.abc import Iterable
from typing import Any, ClassVar

from django import forms
from django.utils import timezone

from fleet.actions.entries import PartChange
from fleet.forms.choosing import PickField, TileField
from fleet.forms.instants import DayField
from fleet.forms.log import EntryKeyField
from fleet.forms.record import DayInput, VersionField
from fleet.models import (
    BenchJob,
    Condition,
    Fitting,
    Module,
    Outcome,
    Part,
    Person,
    Position,
    RemovalReason,
    Site,
    Stage,
    Store,
)
from fleet.models.bench import MOST_HOURS_A_WEEK

OUTCOMES = [
    (Outcome.READY.value, "Ready: it goes to the pool"),
    (Outcome.WITHDRAWN.value, "Withdrawn: it leaves the bench unmended"),
    (Outcome.SCRAPPED.value, "Scrapped: the module ends here"),
]
CAME_OUT = [
    ("", "nothing came out"),
    (RemovalReason.FAILED.value, "failed"),
    (RemovalReason.WORN_TO_LIMIT.value, "worn to its limit"),
    (RemovalReason.PLANNED.value, "planned change"),
    (RemovalReason.TAKEN_WITH_ANOTHER.value, "taken with another part"),
    (RemovalReason.UPGRADE.value, "upgrade to another design"),
    (RemovalReason.NOT_KNOWN.value, "not known why"),
]


class TakeInForm(forms.Form):
    """`modules` are those that may come: on the way, in the pool, and for the office any that it sees."""

    entry_key = EntryKeyField()
    received_on = DayInput(required=False, label="Came on", help_text="Empty: today.")
    reason = forms.CharField(max_length=500, required=False, label="Why it came")
    bay = forms.CharField(max_length=40, required=False, label="Where in the depot")
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 3}))

    def __init__(
        self, *args: Any, modules: Iterable[tuple[Module, str]], depots: Iterable[Site], **kwargs: Any
    ) -> None:
        super().__init__(*args, **kwargs)
        self.fields["entry_key"].initial = uuid.uuid4()
        self.fields["module"] = PickField(modules, label="Module")
        places = [(depot, depot.title) for depot in depots]
        first = places[0][0] if places else None
        self.fields["depot"] = PickField(places, label="Depot", initial=first)
        self.order_fields(["module", "depot", "reason", "received_on", "bay", "note"])


class JobForm(forms.Form):
    """A form on a job's page; `version` holds it to what was seen."""

    def __init__(self, *args: Any, job: BenchJob, request: Any, **kwargs: Any) -> None:
        self.job, self.request = job, request
        super().__init__(*args, prefix=self.name, **kwargs)
        if "entry_key" in self.fields:
            self.fields["entry_key"].initial = uuid.uuid4()
        if "version" in self.fields:
            self.fields["version"].initial = job.version
        self.prepare()

    name: ClassVar[str] = ""

    def prepare(self) -> None:
        """Choices that depend on the job."""


class StageForm(JobForm):
    name = "stage"
    version = VersionField()
    stage = TileField(
        choices=[(stage.value, stage.value) for stage in Stage if stage != Stage.FINISHED],
        widget=forms.RadioSelect,
        label="Where it is",
    )

    def prepare(self) -> None:
        self.fields["stage"].initial = self.job.stage
        parts = self.request.seen(Part).fitting_type(self.job.module.type).order_by("code_order")
        self.fields["waits_for"] = PickField(
            [(part, part.title) for part in parts], nothing="no part named", required=False,
            label="Waits for, if for parts", initial=self.job.waits_for,
        )  # fmt: skip


class HoursForm(JobForm):
    name = "hours"
    entry_key = EntryKeyField()
    hours = forms.FloatField(min_value=0.01, max_value=24, label="Hours", help_text="Added to what is booked that day.")

    def prepare(self) -> None:
        zone = self.job.depot.tz
        self.fields["hours"].widget.attrs.update({"inputmode": "decimal", "step": "0.25"})
        self.fields["day"] = DayField(zone=zone, label="Day", initial=timezone.now().astimezone(zone).date())
        people = bench_people(self.request, self.job)
        own = self.request.user
        if len(people) > 1:
            words = [(person, person.name) for person in people]
            self.fields["person"] = PickField(words, label="Who worked", initial=own if own in people else None)


def bench_people(request: Any, job: BenchJob) -> list[Person]:
    """The office books for the technicians of the depot, a technician for themselves."""
    technicians = request.seen(Person).filter(role="bench", is_active=True).order_by("name")
    own = [request.user] if request.user.role == "bench" else []
    return list(dict.fromkeys([*own, *technicians, *([request.user] if not own else [])]))


class ChangeForm(JobForm):
    """A part changed on the bench, the new one from a store or not."""

    name = "change"
    entry_key = EntryKeyField()
    holds = forms.CharField(required=False, max_length=4000, widget=forms.HiddenInput)
    reason = forms.ChoiceField(choices=CAME_OUT, required=False, label="Why the old one came out")
    serial = forms.CharField(max_length=60, required=False, label="Serial number of the new part")
    lot = forms.CharField(max_length=60, required=False, label="Lot of the new part")
    condition = forms.ChoiceField(
        choices=[(Condition.NEW.value, "new"), (Condition.USED.value, "used")], required=False, label="The new part is"
    )
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 2}))

    def prepare(self) -> None:
        from fleet.forms.log_choices import log_choices

        choices = log_choices(self.request.seen, self.job.module)
        fields = self.fields
        fields["holds"].initial = " ".join(
            f"{each.position.pk}:{each.fitting.pk if each.fitting else 0}" for each in choices.positions
        )
        self.failed_on = {each.position.pk: each.failed_on for each in choices.positions}
        fields["position"] = PickField([(each.position, position_words(each)) for each in choices.positions],
                                       label="Position")  # fmt: skip
        modes = {mode.pk: (mode, f"{each.component.title}: {mode.title}")
                 for each in choices.positions for mode in each.modes}  # fmt: skip
        fields["mode"] = PickField(
            modes.values(), nothing="not known", required=False, label="How it failed, if it did"
        )
        parts = {part.pk: (part, part.title) for each in choices.positions for part in each.parts}
        fields["part"] = PickField(parts.values(), nothing="nothing, left empty", required=False, label="What went in")
        stores = [(store, store.title) for store in self.request.seen(Store).order_by("person", "code_order")]
        fields["store"] = PickField(stores, nothing="not from a store", required=False, label="Taken from",
                                    initial=shelf_of(stores, self.job))  # fmt: skip
        zone = self.job.depot.tz
        fields["day"] = DayField(zone=zone, label="Day", initial=timezone.now().astimezone(zone).date())
        self.order_fields(["position", "reason", "mode", "part", "store", "day", "serial", "lot", "condition", "note"])

    def seen(self, position: Position) -> int | None:
        """The fitting that stood in the position when the page was opened; what a refusal told is a number alone."""
        found = dict(each.rpartition(":")[::2] for each in self.cleaned_data["holds"].split())
        told = found.get(str(position.pk), found.get("", ""))
        return int(told) if told.isascii() and told.isdigit() and len(told) < 19 else None

    def sent(self) -> dict[str, Any]:
        """The arguments of `change_part_on_bench`."""
        said = self.cleaned_data
        failure = said["reason"] in {RemovalReason.FAILED, RemovalReason.WORN_TO_LIMIT}
        found = self.failed_on.get(said["position"].pk) if said["reason"] == RemovalReason.FAILED else None
        entry = PartChange(
            position=said["position"], reason=said["reason"], part=said["part"],
            mode=said["mode"] if failure or said["reason"] == RemovalReason.TAKEN_WITH_ANOTHER else None,
            failed_on=found if found and found <= said["day"] else None,
            serial=said["serial"] if said["part"] else "", lot=said["lot"] if said["part"] else "", note=said["note"],
            holds=self.seen(said["position"]),
        )  # fmt: skip
        return {"entry": entry, "day": said["day"], "store": said["store"] if said["part"] else None,
                "condition": said["condition"] or Condition.NEW, "entry_key": said["entry_key"]}  # fmt: skip


def position_words(choices: Any) -> str:
    fitting: Fitting | None = choices.fitting
    return f"{choices.name}: {fitting.part.code}" if fitting else f"{choices.name}: empty"


def shelf_of(stores: list[tuple[Store, str]], job: BenchJob) -> Store | None:
    return next((store for store, _ in stores if store.site_id == job.depot_id), None)


class UseForm(JobForm):
    """A part used on the job that sits in no position: grease, a gasket, a bolt."""

    name = "use"
    entry_key = EntryKeyField()
    quantity = forms.IntegerField(min_value=1, max_value=10_000, initial=1, label="How many")

    def prepare(self) -> None:
        parts = self.request.seen(Part).order_by("code_order")
        self.fields["part"] = PickField([(part, part.title) for part in parts], label="Part")
        stores = [(store, store.title) for store in self.request.seen(Store).order_by("person", "code_order")]
        self.fields["store"] = PickField(stores, label="Taken from", initial=shelf_of(stores, self.job))
        self.order_fields(["part", "quantity", "store"])


class FinishForm(JobForm):
    name = "finish"
    version = VersionField()
    outcome = TileField(choices=OUTCOMES, widget=forms.RadioSelect, label="How it ends")
    sure = forms.BooleanField(required=False, label="Yes, scrap the module: all its parts count as withdrawn")
    note = forms.CharField(max_length=4000, required=False, widget=forms.Textarea(attrs={"rows": 2}))

    def prepare(self) -> None:
        zone = self.job.depot.tz
        self.fields["finished_on"] = DayField(zone=zone, label="Day", initial=timezone.now().astimezone(zone).date())
        self.order_fields(["outcome", "sure", "finished_on", "note"])

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        if cleaned.get("outcome") == Outcome.SCRAPPED and not cleaned.get("sure"):
            self.add_error("sure", "Scrapping ends the module for good. Tick this if that is meant.")
        return cleaned


class CapacityForm(forms.Form):
    first_week = DayInput(label="From the week of", help_text="Any day of it.")
    last_week = DayInput(required=False, label="To the week of", help_text="Empty: that week only.")
    hours = forms.FloatField(min_value=0, max_value=MOST_HOURS_A_WEEK, label="Hours in a whole week")
    closed_days = forms.CharField(
        required=False, max_length=2000, label="Closed days among them",
        help_text="Like 2026-12-24, 2026-12-25. Each working day takes a fifth off its week.",
    )  # fmt: skip
    note = forms.CharField(max_length=200, required=False, help_text="Like “holidays”, “second shift”.")

    def clean_closed_days(self) -> list[dt.date]:
        days = []
        for word in self.cleaned_data["closed_days"].replace(",", " ").replace(";", " ").split():
            try:
                days.append(dt.date.fromisoformat(word))
            except ValueError:
                raise forms.ValidationError(f"“{word[:40]}” is no day. Write it like 2026-12-24.") from None
        return days
