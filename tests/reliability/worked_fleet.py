"""A fleet whose truth is known: nuts that wear by strokes, at sites that work them differently hard; a bad lot."""

from __future__ import annotations

import random
from typing import Any

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.models import Position
from tests.reliability.small_fleet import SmallFleet

DUTIES = {"ALDER": 50, "BIRCH": 80, "CEDAR": 120, "ELDER": 180, "HAZEL": 270, "MAPLE": 400}  # strokes a day
MODULES_A_SITE = 5
READ_EVERY = 25
LAST_DAY = 300
SCALE, SHAPE = 12_000, 3.0
BAD_LOT, BAD_AT = "L-BAD", 0.45  # its lives are shorter by this factor


class WorkedFleet(SmallFleet):
    """Each module has one nut after the other; six sites with two-fold steps of duty; every failure told at once."""

    def __init__(self, *, bad_lot: bool = False, duties: dict[str, int] | None = None) -> None:
        super().__init__(clock="strokes")
        self.worn.name, self.stripped.name = "Thread worn out", "Thread stripped"
        self.worn.save()
        self.stripped.save()
        rng = random.Random(11)
        self.sites = {}
        for code, duty in (duties or DUTIES).items():
            site = self.sites[code] = self.site(code, name=f"{code.title()} Lock", strokes_per_day=duty)
            for number in range(MODULES_A_SITE):
                self._module(rng, f"{code}-{number}", site, duty, bad_lot=bad_lot)
        rebuild_clocks()

    def _module(self, rng: random.Random, tag: str, site: Any, duty: int, *, bad_lot: bool) -> None:
        module = self.module(tag, site)
        for day in range(0, LAST_DAY + 1, READ_EVERY):
            self.read(module, float(day), strokes=round(duty * day))
        position = Position.objects.create(type=self.type, code=f"NUT-{tag}", component=self.component)
        now, place = 0.0, 0
        while True:
            lot = BAD_LOT if bad_lot and (place + int(tag[-1])) % 4 == 0 else f"L-{(place + int(tag[-1])) % 4}"
            factor = BAD_AT if lot == BAD_LOT else 1.0
            days = factor * SCALE * rng.weibullvariate(1.0, SHAPE) / duty
            end = now + max(1.0, days)
            mode = self.stripped if rng.random() < 0.25 else self.worn
            ended = end < LAST_DAY
            fitting = self.fit(
                module,
                int(now),
                int(end) if ended else None,
                "failed" if ended else "",
                mode=mode if ended else None,
                lot=lot,
            )
            fitting.position = position
            fitting.save()
            if not ended:
                return
            now, place = float(int(end)), place + 1
