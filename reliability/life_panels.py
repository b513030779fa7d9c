"""What the Life screen shows below its first answer: panels, each computed and kept apart, brought when looked at."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, field
from functools import cached_property
from importlib import import_module
from typing import TYPE_CHECKING, Any, NamedTuple

from django.utils import timezone

from reliability.kept import kept
from reliability.lifetimes_from_fleet import lives

if TYPE_CHECKING:
    from reliability.fleet_lives import FleetLives
    from reliability.stats.lifetimes import Lifetimes

ALL = "all"
FEWEST_FAILURES = 5  # below, no maximum-likelihood shape is shown
MOST_STRATA = 4  # designs that a panel treats one by one
HEAD = ("component", "component_name", "clock", "as_of", "confidence", "by", "modes", "mode_names")

Data = dict[str, Any]


class Panel(NamedTuple):
    """Its address below /life/, its key in the document, its heading and the module that answers it."""

    name: str
    key: str
    title: str
    module: str

    def load(self) -> Any:
        return import_module(f"reliability.{self.module}")


# In the order in which they are read.
PANELS = (
    Panel("fit", "distributions", "Which curve fits the lives", "life_fit"),
    Panel("modes", "incidence", "What they fail by", "life_modes"),
    Panel("trend", "trend", "Failures as positions grow older", "life_trend"),
    Panel("clocks", "clocks", "Days, hours or strokes", "life_clocks"),
    Panel("stand-outs", "stand_outs", "Sites and lots that stand out", "life_stand_outs"),
    Panel("duty", "duty", "Life and duty", "life_duty"),
)
BY_NAME = {panel.name: panel for panel in PANELS}


class Stratum(NamedTuple):
    """Lives that a panel takes together: one design, or all that were chosen."""

    label: str
    chosen: Any  # rows of the question's lives
    lifetimes: Lifetimes
    running: int


@dataclass(frozen=True)
class PanelQuestion:
    """The choices of the screen as a panel asks them of the records."""

    component: str
    confidence: float = 0.95
    choices: dict[str, Any] = field(default_factory=dict)  # as `lives` takes them

    def lives(self, **changes: Any) -> FleetLives:
        return lives(self.component, **{**self.choices, **changes})

    @cached_property
    def found(self) -> FleetLives:
        return self.lives()

    @property
    def life_set(self) -> str | None:
        return self.choices.get("life_set")

    def strata(self, found: FleetLives | None = None) -> list[Stratum]:
        """By part the designs with most parts running and lives, in their order; else all lives together."""
        found = found or self.found
        if found.lifetimes is None:
            return []
        labels = found.groups if found.by == "part" else ()
        if not labels:
            every = slice(None)
            return [Stratum(ALL, every, found.lifetimes, found.count("running"))]
        strata = []
        for label in labels:
            chosen = found.lifetimes.groups == label
            lifetimes = found.lifetimes.subset(chosen)
            strata.append(Stratum(label, chosen, lifetimes, found.count("running", group=label)))
        weighty = sorted(strata, key=lambda each: (-each.running, -each.lifetimes.count))[:MOST_STRATA]
        return [each for each in strata if each in weighty]

    def head(self) -> Data:
        found = self.found
        return {
            "component": found.component,
            "component_name": found.component_name,
            "clock": found.clock,
            "as_of": found.as_of.isoformat(),
            "confidence": self.confidence,
            "by": found.by,
            "modes": list(found.modes),
            "mode_names": found.mode_names,
        }


def panel_document(component: str, name: str, *, mine: set[str] | None = None, **choices: Any) -> Data:
    """A panel's figures with its sentence; `mine`: codes of the only sites that may be named, None for all."""
    panel, asked = BY_NAME[name].load(), question_of(component, **choices)
    question = {"component": component, "confidence": asked.confidence, **asked.choices}
    question = {key: value for key, value in question.items() if value is not None}
    data: Data = kept(f"life {name}", question, lambda: {**asked.head(), **panel.answer(asked)})
    if mine is not None and hasattr(panel, "as_seen"):
        data = panel.as_seen(data, mine)
    return {**data, "sentence": data.get("refused") or condition_of(data, name) + panel.sentence(data)}


def condition_of(data: Data, name: str) -> str:
    """“If only thread worn out acted: ”; the panel of the modes shows them all."""
    from reliability.wording import only_modes

    return "" if name == "modes" else only_modes(data)


def question_of(component: str, *, confidence: float = 0.95, **choices: Any) -> PanelQuestion:
    """However the screen is grouped, panels treat each design by itself: mixed designs would pass for bad sites or
    lots. Only “all together” takes them together.
    """
    as_of: dt.date = choices.pop("as_of", None) or timezone.localdate()
    by = "part" if choices.pop("by", None) else None
    return PanelQuestion(component, confidence, {**choices, "by": by, "as_of": as_of})


def panels_of(component: str, *, mine: set[str] | None = None, **choices: Any) -> Data:
    """All panels by their key in the document, without what the document says already."""
    told = {}
    for panel in PANELS:
        data = panel_document(component, panel.name, mine=mine, **choices)
        told[panel.key] = {key: value for key, value in data.items() if key not in HEAD}
    return told


def whole_document(component: str, *, mine: set[str] | None = None, **choices: Any) -> Data:
    """The first answer with every group and every panel: what JSON and the command give."""
    from reliability.life_answer import kept_life_document
    from reliability.life_sight import as_seen

    document = as_seen(kept_life_document(component, **choices), mine)
    return {**document, **panels_of(component, mine=mine, **choices)}


def refused(why: str) -> Data:
    """A panel that has no answer, and why: “we cannot tell, because …”."""
    return {"refused": f"We cannot tell, because {why}"}


def main_stratum(strata: list[Data]) -> Data | None:
    """The one that matters most now: of which most still run, then with most lives."""
    return max(strata, key=lambda each: (each["running"], each["lives"]), default=None)
