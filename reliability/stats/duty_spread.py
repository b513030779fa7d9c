"""How far a coming quarter's duty strays from what was expected of it, learned from past quarters."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtri, stdtrit

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]

PRIOR_SPREAD = 0.1  # where little is known duty strays by a tenth
PRIOR_QUARTERS = 1.0  # and that counts as much as this many past quarters
SURE_QUARTERS = 2.0  # degrees of freedom with which it is known before any


@dataclass(frozen=True)
class DutySpread:
    """Standard deviations of log(actual / expected duty): common to all sites of a quarter, and a site's own.

    The common one is known from few quarters: it is that of a normal whose 80 % band is as wide as the t band is.
    """

    common: float
    own: float
    quarters: int

    def pair(self) -> tuple[float, float]:
        """As `forecast_counts` takes it."""
        return self.common, self.own


def learned_duty_spread(actual: ArrayLike, expected: ArrayLike, quarters: ArrayLike, sites: ArrayLike) -> DutySpread:
    """Spread of duty from past quarters: one row a quarter and site, arrays (n,), any unit of use above 0.

    log ratio y = c_quarter + e_quarter,site. The own variance is the pooled one within quarters; the common one is
    the mean square of the quarters' means (about 0: a forecast that was always low was wrong too) less the own share
    in it. Each is drawn towards 0.1^2 by the weight of one quarter. The next quarter strays by t with the quarters and
    two as degrees of freedom, not by a normal: one of the deviation as learned held 68 of 100 quarters in its 80 %
    band where five quarters were known. Moments of the random-effects model: Searle,
    Casella & McCulloch 1992, Variance Components, ch. 3. Raises InvalidArgument.
    """
    used, hoped = np.asarray(actual, dtype=np.float64), np.asarray(expected, dtype=np.float64)
    quarter, site = np.asarray(quarters), np.asarray(sites)
    if not (used.shape == hoped.shape == quarter.shape == site.shape and used.ndim == 1):
        raise InvalidArgument("actual, expected, quarters and sites must be lists of the same length.")
    if used.size and not ((used > 0) & (hoped > 0) & np.isfinite(used) & np.isfinite(hoped)).all():
        raise InvalidArgument("Duty must be a number above 0; leave out quarters in which nothing ran.")
    if not used.size:
        return DutySpread(PRIOR_SPREAD, PRIOR_SPREAD, 0)
    ratio = np.log(used / hoped)
    _, index = np.unique(quarter, return_inverse=True)
    count = np.bincount(index)
    mean = np.bincount(index, ratio) / count
    within, freedom = float(((ratio - mean[index]) ** 2).sum()), float((count - 1).sum())
    sites_a_quarter = float(count.mean())
    weight = PRIOR_QUARTERS * max(sites_a_quarter - 1.0, 1.0)
    own = (within + weight * PRIOR_SPREAD**2) / (freedom + weight)
    between = float(np.maximum(mean**2 - own / count, 0.0).sum()) if count.size > 1 else float((mean**2).sum())
    common = (between + PRIOR_QUARTERS * PRIOR_SPREAD**2) / (count.size + PRIOR_QUARTERS)
    wider = float(stdtrit(count.size + SURE_QUARTERS, 0.9) / ndtri(0.9))
    return DutySpread(wider * float(np.sqrt(common)), float(np.sqrt(own)), int(count.size))
