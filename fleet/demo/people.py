"""The demo's people. Their passwords are known to everybody and open only a book made by the demo."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True)
class DemoPerson:
    code: str
    name: str
    role: str
    sites: str
    password: str


PEOPLE: list[DemoPerson] = [
    DemoPerson("INES", "Ines Harrow", "manager", "all", "otter-under-weir-41"),
    DemoPerson("OTTO", "Otto Brandling", "planner", "all", "shelf-of-brass-27"),
    DemoPerson("BRAM", "Bram Tolley", "crew", "WITHY KESTREL QUOIN", "wet-gloves-again-63"),
    DemoPerson("NOOR", "Noor Castell", "crew", "OSIER MARL HERON TANK", "willow-boat-hook-18"),
    DemoPerson("SVEN", "Sven Aldous", "crew", "TERN SALTGRASS MILL-E MILL-W", "sand-in-thread-95"),
    DemoPerson("LUCA", "Luca Penrow", "crew", "BRACK FERNBECK LARCH", "trout-at-dawn-52"),
    DemoPerson("GRETA", "Greta Munday", "bench", "DEPOT-N DEPOT-S", "vice-and-reamer-30"),
    DemoPerson("WILF", "Wilf Danby", "bench", "DEPOT-N DEPOT-S", "scraper-and-shim-86"),
    DemoPerson("PILAR", "Pilar Voss", "contact", "TERN SALTGRASS", "tide-table-page-74"),
]


def rows() -> dict[str, list[dict[str, Any]]]:
    """People as a records file; passwords are no part of it."""
    return {
        "people": [
            {"person": each.code, "name": each.name, "role": each.role, "sites": each.sites, "active": "yes"}
            for each in PEOPLE
        ]
    }


def give_passwords() -> None:
    """Lets the demo's people sign in to the book that the demo made."""
    from fleet.models import Person

    for each in PEOPLE:
        person = Person.objects.get(code=each.code)
        person.made_by_demo = True
        person.set_password(each.password)
        person.save()


def people_with_demo_passwords() -> list[str]:
    """Codes of people who can still sign in with a password printed here."""
    from fleet.models import Person

    known = {each.code: each.password for each in PEOPLE}
    made = Person.objects.filter(made_by_demo=True, is_active=True)
    return [person.code for person in made if person.check_password(known.get(person.code, ""))]


def demo_people_table() -> str:
    """Who may sign in, for the one who started the demo; a changed password is not told."""
    still = set(people_with_demo_passwords())
    head = f"{'sign in as':<12}{'password':<24}{'role':<10}{'name':<18}sites"
    lines = [
        f"{each.code:<12}{each.password if each.code in still else '(changed)':<24}"
        f"{each.role:<10}{each.name:<18}{each.sites}"
        for each in PEOPLE
    ]
    return "\n".join([head, *lines])
