"""What the face of a counter said, and why it may lie below the last reading."""

from __future__ import annotations

import datetime as dt
import re
import uuid
from typing import Any

from django import forms
from django.core.exceptions import ValidationError

from fleet.actions.entries import CounterEntry
from fleet.actions.errors import CounterWentBack
from fleet.formats import long_day, number
from fleet.forms.choosing import TileField
from fleet.models import Restart
from fleet.models.reading import MOST_STROKES
from fleet.module_place import A_DAY, Standing

GROUPING = re.compile(r"[\s\u00a0\u2009\u202f'’]")
DIGITS = re.compile(r"[0-9]{1,20}\Z")
DECIMAL = re.compile(r"[0-9]{1,12}(?:[.,][0-9]{1,6})?\Z")
MOST_HOURS = 1e7
NEW, MISTYPED = "new counter", "mistyped"
FASTER, DAYS_MORE = 10, 30  # asked beyond ten times the usual pace, and never within a month's strokes
ANSWERS = [
    (NEW, "Yes, a new counter"),
    (Restart.ROLLED_OVER.value, "It rolled over its last digit"),
    (Restart.RESET.value, "It was set back to nought"),
    (MISTYPED, "No, I mistyped"),
]


class FaceField(forms.Field):
    """A number as it stands on a counter's face; spaces between thousands are no fault."""

    def __init__(self, *, whole: bool, most: float, words: str, **kwargs: Any) -> None:
        keyboard = {"inputmode": "numeric" if whole else "decimal", "autocomplete": "off", "enterkeyhint": "done"}
        kwargs.setdefault("widget", forms.TextInput(attrs=keyboard))
        super().__init__(**kwargs)
        self.whole, self.most, self.words = whole, most, words

    def to_python(self, value: Any) -> int | float | None:
        text = GROUPING.sub("", str(value if value is not None else ""))
        if not text:
            return None
        if not (DIGITS if self.whole else DECIMAL).match(text):
            told = text[:40].replace("\x00", "")
            kind = "digits only" if self.whole else "digits, with a point before the decimals"
            raise ValidationError(f"“{told}” is no number for {self.words}. Enter it with {kind}.")
        found = int(text) if self.whole else float(text.replace(",", "."))
        if found > self.most:
            raise ValidationError(f"{self.words.capitalize()} goes up to {number(self.most)}. Read it again.")
        return found


class CounterForm(forms.Form):
    """Strokes, hours and the answer to the question; the question shows once it has been asked."""

    strokes = FaceField(whole=True, most=MOST_STROKES, words="the counter", required=False, label="Counter, strokes")
    hours = FaceField(whole=False, most=MOST_HOURS, words="the hour meter", required=False, label="Hour meter, hours")
    restart = TileField(choices=ANSWERS, required=False, widget=forms.RadioSelect, label="Was the counter changed?")
    serial = forms.CharField(
        max_length=60, required=False, label="Serial number of the new counter", help_text="Empty: named after the day."
    )
    really = forms.BooleanField(required=False, label="The counter really shows this")
    question: str = ""
    standing: Standing | None = None  # of the module, for what is usual

    def clean(self) -> dict[str, Any]:
        cleaned = super().clean() or self.cleaned_data
        if self.question_due(cleaned):
            self.add_error("restart", "A counter was marked as changed, but no value was read. Enter what it shows.")
        return cleaned

    asks_really = False

    def check_leap(self, cleaned: dict[str, Any]) -> None:
        """Called once the time is known."""
        leap = "" if cleaned.get("really") or cleaned.get("restart") else self.leap(cleaned)
        if leap:
            self.add_error("strokes", leap)
            self.asks_really = True

    def leap(self, cleaned: dict[str, Any]) -> str:
        """The question where a counter seems to have run far faster than it does: usually a digit too many."""
        strokes, at = cleaned.get("strokes"), cleaned.get("instant")
        standing = self.standing
        if strokes is None or at is None or standing is None or not standing.pace or standing.reading is None:
            return ""
        last = standing.reading
        days = (at - last.read_at).total_seconds() / A_DAY
        if last.strokes is None or days < 0 or strokes - last.strokes <= standing.pace * max(FASTER * days, DAYS_MORE):
            return ""
        more, usual = strokes - last.strokes, standing.pace * days
        return (
            f"Counter {number(strokes)} is {number(more)} above the last reading {number(last.strokes)} of "
            f"{long_day(last.read_at.astimezone(standing.zone))}; about {number(usual, 0)} more were to be expected. "
            "Is a digit too many? Correct it, or tick that the counter really shows this."
        )

    @staticmethod
    def question_due(cleaned: dict[str, Any]) -> bool:
        answered = cleaned.get("restart") in {NEW, *Restart.values}
        return answered and cleaned.get("strokes") is None and cleaned.get("hours") is None

    def entry(self, day: dt.date, key: uuid.UUID) -> CounterEntry | None:
        """What to record; None where nothing was read. A nameless counter gets a name that a repeat gives again."""
        read = self.cleaned_data
        if read.get("strokes") is None and read.get("hours") is None:
            return None
        answer = read.get("restart") or ""
        name = (read.get("serial") or f"NEW-{day:%Y%m%d}-{key.hex[:4].upper()}") if answer == NEW else ""
        restarts = answer if answer in Restart.values else ""
        return CounterEntry(strokes=read.get("strokes"), hours=read.get("hours"), counter=name, restarts=restarts)

    def ask(self, error: CounterWentBack) -> None:
        """Shows the design's question beside the value, with its four answers."""
        self.question = error.message
        self.add_error(error.field if error.field in self.fields else None, error.message)

    @property
    def asks(self) -> bool:
        return bool(self.question or self.errors.get("restart") or self.data.get(self.add_prefix("restart")))
