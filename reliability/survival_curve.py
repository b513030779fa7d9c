"""The survival curve on the Life screen: Kaplan–Meier, or Turnbull where some failures were only found at a look."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from reliability.stats.kaplan_meier import KaplanMeierCurve
    from reliability.stats.lifetimes import Lifetimes

MINIMUM_AT_RISK = 5
MOST_CELLS = 3000  # beyond, Turnbull's estimate takes longer than a page may
WHOLE = 1.0  # the least age a life can gain on a clock of whole days or strokes
KAPLAN_MEIER = "Kaplan–Meier, Greenwood"
TURNBULL = "Turnbull"
WIDE_BAND = "each failure as early as it may have been below and as late above"


@dataclass(frozen=True, eq=False)
class SurvivalCurve:
    """Steps at `ages`: survival, band, numbers at risk and failures; all arrays of one length."""

    ages: Any
    survival: Any
    lower: Any
    upper: Any
    at_risk: Any
    failures: Any
    given_survival_to: float
    last_age: float
    method: str
    band: str
    notes: list[str] = field(default_factory=list)

    def quantile(self, probability: float) -> tuple[float | None, float | None, float | None]:
        """The first age at which the curve, its lower and its upper limit come down to 1 - probability."""
        level = 1.0 - probability + 1e-10
        return tuple(  # type: ignore[return-value]
            float(self.ages[(values <= level).argmax()]) if (values <= level).any() else None
            for values in (self.survival, self.lower, self.upper)
        )


def survival_curve(lifetimes: Lifetimes, confidence: float) -> SurvivalCurve:
    """With late entries the curve starts where at least five were under observation."""
    from reliability.site_band import widened
    from reliability.stats.errors import UndefinedEstimate
    from reliability.stats.kaplan_meier import kaplan_meier

    notes: list[str] = []
    exact, minimum = _failing_at(lifetimes, early=False), MINIMUM_AT_RISK
    try:
        curve = kaplan_meier(exact, confidence, minimum_at_risk=minimum)
    except UndefinedEstimate:
        notes.append(f"Fewer than {MINIMUM_AT_RISK} parts were ever under observation at one age.")
        minimum = 0
        curve = kaplan_meier(exact, confidence)
    start = curve.given_survival_to
    if start > 0:
        notes.append(f"Records began late: the curve tells the chance to outlive an age given survival to {start:g}.")
    if lifetimes.has_intervals:
        return _with_intervals(_from_start(lifetimes, start), confidence, notes)
    curve, band = widened(curve, exact, minimum)
    return _from_kaplan_meier(curve, KAPLAN_MEIER, band, notes)


def _from_start(lifetimes: Lifetimes, start: float) -> Lifetimes:
    """The lives that outlasted the start, observed from there on; a failure that may lie before it lies after it."""
    import numpy as np

    from reliability.stats.lifetimes import Lifetimes as Rows

    if start <= 0:
        return lifetimes
    kept = lifetimes.subset(lifetimes.durations > start)
    return Rows(
        kept.durations,
        kept.observed,
        entries=np.maximum(kept.entries, start),
        last_good=np.maximum(kept.last_good, start),
        weights=kept.weights,
        sites=kept.sites,
    )


def _from_kaplan_meier(curve: KaplanMeierCurve, method: str, band: str, notes: list[str]) -> SurvivalCurve:
    return SurvivalCurve(
        ages=curve.times,
        survival=curve.survival,
        lower=curve.lower,
        upper=curve.upper,
        at_risk=curve.at_risk,
        failures=curve.failures,
        given_survival_to=curve.given_survival_to,
        last_age=curve.last_age,
        method=method,
        band=band,
        notes=notes,
    )


def _with_intervals(lifetimes: Lifetimes, confidence: float, notes: list[str]) -> SurvivalCurve:
    """Turnbull's curve; its band by Kaplan–Meier with every failure at the early and at the late end of its interval.

    Moving failures earlier only lowers a Kaplan–Meier curve, so the true one lies between the two and the band holds
    at least what it promises.
    """
    import numpy as np

    from reliability.site_band import widened
    from reliability.stats.errors import StatisticsError
    from reliability.stats.kaplan_meier import kaplan_meier, number_at_risk
    from reliability.stats.turnbull import turnbull

    start = float(lifetimes.entries.min())
    ends = [_failing_at(lifetimes, early=end) for end in (True, False)]
    (early, _), (late, band) = (
        widened(kaplan_meier(lives, confidence, given_survival_to=start), lives) for lives in ends
    )
    found = _found_later(round(float(lifetimes.weights[lifetimes.is_interval].sum())))
    try:
        if len(lifetimes) > MOST_CELLS:
            raise _TooMany(f"{len(lifetimes)} different ages")
        curve = turnbull(lifetimes)
    except (StatisticsError, _TooMany) as error:
        note = (
            f"{found}; the curve takes them at the day they were found, the band allows for the time before ({error})."
        )
        ages, survival, method = late.times, late.survival, KAPLAN_MEIER
    else:
        note = f"{found}: the curve allows for the time before."
        ages, survival, method = curve.right, curve.survival, TURNBULL
    return SurvivalCurve(
        ages=ages,
        survival=survival,
        lower=np.minimum(_levels(early, early.lower, ages), survival),
        upper=np.maximum(_levels(late, late.upper, ages), survival),
        at_risk=number_at_risk(lifetimes, ages),
        failures=_failures_by(lifetimes, ages),
        given_survival_to=start,
        last_age=float(lifetimes.durations.max()),
        method=method,
        band=f"{band}; {WIDE_BAND}",
        notes=[*notes, note],
    )


def _found_later(count: int) -> str:
    return (
        "1 failure was only found at a later look"
        if count == 1
        else f"{count} failures were only found at a later look"
    )


class _TooMany(Exception):
    pass


def _failing_at(lifetimes: Lifetimes, *, early: bool) -> Lifetimes:
    """Interval failures at one end of their interval, as exact ones."""
    import numpy as np

    from reliability.stats.lifetimes import Lifetimes as Rows

    durations = np.array(lifetimes.durations)
    if early:
        inside = lifetimes.is_interval
        first = np.minimum(lifetimes.last_good[inside] + WHOLE, durations[inside])
        durations[inside] = np.where(first > lifetimes.entries[inside], first, durations[inside])
    return Rows(
        durations, lifetimes.observed, entries=lifetimes.entries, weights=lifetimes.weights, sites=lifetimes.sites
    )


def _levels(curve: KaplanMeierCurve, levels: Any, ages: Any) -> Any:
    import numpy as np

    return np.append(1.0, levels)[np.searchsorted(curve.times, ages, side="right")]


def _failures_by(lifetimes: Lifetimes, ages: Any) -> Any:
    """Failures found after the age before and up to each age."""
    import numpy as np

    failed = lifetimes.observed
    step = np.searchsorted(ages, lifetimes.durations[failed], side="left")
    return np.bincount(np.minimum(step, len(ages)), weights=lifetimes.weights[failed], minlength=len(ages) + 1)[:-1]
