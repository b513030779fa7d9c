"""A module stands still, or runs again."""

from __future__ import annotations

import uuid
from typing import Any

from django import forms

from fleet.forms.instants import SiteTimeForm
from fleet.forms.log import EntryKeyField


class StopForm(SiteTimeForm):
    day_words, time_words = "Stands still since, day", "Time"

    entry_key = EntryKeyField()
    note = forms.CharField(
        max_length=4000,
        required=False,
        widget=forms.Textarea(attrs={"rows": 3}),
        label="What you saw or heard",
    )
    field_order = ["note", "day", "time"]

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["entry_key"].initial = uuid.uuid4()


class RunningForm(SiteTimeForm):
    day_words, time_words = "Running again since, day", "Time"
