"""A fleet that is given a new nut, told in day numbers: who got it when, and how long old and new ones lived."""

from __future__ import annotations

import random
from typing import Any

from fleet.actions.rebuild_clocks import rebuild_clocks
from fleet.actions.save_redesign import PartReplaced, save_redesign
from fleet.models import Fitting, Position, Redesign
from tests.reliability.small_fleet import SmallFleet, day

TODAY = 400
BEGAN = 200


class RolloutFleet(SmallFleet):
    """Sites with modules whose nuts fail and are renewed; from day 200 on half of the modules get the new one.

    longer: how many times as long the new nut lives. With `at_once` whole sites change over instead.
    """

    def __init__(self, longer: float = 2.0, *, sites: int = 4, modules: int = 8, seed: int = 3, at_once: bool = False):
        super().__init__("days")
        self.n2.supersedes = self.n1
        self.n2.save()
        self.position = Position.objects.create(type=self.type, code="NUT", component=self.component)
        dice = random.Random(seed)
        self.modules: dict[str, Any] = {}
        self.places = [self.site(f"SITE-{number}") for number in range(1, sites + 1)]
        for number, site in enumerate(self.places):
            for tag in range(modules):
                changes = number % 2 == 0 if at_once else tag % 2 == 0
                self.history(f"M-{number + 1}-{tag + 1}", site, dice, longer if changes else None)
        rebuild_clocks()

    def history(self, tag: str, site: Any, dice: random.Random, longer: float | None) -> None:
        """One module's nuts from day 0 on; `longer` None: it never gets the new one."""
        module = self.modules[tag] = self.module(tag, site)
        at = dice.randrange(30)
        while at < TODAY:
            new = longer is not None and at >= BEGAN
            life = max(2, round(dice.weibullvariate(60, 2) * (longer if new and longer else 1)))
            part = self.n2 if new else self.n1
            end = at + life
            upgraded = longer is not None and at < BEGAN <= end
            if upgraded:
                self.put(module, part, at, BEGAN, "upgrade")
                at = BEGAN
            elif end < TODAY:
                self.put(module, part, at, end, "failed", mode=self.worn if dice.random() < 0.8 else self.stripped)
                at = end
            else:
                self.put(module, part, at, None, "")
                break

    def put(self, module: Any, part: Any, fitted: int, removed: int | None, reason: str, **fields: Any) -> None:
        self.number += 1
        fields.setdefault("position", self.position)
        Fitting.objects.create(
            code=f"F-{self.number}",
            module=module,
            part=part,
            fitted_on=day(fitted),
            removed_on=None if removed is None else day(removed),
            reason=reason,
            **fields,
        )

    def redesign(self, **fields: Any) -> Redesign:
        fields.setdefault("code", "LIP")
        return save_redesign(by=None, changes=[PartReplaced(self.n2, [self.n1])], **fields)
