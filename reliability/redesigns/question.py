"""What is asked about a redesign: new against old parts, by their numbers."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from django.utils import timezone

from fleet.models import Component, Part
from reliability.life_errors import NothingNamed, QuestionRefused

HOPE = 1.5


@dataclass(frozen=True)
class RedesignQuestion:
    """Which new parts are held against which old ones, up to which day; `sites` None means all."""

    component: Component
    new: tuple[str, ...]
    old: tuple[str, ...]
    as_of: dt.date
    hope: float = HOPE
    confidence: float = 0.95
    not_before: dt.date | None = None
    sites: tuple[str, ...] | None = None
    modes: tuple[str, ...] = ()
    also: tuple[str, ...] = ()  # other candidates, set beside the new one
    newer: tuple[str, ...] = ()  # of the old ones those that superseded the new one: the question stands on its head

    def asked(self) -> dict[str, Any]:
        return {
            "component": self.component.code,
            "new": list(self.new),
            "old": list(self.old),
            "as_of": self.as_of.isoformat(),
            "hope": self.hope,
            "confidence": self.confidence,
            "not_before": self.not_before.isoformat() if self.not_before else None,
            "sites": list(self.sites) if self.sites is not None else None,
            "modes": list(self.modes),
            "also": list(self.also),
            "newer": list(self.newer),
        }


def question_for(new: str, before: Sequence[str] | None = None, **choices: Any) -> RedesignQuestion:
    """By part numbers; without old parts named, all those that the new one supersedes, one after the other."""
    part = Part.objects.select_related("component").filter(code=new.strip().upper()).first()
    if part is None:
        raise NothingNamed("part", new, Part.objects.values_list("code", flat=True))
    known = {each.code: each for each in Part.objects.filter(component=part.component)}
    old = [code.strip().upper() for code in before] if before else superseded_by(part)
    for code in old:
        if code not in known:
            raise NothingNamed("part", code, known)
    if not old:
        raise QuestionRefused(f"{part.code} supersedes no part. Name the old ones with --before.")
    if part.code in old:
        raise QuestionRefused(f"{part.code} cannot be held against itself. Name older parts.")
    choices.setdefault("as_of", timezone.localdate())
    choices["newer"] = successors_among([known[code] for code in old], part)
    return RedesignQuestion(part.component, (part.code,), tuple(old), **choices)


def successors_among(parts: Sequence[Part], part: Part) -> tuple[str, ...]:
    """Those that superseded the part, one after the other."""
    return tuple(each.code for each in parts if part.code in superseded_by(each))


def superseded_by(part: Part) -> list[str]:
    found: list[str] = []
    older = part.supersedes
    while older is not None and older.code not in found:
        found.append(older.code)
        older = older.supersedes
    return found[::-1]
