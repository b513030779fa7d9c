"""Which rows are in the book already, equal or different, and which are named twice."""

from __future__ import annotations

from typing import Any

from fleet.models import Fitting
from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.links import differing_links
from fleet.transfer.staging import analyse, fetch, index_stage, quoted, run

NULLABLE_KEYS = {"position_id", "mode_id"}
VISIT_DAYS = {"fitted_visit_id": "fitted_on", "removed_visit_id": "removed_on"}
DIFFERENT = "differs from the book, which has {book}. Correct the file, or choose “update” to overwrite the book."
READING_STAYS = "differs from the book, which has {book}. A reading is never edited: strike it out and enter it again."
STAYS_FIXED = "cannot be changed from {book}: there are {what}. Enter a new one under another code."
STAYS_OUT = "was struck out in the book and stays so. Enter it anew under another code."


def strikeable(kind: FileKind) -> bool:
    return any(each.attname == "struck_out" for each in kind.model._meta.concrete_fields)


def named_struck(kind: FileKind) -> bool:
    return "struck_out" in kind.staged


def find_repeats(kind: FileKind, job: Job) -> None:
    """The same record named twice in one file. Struck-out readings may be alike."""
    if not kind.key:
        return
    keys = quoted(*kind.key)
    known = " AND ".join(f'"{name}" IS NOT NULL' for name in kind.key if name not in NULLABLE_KEYS)
    standing = " AND struck_out = ''" if kind.name == "readings" else ""
    repeated = fetch(
        f"SELECT row, first FROM (SELECT row, MIN(row) OVER (PARTITION BY {keys}) AS first FROM {kind.stage} "
        f"WHERE {known}{standing}) AS numbered WHERE row > first ORDER BY row"
    )
    words = " and ".join([", ".join(kind.key_columns[:-1]), kind.key_columns[-1]]).removeprefix(" and ")
    for row, first in repeated:
        message = f"repeats row {first}: each {words} may stand once. Delete one of the rows."
        job.say(kind, row, kind.key_columns[0], "", message)
    if repeated:
        run(
            f"UPDATE {kind.stage} SET bad = 1 WHERE row IN (SELECT row FROM (SELECT row, MIN(row) OVER "
            f"(PARTITION BY {keys}) AS first FROM {kind.stage} WHERE {known}{standing}) AS numbered WHERE row > first)"
        )


def match(kind: FileKind, job: Job) -> None:
    """Gives rows that the book holds the record's own number."""
    if not kind.key:
        return
    same = [
        f'COALESCE(book."{name}", 0) = COALESCE({kind.stage}."{name}", 0)'
        if name in NULLABLE_KEYS
        else f'book."{name}" = {kind.stage}."{name}"'
        for name in kind.key
    ]
    if strikeable(kind) and not named_struck(kind) and kind.key != ("code",):
        same.append("book.struck_out = ''")
    run(f"UPDATE {kind.stage} SET id = book.id FROM {kind.table} AS book WHERE {' AND '.join(same)}")
    index_stage(kind, "id")
    analyse(kind)
    take_from_book(kind, job)


def take_from_book(kind: FileKind, job: Job) -> None:
    """Columns that the file does not have keep what the book says."""
    present = set(job.present.get(kind.name, ()))
    absent = [name for name in kind.stored if name not in present and name not in kind.key and not is_made(name)]
    taken = [f'"{name}" = book."{name}"' for name in absent if name not in VISIT_DAYS]
    for visit, day in VISIT_DAYS.items():
        if visit in kind.stored:
            taken.append(
                f'"{visit}" = CASE WHEN {kind.stage}."{visit}" IS NULL AND {kind.stage}."{day}" IS NOT DISTINCT FROM '
                f'book."{day}" THEN book."{visit}" ELSE {kind.stage}."{visit}" END'
            )
    if taken:
        run(
            f"UPDATE {kind.stage} SET {', '.join(taken)} FROM {kind.table} AS book "
            f"WHERE book.id = {kind.stage}.id AND {kind.stage}.id > 0"
        )


def is_made(name: str) -> bool:
    """Made from the others, for each row anew."""
    return name in {"code_order", "folded", "happened_on", "all_sites"}


def compare(kind: FileKind, job: Job) -> None:
    """Marks rows that differ from the book; without “update” each difference is a problem."""
    if not kind.key:
        return
    columns = compared_columns(kind, job)
    rows = differing_rows(kind, columns, job)
    for row, differences in rows.items():
        for name, ours, book in differences:
            report_difference(kind, row, name, ours, book, job)
    differing = sorted(rows)
    for start in range(0, len(differing), 500):
        some = differing[start : start + 500]
        run(f"UPDATE {kind.stage} SET differs = 1 WHERE row IN ({', '.join(['%s'] * len(some))})", some)


def compared_columns(kind: FileKind, job: Job) -> list[str]:
    present = job.present.get(kind.name, ())
    chosen = [name for name in dict.fromkeys(present) if name in kind.stored and name not in kind.key]
    return chosen + (["all_sites"] if "linked" in present and "all_sites" in kind.stored else [])


def differing_rows(kind: FileKind, columns: list[str], job: Job) -> dict[int, list[tuple[str, Any, Any]]]:
    found: dict[int, list[tuple[str, Any, Any]]] = {}
    if columns:
        tests = [difference(name, job) for name in columns]
        chosen = ", ".join(f'({test}), mine."{name}", book."{name}"' for name, test in zip(columns, tests, strict=True))
        for row, *cells in fetch(
            f"SELECT mine.row, {chosen} FROM {kind.stage} AS mine JOIN {kind.table} AS book ON book.id = mine.id "
            f"WHERE mine.id > 0 AND mine.bad = 0 AND ({' OR '.join(tests)}) ORDER BY mine.row"
        ):
            triples = zip(columns, cells[0::3], cells[1::3], cells[2::3], strict=True)
            found[row] = [(name, ours, book) for name, differs, ours, book in triples if differs]
    if "linked" in job.present.get(kind.name, ()):
        for row, ours, book in differing_links(kind):
            found.setdefault(row, []).append(("linked", ours, book))
    return dict(sorted(found.items()))


def difference(name: str, job: Job) -> str:
    mine, book = f'mine."{name}"', f'book."{name}"'
    if name == "zone":  # a site without a zone of its own is in the book's
        own = job.known.book_zone.key.replace("'", "")
        mine, book = (f"COALESCE(NULLIF({side}, ''), '{own}')" for side in (mine, book))
    if name in VISIT_DAYS:  # an empty cell takes the visit that was made
        return f"{mine} IS NOT NULL AND {mine} IS DISTINCT FROM {book}"
    return f"{mine} IS DISTINCT FROM {book}"


def report_difference(kind: FileKind, row: int, name: str, ours: Any, book: Any, job: Job) -> None:
    if name == "all_sites":
        name, ours, book = "linked", "all" if ours else "a list", "all" if book else "a list"
    column = kind.column_of(name)
    words = {"value": readable(kind, name, ours, job), "book": f"“{readable(kind, name, book, job)}”"}
    if kind.name == "readings":
        job.say(kind, row, column, words["value"], READING_STAYS.format(**words))
    elif not job.update:
        job.say(kind, row, column, words["value"], DIFFERENT.format(**words))
    elif name == "struck_out" and book:
        job.say(kind, row, column, words["value"], STAYS_OUT)
    else:
        fixed = next((each.fixed for each in kind.columns if each.compared_as == name), "")
        if fixed and in_use(kind, row):
            job.say(kind, row, column, words["value"], STAYS_FIXED.format(what=fixed, **words))


def in_use(kind: FileKind, row: int) -> bool:
    if kind.name == "visits":
        return True
    column = {"positions": "position", "parts": "part", "modules": "module"}[kind.name]
    record = fetch(f"SELECT id FROM {kind.stage} WHERE row = %s", [row])[0][0]
    return Fitting.objects.filter(**{column: record}).exists()


def readable(kind: FileKind, name: str, value: Any, job: Job) -> str:
    """Codes instead of record numbers, yes and no, nothing for nothing."""
    if value is None or value == "":
        return "nothing"
    if name == "linked":
        return str(value)
    column = kind.field_of(name)
    if column.get_internal_type() == "BooleanField":
        return "yes" if value else "no"
    if not column.is_relation:
        return str(value)
    related: Any = column.related_model
    if value < 0:
        return new_code(related._meta.db_table, value, job)
    if not hasattr(related, "code"):
        return str(related._default_manager.filter(pk=value).first() or value)
    return str(related._default_manager.filter(pk=value).values_list("code", flat=True).first() or value)


def new_code(table: str, number: int, job: Job) -> str:
    """The code of a record that comes with the files."""
    kind = next(kind for kind in job.kinds if kind.table == table)
    if "code" not in kind.staged:
        return f"a new {kind.noun}"
    return str(fetch(f"SELECT code FROM {kind.stage} WHERE row = %s", [-number])[0][0])
