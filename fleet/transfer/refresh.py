"""Makes a staged file known to the files after it."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from fleet.transfer.columns import FileKind
from fleet.transfer.known import UNCLEAR, Known, KnownJob, KnownModule, KnownPart, KnownPosition, KnownSite
from fleet.transfer.staging import as_day, fetch


def refresh(kind: FileKind, known: Known) -> None:
    if kind.name in READERS:
        READERS[kind.name](kind, known)


def rows(kind: FileKind, *columns: str) -> list[tuple[Any, ...]]:
    chosen = ", ".join(f'"{name}"' for name in columns)
    return fetch(f"SELECT {chosen} FROM {kind.stage} WHERE code IS NOT NULL ORDER BY row DESC")


def day(value: Any) -> Any:
    return None if value is None else as_day(value)


def sites(kind: FileKind, known: Known) -> None:
    for code, pk, kind_of, zone in rows(kind, "code", "id", "kind", "zone"):
        known.sites[code] = KnownSite(pk, kind_of == "depot", zone or "")


def people(kind: FileKind, known: Known) -> None:
    known.people.update(rows(kind, "code", "id"))


def components(kind: FileKind, known: Known) -> None:
    known.components.update(rows(kind, "code", "id"))
    known.clocks.update(rows(kind, "id", "clock"))


def modes(kind: FileKind, known: Known) -> None:
    known.modes.update({(component, code): pk for pk, component, code in rows(kind, "id", "component_id", "code")})


def types(kind: FileKind, known: Known) -> None:
    known.types.update(rows(kind, "code", "id"))


def positions(kind: FileKind, known: Known) -> None:
    for pk, module_type, code, component in rows(kind, "id", "type_id", "code", "component_id"):
        if module_type is not None:
            known.positions[module_type, code] = KnownPosition(pk, component or UNCLEAR)


def parts(kind: FileKind, known: Known) -> None:
    for code, pk, component, linked in rows(kind, "code", "id", "component_id", "linked"):
        fitting = frozenset(known.types[each] for each in (linked or "").split() if each in known.types)
        known.parts[code] = KnownPart(pk, component or UNCLEAR, fitting)


def redesigns(kind: FileKind, known: Known) -> None:
    known.redesigns.update(rows(kind, "code", "id"))


def modules(kind: FileKind, known: Known) -> None:
    for code, pk, module_type, built, scrapped in rows(kind, "code", "id", "type_id", "built_on", "scrapped_on"):
        known.modules[code] = KnownModule(pk, module_type or UNCLEAR, day(built), day(scrapped))


def placements(kind: FileKind, known: Known) -> None:
    staged = fetch(f"SELECT id, module_id, site_id, from_on, to_on FROM {kind.stage} ORDER BY row")
    matched = {pk for pk, *_ in staged if pk is not None and pk > 0}
    known.load_stays([(m, s, day(a), day(b)) for _, m, s, a, b in staged], matched)


def stores(kind: FileKind, known: Known) -> None:
    known.stores.update(rows(kind, "code", "id"))


def supply(kind: FileKind, known: Known) -> None:
    for pk, order, part in fetch(f"SELECT id, order_id, part_id FROM {kind.stage} ORDER BY row DESC"):
        if order is not None and part is not None:
            known.lines[order, part] = pk
    said = fetch(f"SELECT order_id, ordered_on FROM {kind.stage} WHERE order_id > 0")
    days = {order: day(ordered_on) for order, ordered_on in said}
    known.orders = {
        code: each._replace(ordered_on=days.get(each.id, each.ordered_on)) for code, each in known.orders.items()
    }


def bench(kind: FileKind, known: Known) -> None:
    columns = ("code", "id", "module_id", "received_on", "finished_on", "depot_id")
    for code, pk, module, received, finished, depot in rows(kind, *columns):
        if received is not None:
            known.jobs[code] = KnownJob(pk, module or UNCLEAR, day(received), day(finished), depot or UNCLEAR)
            known.jobs_by_id[pk] = known.jobs[code]


READERS: dict[str, Callable[[FileKind, Known], None]] = {
    "sites": sites,
    "people": people,
    "components": components,
    "modes": modes,
    "types": types,
    "positions": positions,
    "parts": parts,
    "redesigns": redesigns,
    "modules": modules,
    "placements": placements,
    "stores": stores,
    "supply": supply,
    "bench": bench,
}
