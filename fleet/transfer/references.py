"""References to records of the same file: the part that a part supersedes, the fitting that broke a fitting."""

from __future__ import annotations

from typing import Any

from fleet.models import Role
from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.staging import as_day, fetch, index_stage, run


def resolve(kind: FileKind, code: str, target: str, column: str, words: str, job: Job) -> None:
    """Looks a staged code up in the file first, then in the book."""
    index_stage(kind, "code")
    run(
        f'UPDATE {kind.stage} SET "{target}" = COALESCE('
        f"(SELECT MAX(other.id) FROM {kind.stage} AS other WHERE other.code = {kind.stage}.{code}), "
        f"(SELECT book.id FROM {kind.table} AS book WHERE book.code = {kind.stage}.{code})) WHERE {code} IS NOT NULL"
    )
    for row, value in fetch(
        f'SELECT row, {code} FROM {kind.stage} WHERE {code} IS NOT NULL AND "{target}" IS NULL ORDER BY row'
    ):
        job.say(
            kind, row, column, value, f"is no {words} in the file or the book. Correct the code, or leave it empty."
        )


def check_supersession(kind: FileKind, job: Job) -> None:
    """A part supersedes one of its own component, and no chain leads back to itself."""
    resolve(kind, "supersedes_code", "supersedes_id", "supersedes", "part", job)
    chain = dict(fetch(f"SELECT id, supersedes_id FROM {kind.stage} WHERE supersedes_id IS NOT NULL"))
    for row, pk, code, mine, staged, book in fetch(
        f"SELECT mine.row, mine.id, mine.supersedes_code, mine.component_id, other.component_id, book.component_id "
        f"FROM {kind.stage} AS mine LEFT JOIN {kind.stage} AS other ON other.id = mine.supersedes_id "
        f"LEFT JOIN {kind.table} AS book ON book.id = mine.supersedes_id "
        "WHERE mine.supersedes_id IS NOT NULL AND mine.bad = 0 ORDER BY mine.row"
    ):
        if (staged or book) not in {None, mine}:
            job.say(kind, row, "supersedes", code, "is of another component. Name a part of the same component.")
        elif leads_back(pk, chain):
            job.say(kind, row, "supersedes", code, "leads back to this part. A part cannot come before itself.")


def leads_back(start: int, chain: dict[int, int]) -> bool:
    step, seen = chain.get(start), {start}
    while step is not None:
        if step == start:
            return True
        if step in seen:
            return False
        seen.add(step)
        step = chain.get(step)
    return False


CAUSES = """
SELECT mine.row, mine.id, mine.caused_by_code, mine.module_id, mine.fitted_on, mine.removed_on,
       COALESCE(other.module_id, book.module_id), COALESCE(other.struck_out, book.struck_out),
       COALESCE(other.fitted_on, book.fitted_on),
       CASE WHEN other.id IS NULL THEN book.removed_on ELSE other.removed_on END
FROM stage_fittings AS mine
LEFT JOIN stage_fittings AS other ON other.id = mine.caused_by_id
LEFT JOIN fleet_fitting AS book ON book.id = mine.caused_by_id
WHERE mine.caused_by_id IS NOT NULL AND mine.bad = 0 AND mine.struck_out = ''
ORDER BY mine.row
"""


def check_causes(kind: FileKind, job: Job) -> None:
    """The part that broke another stood in the same module at the same time."""
    resolve(kind, "caused_by_code", "caused_by_id", "caused_by", "fitting", job)
    chain = dict(fetch("SELECT id, caused_by_id FROM stage_fittings WHERE caused_by_id IS NOT NULL"))
    if not chain:
        return
    for row, pk, code, module, fitted, removed, its_module, struck, its_fitted, its_removed in fetch(CAUSES):
        if module != its_module or struck:
            job.say(
                kind, row, "caused_by", code, "is no standing fitting of this module. Name another, or leave it empty."
            )
        elif leads_back(pk, chain):
            job.say(kind, row, "caused_by", code, "would have been broken by this part in turn. Name another cause.")
        elif before(its_removed, fitted) or before(removed, its_fitted):
            job.say(kind, row, "caused_by", code, "was not in the module together with this part. Name another cause.")


def before(end: Any, start: Any) -> bool:
    return end is not None and start is not None and as_day(end) < as_day(start)


RANKS = """
SELECT mine.row, mine.role, mine.is_active, mine.name, mine.all_sites, book.id, book.role, book.is_active, book.name,
       book.all_sites
FROM stage_people AS mine LEFT JOIN fleet_person AS book ON book.id = mine.id
WHERE mine.bad = 0 ORDER BY mine.row
"""


def check_ranks(kind: FileKind, job: Job) -> None:
    """As on the page of people: a manager makes and changes no administrator, and nobody locks themselves out."""
    by = job.person
    if by is None:
        return
    for row, role, active, name, everywhere, pk, role_now, active_now, name_now, everywhere_now in fetch(RANKS):
        said = (role, bool(active), name, bool(everywhere))
        now = (role_now, bool(active_now), name_now, bool(everywhere_now))
        if pk is not None and said == now:
            continue
        if by.role != Role.ADMINISTRATOR and Role.ADMINISTRATOR in (role, role_now):
            job.say(kind, row, "role", role, "is made and changed by an administrator only. Leave this row out.")
        elif pk == by.pk and said[:2] != now[:2]:
            job.say(kind, row, "role", role, "would change what you may do yourself. Ask another manager.")
