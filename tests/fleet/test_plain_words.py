"""No form speaks the form library's own words."""

from __future__ import annotations

import pytest
from django import forms


class Anything(forms.Form):
    hours = forms.FloatField(min_value=0.01, max_value=24)
    pieces = forms.IntegerField(min_value=1)
    cost = forms.DecimalField(max_digits=5, decimal_places=2)
    kind = forms.ChoiceField(choices=[("new", "new")])
    word = forms.CharField(max_length=3)


@pytest.mark.parametrize(
    ("field", "value", "words"),
    [
        ("hours", "30", "30 is too much. Enter at most 24."),
        ("hours", "0", "0 is too little. Enter 0.01 or more."),
        ("hours", "soon", "This is no number. Write it like 2.5."),
        ("pieces", "1.5", "This is no whole number. Write it like 12."),
        ("pieces", "", "This is empty, and it is needed. Enter it."),
        ("cost", "1.234", "This has more than 2 digits after the point. Round it."),
        ("kind", "", "Nothing is chosen here. Choose one of the list."),
        ("kind", "old", "This is not among the choices. Choose one of the list."),
        ("word", "four", "This has 4 characters. Shorten it to 3."),
        ("word", "a\x00", "There is a character in it that cannot be kept. Type it once more."),
    ],
)
def test_each_refusal_names_state_value_and_remedy(field: str, value: str, words: str) -> None:
    assert Anything({field: value}).errors[field] == [words]
