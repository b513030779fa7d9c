"""A person, new or changed: role, sites, whether they may sign in."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue, NotAllowed
from fleet.models import Person, Role
from fleet.rights import PEOPLE, may_manage

FIELDS = {"code", "name", "role", "all_sites", "sites", "is_active"}


def save_person(
    *, by: Person | None, person: Person | None = None, version: int | None = None, **fields: Any
) -> Person:
    """A new person chooses a password by a reset link; somebody shut out is signed out everywhere."""
    only(fields, FIELDS, "person")
    with change(by=by, right=PEOPLE, raises_version=False):
        saving = Saving(Person, person, version, fields)
        stored: Person = saving.record
        check_rank(saving, stored, by)
        check_sight(saving, stored, person, by)
        check_oneself(saving, stored, by)
        if saving.is_new:
            stored.set_unusable_password()
        if not saving.is_new and saving.changes("is_active", "role") and saving.changes_anything:
            stored.sign_in_epoch += 1
        saving.store()
    return stored


def check_rank(saving: Saving, person: Person, by: Person | None) -> None:
    roles = {person.role, saving.before.get("role") if not saving.is_new else None}
    if by is not None and by.role != Role.ADMINISTRATOR and Role.ADMINISTRATOR in roles:
        raise NotAllowed("Only an administrator makes or changes an administrator. Choose another role.", field="role")


def check_sight(saving: Saving, stored: Person, before: Person | None, by: Person | None) -> None:
    """Who sees some sites changes nobody who sees others, and gives nobody more than they see themselves."""
    if by is None or by.all_sites:
        return
    if before is not None and not may_manage(by, Person.objects.get(pk=before.pk)):
        raise NotAllowed(f"{before.name} sees sites that are none of yours. Ask a manager who sees all sites.")
    if stored.all_sites:
        raise NotAllowed("You see some sites, and hand out no others. Ask a manager who sees all.", field="all_sites")
    own = set(by.sites.values_list("pk", flat=True))
    if any(site.pk not in own for site in saving.lists.get("sites", ())):
        raise NotAllowed("One of these sites is none of yours. Choose among your own.", field="sites")


def check_oneself(saving: Saving, person: Person, by: Person | None) -> None:
    """Nobody locks the book behind themselves."""
    if saving.is_new or by is None or by.pk != person.pk:
        return
    for name in ("role", "is_active"):
        if saving.changes(name):
            raise BadValue("You cannot change this of your own. Ask another manager.", field=name)
