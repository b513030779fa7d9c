"""Ends every session of a person: a lost phone, or somebody who left."""

from __future__ import annotations

from fleet.actions.base import change, require
from fleet.actions.catalogue import opened
from fleet.models import Person
from fleet.rights import PEOPLE, SEE


def sign_out_everywhere(*, by: Person | None, person: Person) -> Person:
    """Anybody themselves, a manager anybody."""
    with change(by=by, right=SEE, raises_version=False):
        if by is not None and by.pk != person.pk:
            require(by, PEOPLE)
        person = opened(Person, person)
        person.sign_in_epoch += 1
        person.save()
    return person
