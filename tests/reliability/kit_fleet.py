"""A redesign of two components: a nut with a lip that comes with a new guide; two more nuts on trial, one on a rig."""

from __future__ import annotations

import random
from typing import Any

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.save_redesign import PartReplaced, save_redesign
from fleet.models import Component, Part, Position, Redesign
from tests.reliability.rollout_fleet import BEGAN, TODAY, RolloutFleet


class KitFleet(RolloutFleet):
    """As RolloutFleet, and each module has a guide, new where the nut is new; N3 ran at one site, N4 on a rig only."""

    def __init__(self, longer: float = 2.0, **sizes: Any) -> None:
        self.guide = Component.objects.create(code="GUIDE", name="Carriage guide", clock="days")
        self.g1 = Part.objects.create(code="G1", component=self.guide, unit_cost=5)
        self.g2 = Part.objects.create(code="G2", component=self.guide, unit_cost=6, supersedes=self.g1)
        self.dice = random.Random(8)
        super().__init__(longer, **sizes)
        self.n3 = Part.objects.create(code="N3", component=self.component, supersedes=self.n1)
        self.n4 = Part.objects.create(code="N4", component=self.component, supersedes=self.n1)
        self.trial()
        rebuild_clocks()

    def history(self, tag: str, site: Any, dice: random.Random, longer: float | None) -> None:
        """The guide lives twice as long as the nut, the new one no longer than the old."""
        super().history(tag, site, dice, longer)
        position = self.place_of_guide()
        module = self.modules[tag]
        at = self.dice.randrange(30)
        while at < TODAY:
            part = self.g2 if longer is not None and at >= BEGAN else self.g1
            end = at + max(2, round(self.dice.weibullvariate(120, 2)))
            if longer is not None and at < BEGAN <= end:
                self.put(module, part, at, BEGAN, "upgrade", position=position)
                at = BEGAN
            elif end < TODAY:
                self.put(module, part, at, end, "failed", position=position)
                at = end
            else:
                self.put(module, part, at, None, "", position=position)
                break

    def place_of_guide(self) -> Position:
        return Position.objects.get_or_create(type=self.type, code="GUIDE", defaults={"component": self.guide})[0]

    def trial(self) -> None:
        """N3 at the first site beside old nuts, N1 and N4 on a rig."""
        rig = self.site("RIG", kind="rig")
        for number in range(8):
            module = self.module(f"T-{number}", self.places[0])
            self.put(module, self.n1, 100, BEGAN + 20, "upgrade")
            end, reason = (BEGAN + 80 + 12 * number, "failed") if number < 5 else (None, "")
            self.put(module, self.n3, BEGAN + 20, end, reason)
            bench = self.module(f"R-{number}", rig)
            part = self.n4 if number % 2 else self.n1
            self.put(bench, part, 300, 330 + 5 * number * (number % 2 + 1), "failed")

    def kit(self, **fields: Any) -> Redesign:
        changes = [PartReplaced(self.n2, [self.n1]), PartReplaced(self.g2, [self.g1])]
        return save_redesign(by=None, code="KIT", name="lip and guide", changes=changes, **fields)
