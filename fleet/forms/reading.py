"""The counter read by itself, without a visit."""

from __future__ import annotations

import uuid
from typing import Any

from fleet.forms.counter import CounterForm
from fleet.forms.instants import SiteTimeForm
from fleet.forms.log import EntryKeyField


class ReadingForm(SiteTimeForm, CounterForm):
    entry_key = EntryKeyField()

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["entry_key"].initial = uuid.uuid4()

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean()
        self.check_leap(cleaned)
        if not self.errors and cleaned.get("strokes") is None and cleaned.get("hours") is None:
            self.add_error("strokes", "Nothing was read. Enter what the counter or the hour meter shows.")
        return cleaned

    @property
    def faults(self) -> list[str]:
        return [str(error) for errors in self.errors.values() for error in errors]
