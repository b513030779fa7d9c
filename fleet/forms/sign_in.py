"""Signing in, and choosing a password."""

from __future__ import annotations

from typing import Any

from django import forms
from django.contrib.auth.forms import AuthenticationForm, PasswordChangeForm, SetPasswordForm

from fleet.models.codes import CODE_LENGTH, clean_code

WRONG = (
    "Code and password do not belong together. Try again; capitals count in the password. "
    "A manager can hand you a link to choose a new one."
)


class SignInForm(AuthenticationForm):
    """The code is cleaned first, so that the lock counts every spelling of one code together."""

    error_messages = {"invalid_login": WRONG, "inactive": WRONG}

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        code = self.fields["username"]
        code.label = "Your code"
        code.max_length = CODE_LENGTH
        code.widget.attrs.update(
            {"autofocus": True, "autocapitalize": "none", "spellcheck": "false", "maxlength": CODE_LENGTH}
        )
        self.fields["password"].label = "Password"
        self.fields["password"].max_length = 1000

    def clean_username(self) -> str:
        return clean_code(self.cleaned_data["username"])


def in_plain_words(form: forms.Form, labels: dict[str, str]) -> None:
    for name, label in labels.items():
        form.fields[name].label = label
    form.fields[
        "new_password1"
    ].help_text = "At least 10 characters, not a common password, not your name. A few words in a row are good."
    form.fields["new_password2"].help_text = ""


class NewPasswordForm(SetPasswordForm):
    error_messages = {"password_mismatch": "The two passwords differ. Type the same one twice."}

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        in_plain_words(self, {"new_password1": "New password", "new_password2": "The same again"})


class ChangePasswordForm(PasswordChangeForm):
    error_messages = {
        "password_mismatch": "The two new passwords differ. Type the same one twice.",
        "password_incorrect": "This is not your present password. Try again.",
    }

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        labels = {"old_password": "Present password", "new_password1": "New password"}
        in_plain_words(self, {**labels, "new_password2": "The new one again"})
