"""people.csv: who signs in. Passwords are never in a file."""

from __future__ import annotations

from fleet.models import Person, Role
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import Known
from fleet.transfer.row import Row

ALL = "all"


def sites_or_all(text: str) -> tuple[str, ...]:
    return (ALL,) if text.strip().lower() == ALL else cells.codes(text)


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    row["name"] = row["name"] or row["code"]
    sites = row.get("linked") or ()
    row["all_sites"] = sites == (ALL,)
    for code in () if row["all_sites"] else sites:
        if code not in known.sites:
            row.say("sites", f"names site {code}, which is neither in the files nor in the book. Add it to sites.csv.")
    row["linked"] = "" if row["all_sites"] else " ".join(sites)


PEOPLE = FileKind(
    name="people",
    model=Person,
    noun="person",
    columns=(
        Column("person", "code", cells.code, required=True),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("role", "role", cells.one_of(*Role.values), required=True),
        Column("sites", "linked", sites_or_all, empty=()),
        Column("active", "is_active", cells.yes_no, empty=True),
    ),
    key=("code",),
    key_columns=("person",),
    derived=("code_order", "all_sites"),
    extra={"linked": "text"},
    finish=finish,
)
