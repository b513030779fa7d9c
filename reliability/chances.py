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
LEAST_TOLD = 0.01  # below this, a chance is told in words


@dataclass(frozen=True)
class PartNow:
    """A part that runs: its age now and its use a day, in the unit of its component's clock."""

    position: int
    component: str
    part: str
    age: float
    a_day: float


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
            found[part.position] = chance_of(design, part.age, part.a_day * days)
    return found


def chance_of(design: dict[str, Any], age: float, more: float) -> Chance:
    import numpy as np

    shapes, scales = np.array(design["shapes"]), np.array(design["scales"])
    hazard = ((age + more) / scales) ** shapes - (age / scales) ** shapes
    shares = -np.expm1(-hazard)
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
    key = key_of({"component": component, "draws": DRAWS})
    kept = KeptResult.objects.filter(kind=KIND, key=key, made_at__gte=timezone.now() - FRESH_FOR)
    for payload in kept.values_list("payload", flat=True):
        return json.loads(bytes(payload))
    learned = learn(component, as_of)
    keep(key, json.dumps(learned, allow_nan=False).encode())
    return learned


def learn(component: str, as_of: dt.date) -> dict[str, dict[str, Any]]:
    from reliability.forecasts.learned import Learned
    from reliability.lifetimes_from_fleet import lives

    found = lives(component, by="part", as_of=as_of)
    if found.lifetimes is None:
        return {}
    learned = Learned(found)
    designs = {part: drawn(learned.posterior(part), learned.failures(part)) for part in found.groups}
    if len(found.groups) == 1:
        return {**designs, "": designs[found.groups[0]]}
    # A name that no part has: the design without a life of its own borrows its component's.
    return {**designs, "": drawn(learned.posterior(""), learned.failures())}


def drawn(posterior: Any, failures: int) -> dict[str, Any]:
    import numpy as np

    draws = posterior.draws(DRAWS, np.random.default_rng(0))
    return {
        "shapes": [float(f"{shape:.6g}") for shape in draws.shapes],
        "scales": [float(f"{scale:.6g}") for scale in draws.scales],
        "failures": failures,
    }


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
