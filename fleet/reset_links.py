"""Links that let a person choose a password, made by a manager and handed over without mail; each works once."""

from __future__ import annotations

from django.contrib.auth.tokens import default_token_generator
from django.urls import reverse
from django.utils.encoding import force_bytes
from django.utils.http import urlsafe_base64_decode, urlsafe_base64_encode

from fleet.models import Person


def reset_path(person: Person) -> str:
    """The path of a fresh link; the caller puts the book's address before it."""
    link = {
        "uidb64": urlsafe_base64_encode(force_bytes(person.pk)),
        "token": default_token_generator.make_token(person),
    }
    return reverse("reset_password", kwargs=link)


def person_of_link(uidb64: str, token: str) -> Person | None:
    """Whose password the link may set: None once it was used, is too old or was never given."""
    try:
        key = int(urlsafe_base64_decode(uidb64).decode())
    except (ValueError, OverflowError):
        return None
    if not 0 < key < 2**63:
        return None
    person = Person.objects.filter(pk=key, is_active=True).first()
    return person if person and default_token_generator.check_token(person, token) else None
