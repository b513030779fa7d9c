"""What the records teach of a component: each design's life, and everything else that a count of days to come needs.

All of it depends on the records and the day alone, not on the days counted, so it is kept until the next entry.
"""

from __future__ import annotations

import datetime as dt
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from django.utils import timezone

from fleet.formats import number, rounded
from fleet.models import Component
from reliability.fleet_lives import FleetLives
from reliability.forecasts.duty import Duty, duty
from reliability.forecasts.removals import Removals, Rule, removals
from reliability.forecasts.standing import Standing, standing, stop_shares
from reliability.forecasts.taken_along import Trigger, triggers
from reliability.forecasts.visiting import Visiting, visiting
from reliability.kept import kept
from reliability.lifetimes_from_fleet import lives

if TYPE_CHECKING:
    from reliability.stats.kept_draws import KeptDraws
    from reliability.stats.life_posterior import LifePosterior
    from reliability.stats.lifetimes import Lifetimes

DRAWS = 400
FEW = 10  # failures below which an earlier design's shape is leaned on, and from which it can be
SHAPE_SPREAD = 0.35  # how far the log shape of a new design strays from the earlier one's
FEWEST_LENT = 3  # failures from which a design tells another how long it may live
LIFE_SPREAD = 0.7  # how far the log of its median life strays from the earlier one's
PLAIN_PRIOR = (math.log(2.0), 1.0)
LONGEST = 1e12  # where hardly anything is known a scale may be without bounds
ALL = ""  # the design that stands for all parts of the component


@dataclass(frozen=True)
class Design:
    """What is known of one design: draws of its life, failures seen, and removals by chance per unit of the clock."""

    life: KeptDraws
    failures: int
    removals: float
    upgrades: float
    typical: float  # middle of the draws' scales


@dataclass
class Learned:
    """Of a component as of a day; `designs` is empty where no life is on record."""

    failures: int
    designs: dict[str, Design]
    taken_share: float  # of the removals by chance, those that the failures in `triggers` caused
    rules: dict[str, Rule]
    visits: dict[str, Visiting]
    standing: Standing
    stop_share: float
    duty: Duty
    triggers: list[Trigger]
    unvisited: list[str] = field(default_factory=list)  # sites of which nobody knows how often crews come
    warnings: list[str] = field(default_factory=list)
    elsewhere: Rule | None = None  # of planned replacement, where a site has not come so far
    lived_on: frozenset[str] = frozenset()  # sites that go by no rule

    def design(self, part: str) -> Design:
        """A design without a life of its own borrows its component's."""
        return self.designs[self.label(part)]

    def label(self, part: str) -> str:
        """A part that came into the book since then stands with the design that has failed most."""
        if part in self.designs:
            return part
        return ALL if ALL in self.designs else max(self.designs, key=lambda each: self.designs[each].failures)


def learned(component: Component, as_of: dt.date, known_on: dt.date | None = None) -> Learned:
    """Kept where it speaks of today; a look back is made each time, for nobody asks twice."""
    if known_on is not None or as_of != timezone.localdate():
        return from_told(_learn(component, as_of, known_on))
    asked = {"component": component.code, "as_of": as_of}
    return from_told(kept("learned", asked, lambda: _learn(component, as_of, known_on)))


def learned_from(found: FleetLives, component: Component, as_of: dt.date, known_on: dt.date | None) -> Learned:
    """From lives that are at hand already."""
    return from_told(_learn(component, as_of, known_on, found))


def _learn(
    component: Component, as_of: dt.date, known_on: dt.date | None, found: FleetLives | None = None
) -> dict[str, Any]:
    found = found or lives(component, by="part", as_of=as_of, known_on=known_on)
    out = removals(component, as_of, known_on)
    visits, without = visiting(as_of, known_on)
    taken = triggers(component, as_of, known_on)
    designs, warnings = _designs(found, component, out)
    by_chance = sum(out.by_part.values())
    how, use = standing(as_of, known_on), duty(component.clock, as_of, known_on)
    return {
        "failures": found.count("failed"),
        "designs": designs,
        "taken_share": min(1.0, sum(each.parts for each in taken) / by_chance) if by_chance else 0.0,
        "rules": {site: list(rule) for site, rule in out.rules.items()},
        "elsewhere": None if out.elsewhere is None else list(out.elsewhere),
        "lived_on": sorted(out.lived_on),
        "visits": {site: list(each) for site, each in visits.items()},
        "standing": [how.running, how.everywhere, how.durations],
        "stop_share": stop_shares(component.pk, as_of, known_on),
        "duty": [use.common, use.own, use.season],
        "triggers": [each.told() for each in taken],
        "unvisited": without,
        "warnings": warnings,
    }


def from_told(told: Mapping[str, Any]) -> Learned:
    """The same as an object."""
    from reliability.stats.kept_draws import KeptDraws

    designs = {
        part: Design(
            KeptDraws.from_told(each["life"]),
            *(each[name] for name in ("failures", "removals")),
            each["upgrades"],
            each["typical"],
        )
        for part, each in told["designs"].items()
    }
    return Learned(
        failures=told["failures"],
        designs=designs,
        taken_share=told["taken_share"],
        rules={site: Rule(*rule) for site, rule in told["rules"].items()},
        visits={site: Visiting(*each) for site, each in told["visits"].items()},
        standing=Standing(*told["standing"]),
        stop_share=told["stop_share"],
        duty=Duty(*told["duty"]),
        triggers=[Trigger(**each) for each in told["triggers"]],
        unvisited=list(told["unvisited"]),
        warnings=list(told["warnings"]),
        elsewhere=None if told["elsewhere"] is None else Rule(*told["elsewhere"]),
        lived_on=frozenset(told["lived_on"]),
    )


def _designs(found: FleetLives, component: Component, out: Removals) -> tuple[dict[str, Any], list[str]]:
    """Each design with lives of its own; one that stands for all where some part has none yet."""
    import numpy as np

    from reliability.stats.kept_draws import KeptDraws

    if found.lifetimes is None:
        return {}, []
    warnings: list[str] = []
    posteriors = _posteriors(found.lifetimes, component, warnings)
    rate = sum(out.by_part.values()) / max(found.lifetimes.exposure, 1e-9)
    told = {}
    for part, (posterior, lifetimes) in posteriors.items():
        rng = np.random.default_rng(np.frombuffer(part.encode().ljust(8, b"-")[:64], dtype=np.uint8).tolist())
        life = KeptDraws.of(posterior, DRAWS, rng)
        removed = out.by_part.get(part, 0) if part != ALL else sum(out.by_part.values())
        told[part] = {
            "life": life.told(),
            "failures": round(lifetimes.failures),
            # the design's own, and one more at its component's rate
            "removals": (removed + 1.0) / (lifetimes.exposure + 1.0 / rate) if rate else 0.0,
            "upgrades": out.upgrades_lately.get(part, 0) / max(lifetimes.exposure, 1e-9),
            "typical": float(min(np.median(life.drawn.scales), LONGEST)),
        }
    return told, warnings


def _posteriors(
    everything: Lifetimes, component: Component, warnings: list[str]
) -> dict[str, tuple[LifePosterior, Lifetimes]]:
    """Posterior and lives of each design, the ones with many failures first: the others may lean on their shape."""
    by_part = {str(part): everything.subset(everything.groups == part) for part in everything.group_labels}
    order = sorted(by_part, key=lambda part: -by_part[part].failures)
    known: dict[str, tuple[LifePosterior, Lifetimes]] = {}
    older = _superseded(component)
    for part in order:
        few = by_part[part].failures < FEW
        shaped_like = _earlier(part, older, known, FEW) if few else None
        living_like = _earlier(part, older, known, FEWEST_LENT) if few else None
        prior = PLAIN_PRIOR if shaped_like is None else _shape_prior(known[shaped_like][0])
        posterior = _posterior(by_part[part], component.clock, prior)
        if living_like is not None:
            posterior = _living_like(posterior, known[living_like][0])
            said = _leans_on(known[living_like][0], living_like, component.clock, shaped_like, prior)
            warnings.append(f"{part} has failed {round(by_part[part].failures)} times so far. {said}")
        known[part] = (posterior, by_part[part])
    if any(part not in known for part in component.parts.values_list("code", flat=True)):
        known[ALL] = (_posterior(everything, component.clock, PLAIN_PRIOR), everything)
    return known


def _posterior(lifetimes: Lifetimes, clock: str, prior: tuple[float, float]) -> LifePosterior:
    from reliability.stats.life_posterior import life_posterior

    return life_posterior(
        lifetimes,
        site_spread=len(lifetimes.site_labels) > 1,
        log_shape_prior=prior,
        rounded_up_to=1.0 if clock == "days" else 0.0,
    )


def _superseded(component: Component) -> dict[str, str]:
    """The design that each one superseded."""
    rows = component.parts.exclude(supersedes=None).values_list("code", "supersedes__code")
    return dict(rows)


def _living_like(posterior: LifePosterior, other: LifePosterior) -> LifePosterior:
    from reliability.stats.leaning import leaning_on_life, log_median

    centre, deviation = log_median(other)
    return leaning_on_life(posterior, (centre, math.hypot(LIFE_SPREAD, deviation)))


def _leans_on(
    other: LifePosterior, living_like: str, clock: str, shaped_like: str | None, prior: tuple[float, float]
) -> str:
    from reliability.stats.leaning import log_median

    middle = math.exp(log_median(other)[0])
    life = (
        f"How long it lives leans loosely on {living_like}, half of which last {number(rounded(middle))} {clock}: "
        "a life four times as long, or a fourth, is not ruled out"
    )
    if shaped_like is None:
        return f"{life}."
    return f"{life}. How its failures grow with age leans on {shaped_like} (shape {math.exp(prior[0]):.1f})."


def _earlier(part: str, older: Mapping[str, str], known: Mapping[str, Any], least: int) -> str | None:
    """An earlier design with enough failures: down the chain, else the one with the most of them."""
    enough = [each for each, (_, lifetimes) in known.items() if lifetimes.failures >= least]
    step, seen = older.get(part), {part}
    while step is not None and step not in seen:
        if step in enough:
            return step
        seen.add(step)
        step = older.get(step)
    return enough[0] if enough else None


def _shape_prior(posterior: LifePosterior) -> tuple[float, float]:
    """Centre and spread of a new design's log shape: the earlier one's, as far as that is known, and how designs
    differ.
    """
    weibull = posterior.weibull
    centre = float(weibull.weight @ weibull.log_shape)
    variance = float(weibull.weight @ (weibull.log_shape - centre) ** 2)
    return centre, math.sqrt(SHAPE_SPREAD**2 + variance)
