"""A Kaplan–Meier band that allows for sites: the wider of the log–log band and that from drawing whole sites again."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from reliability.stats.kaplan_meier import KaplanMeierCurve
    from reliability.stats.lifetimes import Lifetimes

FEWEST_SITES = 5  # with fewer, Student's factor makes the band say nothing
LOG_LOG = "log-log"
WITH_SITES = "log-log, wider where whole sites drawn again say so"
NONE_DRAWN = 1e-4  # chance that a draw holds none of the sites that can tell something


def widened(curve: KaplanMeierCurve, lifetimes: Lifetimes, minimum_at_risk: float = 0) -> tuple[KaplanMeierCurve, str]:
    """The curve of these lives with limits that allow for sites, and the name of its band.

    Before so many sites have seen a failure that hardly any draw is without one, and after so few are still under
    observation that some draw has none, the draws say nothing and the log–log band stands alone.
    """
    import numpy as np

    from reliability.stats.errors import StatisticsError
    from reliability.stats.site_bootstrap import site_bootstrap_band

    sites = len(lifetimes.site_labels)
    if sites < FEWEST_SITES or not len(curve.times):
        return curve, LOG_LOG
    level = curve.confidence_level
    try:
        band = site_bootstrap_band(lifetimes, confidence_level=level, minimum_at_risk=minimum_at_risk)
    except StatisticsError:
        return curve, LOG_LOG
    telling = np.minimum(sites_with_a_failure(lifetimes, curve.times), sites_still_seen(lifetimes, curve.times))
    usable = ((1.0 - telling / sites) ** sites < NONE_DRAWN) & (curve.survival > 0.0)
    if not usable.any():
        return curve, LOG_LOG
    lower = np.where(usable, np.minimum(curve.lower, band.lower), curve.lower)
    upper = np.where(usable, np.maximum(curve.upper, band.upper), curve.upper)
    # a survival curve falls, and so do its limits: where the site band sets in the wider of two neighbours holds
    lower, upper = np.minimum.accumulate(lower), np.maximum.accumulate(upper[::-1])[::-1]
    return replace(curve, lower=lower, upper=upper), WITH_SITES


def sites_with_a_failure(lifetimes: Lifetimes, ages: Any) -> Any:
    """How many sites have seen a failure by each age."""
    import numpy as np

    failed = lifetimes.observed
    first = np.full(len(lifetimes.site_labels), np.inf)
    np.minimum.at(first, lifetimes.site_codes[failed], lifetimes.durations[failed])
    return np.searchsorted(np.sort(first), ages, side="right")


def sites_still_seen(lifetimes: Lifetimes, ages: Any) -> Any:
    """How many sites have a life under observation at or beyond each age."""
    import numpy as np

    last = np.zeros(len(lifetimes.site_labels))
    np.maximum.at(last, lifetimes.site_codes, lifetimes.durations)
    return last.size - np.searchsorted(np.sort(last), ages, side="left")
