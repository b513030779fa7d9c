"""A store, new or changed."""

from __future__ import annotations

from typing import Any

from fleet.actions.base import change, sees
from fleet.actions.catalogue import Saving, only
from fleet.actions.errors import BadValue, NotAllowed
from fleet.formats import counted
from fleet.models import Person, StockBalance, Store
from fleet.rights import CATALOGUE

FIELDS = {"code", "name", "site", "person", "may_go_below_zero"}


def save_store(*, by: Person | None, store: Store | None = None, version: int | None = None, **fields: Any) -> Store:
    only(fields, FIELDS, "store")
    with change(by=by, right=CATALOGUE, raises_version=False):
        if store is not None and by is not None and not sees(by, store):
            raise NotAllowed(f"Store {store.code} is none of yours. Ask a planner of its site.")
        saving = Saving(Store, store, version, fields)
        stored: Store = saving.record
        if by is not None and stored.site is not None and not sees(by, stored.site):
            raise NotAllowed(f"Site {stored.site.code} is none of yours. Choose a site of yours.", field="site")
        if by is not None and not by.all_sites and stored.site is None and stored.person is None:
            raise BadValue("Without a site or a person you would not see this store. Choose one.", field="site")
        if saving.changes("may_go_below_zero") and not stored.may_go_below_zero and not saving.is_new:
            check_nothing_owed(stored)
        saving.store()
    return stored


def check_nothing_owed(store: Store) -> None:
    below = StockBalance.objects.filter(store=store, on_hand__lt=0).count()
    if below:
        raise BadValue(
            f"{counted(below, 'part lies', 'parts lie')} below zero at {store.title}. Count them first.",
            field="may_go_below_zero",
        )
