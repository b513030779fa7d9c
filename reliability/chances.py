"""The chance that a running part fails within some days, from its design's posterior and its own age.

For a part of age a that ages x more until then, S the survival of one posterior draw: 1 - S(a + x) / S(a). The
estimate is the mean over the draws, the interval holds the middle 95 % of them: what is not known of the design's
life, not the luck of one part. Such chances plan visits and stock; they do not certify safe life.
"""

from __future__ import annotations

import datetime as dt
import json
import math
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from django.db import DatabaseError, transaction
from django.utils import timezone

from fleet.formats import percent
from reliability.kept import key_of
from reliability.models import KeptResult

KIND = "chances"
DRAWS = 400
# The lives behind a chance may be some hours old (the ages are not): else every logged visit would make the next
# reader of a page wait for all posteriors.
FRESH_FOR = dt.timedelta(hours=6)
TAIL = 0.025
NO_SITE = "a site without history"
LEAST_TOLD = 0.01  # below this, a chance is told in words


@dataclass(frozen=True)
class PartNow:
    """A part that runs: its age now and its use a day, in the unit of its component's clock."""

    position: int
    component: str
    part: str
    age: float
    a_day: float
    site: str = ""


@dataclass(frozen=True)
class Chance:
    """Shares from 0 to 1; `words` stand in place of the number where it would say more than is known."""

    estimate: float
    lower: float
    upper: float
    words: str = ""


def chances(parts: Iterable[PartNow], *, days: float, as_of: dt.date) -> dict[int, Chance]:
    """By position; a part of a component without any life on record has none."""
    found: dict[int, Chance] = {}
    told: dict[str, dict[str, Any]] = {}
    for part in parts:
        if part.component not in told:
            told[part.component] = design_lives(part.component, as_of)
        design = told[part.component].get(part.part) or told[part.component].get("")
        if design is not None and part.a_day > 0 and days > 0:
            found[part.position] = chance_of(design, part.age, part.a_day * days, part.site)
    return found


def chance_of(design: dict[str, Any], age: float, more: float, site: str = "") -> Chance:
    """With the site's own factor on the hazard; a site without history has one drawn from the spread of all."""
    import numpy as np

    shapes, scales = np.array(design["shapes"]), np.array(design["scales"])
    hazard = ((age + more) / scales) ** shapes - (age / scales) ** shapes
    factors = design.get("sites", {}).get(site) or design.get("new_site") or [1.0]
    shares = -np.expm1(-hazard * np.array(factors))
    lower, upper = (float(end) for end in np.quantile(shares, [TAIL, 1 - TAIL]))
    words = ""
    if upper < LEAST_TOLD:
        words = f"under {percent(LEAST_TOLD)}"
    if design["failures"] == 0:
        # No failure yet: a mean would rest on the prior alone, the upper end on the parts that held.
        words = f"under {percent(math.ceil(upper * 100) / 100)}, no failure seen yet"
    return Chance(float(shares.mean()), lower, upper, words)


def design_lives(component: str, as_of: dt.date) -> dict[str, dict[str, Any]]:
    """Posterior draws by part, and of all parts together under the empty name; read where they are fresh enough."""
    key = key_of({"component": component, "draws": DRAWS, "sites": "differ"})
    kept = KeptResult.objects.filter(kind=KIND, key=key, made_at__gte=timezone.now() - FRESH_FOR)
    for payload in kept.values_list("payload", flat=True):
        return json.loads(bytes(payload))
    learned = learn(component, as_of)
    keep(key, json.dumps(learned, allow_nan=False).encode())
    return learned


def learn(component: str, as_of: dt.date) -> dict[str, dict[str, Any]]:
    from reliability.lifetimes_from_fleet import lives

    found = lives(component, by="part", as_of=as_of)
    everything = found.lifetimes
    if everything is None:
        return {}
    designs = {
        part: drawn(posterior_of(everything.subset(everything.groups == part)), found.count("failed", group=part))
        for part in found.groups
    }
    if len(found.groups) == 1:
        return {**designs, "": designs[found.groups[0]]}
    # A name that no part has: the design without a life of its own borrows its component's.
    return {**designs, "": drawn(posterior_of(everything), found.count("failed"))}


def posterior_of(lifetimes: Any) -> Any:
    """With two or more sites they may differ."""
    from reliability.stats.posterior import weibull_posterior

    return weibull_posterior(lifetimes, site_spread=len(lifetimes.site_labels) > 1, early_until=0.0)


def drawn(posterior: Any, failures: int) -> dict[str, Any]:
    import numpy as np

    draws = posterior.draws(DRAWS, np.random.default_rng(0))
    spread = {}
    if posterior.has_spread:
        known = sorted(label for label in draws.multipliers if label is not None)
        spread = {
            "sites": {str(label): short(draws.multipliers[label]) for label in known},
            "new_site": short(draws.for_sites([NO_SITE])[:, 0]),
        }
    return {"shapes": short(draws.shapes), "scales": short(draws.scales), "failures": failures, **spread}


def short(values: Any) -> list[float]:
    """Six figures are more than anybody knows, and half the bytes."""
    return [float(f"{value:.6g}") for value in values]


def keep(key: str, payload: bytes) -> None:
    """A full or locked book keeps none; the page shows its chances all the same."""
    row = KeptResult(kind=KIND, key=key, data_version=0, payload=payload, made_at=timezone.now())
    try:
        with transaction.atomic():
            KeptResult.objects.bulk_create(
                [row], update_conflicts=True, unique_fields=["kind", "key"], update_fields=["payload", "made_at"]
            )
    except DatabaseError:
        return
