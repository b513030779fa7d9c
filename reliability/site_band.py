"""A Kaplan–Meier band that allows for sites: the wider of the log–log band and that from drawing whole sites again."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from reliability.stats.kaplan_meier import KaplanMeierCurve
    from reliability.stats.lifetimes import Lifetimes

FEWEST_SITES = 5  # with fewer, Student's factor makes the band say nothing
NAME = "log-log, and wider where drawing whole sites again says so"
NONE_FAILED = 1e-4  # chance that no site with a failure is drawn: above it the draws tell nothing yet


def widened(curve: KaplanMeierCurve, lifetimes: Lifetimes, minimum_at_risk: float) -> tuple[Any, Any, bool]:
    """Lower and upper limits at the curve's ages, and whether sites were drawn again.

    Before so many sites have seen a failure that hardly any draw is without one, the log–log band stands alone.
    """
    import numpy as np

    from reliability.stats.errors import StatisticsError
    from reliability.stats.site_bootstrap import site_bootstrap_band

    sites = len(lifetimes.site_labels)
    if sites < FEWEST_SITES or not len(curve.times):
        return curve.lower, curve.upper, False
    try:
        band = site_bootstrap_band(lifetimes, confidence_level=curve.confidence_level, minimum_at_risk=minimum_at_risk)
    except StatisticsError:
        return curve.lower, curve.upper, False
    usable = (1.0 - sites_with_a_failure(lifetimes, curve.times) / sites) ** sites < NONE_FAILED
    usable &= curve.survival > 0.0  # at the end the draws have nothing left to vary
    lower = np.where(usable, np.minimum(curve.lower, band.lower), curve.lower)
    upper = np.where(usable, np.maximum(curve.upper, band.upper), curve.upper)
    # a survival curve falls, and so do its limits: where the site band sets in the wider of two neighbours holds
    falling = np.minimum.accumulate(lower), np.maximum.accumulate(upper[::-1])[::-1]
    return *falling, bool(usable.any())


def sites_with_a_failure(lifetimes: Lifetimes, ages: Any) -> Any:
    """How many sites have seen a failure by each age."""
    import numpy as np

    failed = lifetimes.observed
    first = np.full(len(lifetimes.site_labels), np.inf)
    np.minimum.at(first, lifetimes.site_codes[failed], lifetimes.durations[failed])
    return np.searchsorted(np.sort(first), ages, side="right")
