"""The demo's sites. Names, places and figures are invented."""

from __future__ import annotations

from dataclasses import dataclass

Row = dict[str, object]


@dataclass(frozen=True)
class Place:
    """A site and its habits."""

    code: str
    name: str
    kind: str = "field"
    zone: str = "Europe/Amsterdam"
    share: float = 1.0  # of the modules
    strokes_per_day: float = 520
    sandy: bool = False
    reports_at_once: bool | None = True
    visit_every: int | None = 28
    crew: str = "BRAM"
    records_late_by: int = 0  # days after the first module stood here
    rollout: str = "failure"  # the new nut: "plan", "failure" or "" (not yet)
    planned_age: int = 0  # nuts changed by age at visits, in days
    counters_swapped: bool = False
    site_factor: float = 1.0  # what nobody wrote down: water, hands


PLACES: list[Place] = [
    Place("WITHY", "Withy Lock", share=1.3, strokes_per_day=480, site_factor=1.15, rollout="plan"),
    Place("KESTREL", "Kestrel Weir", share=1.2, strokes_per_day=560, site_factor=0.95),
    Place("OSIER", "Osier Cut", strokes_per_day=450, records_late_by=390, crew="NOOR", site_factor=1.05),
    Place("MARL", "Marl Bridge", share=0.9, strokes_per_day=610, visit_every=21, crew="NOOR", planned_age=84),
    Place("TERN", "Ternmouth Bar", share=1.5, strokes_per_day=640, sandy=True, crew="SVEN", rollout="plan"),
    Place("SALTGRASS", "Saltgrass Sound", share=1.2, strokes_per_day=580, sandy=True, crew="SVEN", visit_every=21),
    Place("BRACK", "Brack Hatchery", share=0.8, strokes_per_day=700, visit_every=14, crew="LUCA", site_factor=1.1),
    Place("FERNBECK", "Fernbeck Hatchery", share=0.8, strokes_per_day=690, visit_every=14, crew="LUCA"),
    Place(
        "LARCH", "Larch Pond Hatchery", share=0.6, strokes_per_day=720, crew="LUCA", counters_swapped=True, rollout=""
    ),
    Place("QUOIN", "Quoin Canal", share=1.4, strokes_per_day=430, reports_at_once=False, visit_every=28, crew="BRAM"),
    Place("HERON", "Heron Basin", strokes_per_day=500, visit_every=None, crew="NOOR", site_factor=0.9),
    Place("MILL-E", "Millrace East", share=0.9, strokes_per_day=540, zone="Europe/Lisbon", crew="SVEN", rollout="plan"),
    Place("MILL-W", "Millrace West", share=0.9, strokes_per_day=550, zone="Europe/Lisbon", crew="SVEN", rollout=""),
    Place("TANK", "Test tank", kind="rig", share=0.15, strokes_per_day=2400, visit_every=7, crew="NOOR", rollout=""),
    Place("DEPOT-N", "North depot", kind="depot", share=0, visit_every=None, crew="GRETA", rollout=""),
    Place("DEPOT-S", "South depot", kind="depot", share=0, visit_every=None, crew="GRETA", rollout=""),
]


def rows(first_day: dict[str, object]) -> dict[str, list[Row]]:
    """Sites as a records file; `first_day` gives records_from by site where records began late."""
    return {
        "sites": [
            {
                "site": place.code,
                "name": place.name,
                "kind": place.kind,
                "zone": place.zone,
                "records_from": first_day.get(place.code, ""),
                "strokes_per_day": place.strokes_per_day if place.kind != "depot" else "",
                "reports_at_once": {True: "yes", False: "no", None: ""}[place.reports_at_once],
                "next_visit_on": first_day.get(f"next {place.code}", ""),
                "visit_every_days": place.visit_every or "",
            }
            for place in PLACES
        ],
    }
