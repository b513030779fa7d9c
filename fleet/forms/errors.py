"""A refusal of an action, shown where the hand is."""

from __future__ import annotations

from django import forms

from fleet.actions.errors import RecordError


def add_record_error(form: forms.Form, error: RecordError) -> None:
    """On the field that the refusal names, where the form has it; else on the form as a whole."""
    for name, value in error.data.get("shown_now", {}).items():
        if name in form.fields:  # what was told counts as seen when the form is sent again
            form.data = form.data.copy()
            form.data[form.add_prefix(name)] = str(value)
    field = error.field if error.field in form.fields else None
    form.add_error(field, error.message)
