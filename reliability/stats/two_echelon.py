"""A depot and the sites it serves: pieces owed at the sites for a stock at each, in the long run.

One-for-one replenishment: each use at a site is ordered from the depot, each piece the depot gives is ordered (or
repaired) at once. Demand at each site is Poisson. A piece is owed at a site while a module waits for it.

METRIC: pipelines Poisson with the right mean (Sherbrooke 1968, Operations Research 16, 122). VARI-METRIC: negative
binomial with mean and variance (Graves 1985, Management Science 31, 1247; Sherbrooke 1986, Operations Research 34,
311). Exact: the depot's backorders divided among the sites at random (Simon 1971, Operations Research 19, 1341; Graves
1985), for a fixed time of shipping. METRIC understates what is owed up to five-fold at high stock.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import betainc, gammaln, pdtrc, xlog1py, xlogy

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]

METHODS = ("vari-metric", "metric", "exact")
MOST_PIECES = 20_000  # on the way to the depot at once, for the exact method
_ALMOST_POISSON = 1e-8


@dataclass(frozen=True, eq=False)
class TwoEchelon:
    """Depot: mean number on the way, pieces owed and their variance. Sites: the same, and backorders, each (sites,).

    backorders: pieces owed at each site at a random moment, which is modules waiting for one; total: their sum.
    """

    method: str
    depot_pipeline: float
    depot_backorders: float
    depot_variance: float
    pipeline: FloatArray
    pipeline_variance: FloatArray
    backorders: FloatArray

    @property
    def total(self) -> float:
        return float(self.backorders.sum())


def two_echelon_backorders(
    demand: ArrayLike,
    site_stock: ArrayLike,
    depot_stock: int,
    *,
    depot_time: float,
    ship_time: ArrayLike,
    repaired_on_site: ArrayLike = 0.0,
    site_repair_time: ArrayLike = 0.0,
    method: str = "vari-metric",
) -> TwoEchelon:
    """Expected backorders at each site.

    demand: pieces a unit of time at each site, (sites,); site_stock: whole numbers (sites,); depot_stock: a whole
    number. depot_time: from the depot's order (or repair) to the shelf, mean; ship_time: from the depot to each site
    when the depot has the piece; repaired_on_site: share put right at the site itself, in site_repair_time. Times in
    the unit of demand. With O the mean number on the way to the depot, B its backorders and f_i a site's share of the
    depot's demand: mean_i = d_i (1 - r_i) ship_i + d_i r_i repair_i + f_i E B,
    variance_i = mean_i + f_i^2 (Var B - E B). Raises InvalidArgument.
    """
    world = Pipelines(demand, depot_time, ship_time, repaired_on_site, site_repair_time)
    kept = np.asarray(site_stock, dtype=np.float64)
    if kept.shape != world.direct.shape:
        raise InvalidArgument(f"Stock is given for {kept.size} sites and demand for {world.direct.size}.")
    refuse_stock(kept, "stock at a site")
    refuse_stock(np.asarray(depot_stock, dtype=np.float64), "stock at the depot")
    if method not in METHODS:
        raise InvalidArgument(f"The method is {method!r}; it must be one of {', '.join(METHODS)}.")
    mean, variance = world.depot_backorders(int(depot_stock))
    pipeline = world.direct + world.share * mean
    spread = pipeline + world.share**2 * (variance - mean)
    if method == "exact":
        owed = world.exact(int(depot_stock), kept)
    else:
        owed = backorders_by_moments(pipeline, pipeline if method == "metric" else spread, kept)
    return TwoEchelon(method, world.depot, mean, variance, pipeline, pipeline if method == "metric" else spread, owed)


class Pipelines:
    """Validated once: what is on the way to the depot, to the sites without it, and the sites' shares of its demand."""

    def __init__(
        self,
        demand: ArrayLike,
        depot_time: float,
        ship_time: ArrayLike,
        repaired_on_site: ArrayLike = 0.0,
        site_repair_time: ArrayLike = 0.0,
    ) -> None:
        rate = np.asarray(demand, dtype=np.float64)
        if rate.ndim != 1 or not rate.size:
            raise InvalidArgument("Demand must be a list with one number for each site.")
        columns = {"demand": rate}
        for name, values in (
            ("ship_time", ship_time),
            ("repaired_on_site", repaired_on_site),
            ("site_repair_time", site_repair_time),
        ):
            given = np.asarray(values, dtype=np.float64)
            if given.ndim and given.shape != rate.shape:
                raise InvalidArgument(f"{name} has shape {given.shape}; give one number, or one for each site.")
            columns[name] = np.broadcast_to(given, rate.shape)
        columns["depot_time"] = np.asarray(depot_time, dtype=np.float64)
        for name, given in columns.items():
            if not (np.isfinite(given).all() and (given >= 0).all()):
                raise InvalidArgument(f"{name} must be finite and at least 0.")
        if (columns["repaired_on_site"] > 1).any():
            raise InvalidArgument("repaired_on_site is a share; it must be at most 1.")
        to_depot = rate * (1.0 - columns["repaired_on_site"])
        total = float(to_depot.sum())
        self.depot = total * float(columns["depot_time"])
        self.share = to_depot / total if total > 0 else np.zeros(rate.shape)
        self.direct = to_depot * columns["ship_time"] + rate * columns["repaired_on_site"] * columns["site_repair_time"]

    def depot_backorders(self, stock: int) -> tuple[float, float]:
        """Mean and variance of the pieces the depot owes: (X - s)+ for X Poisson.

        E (X-s)+ (X-s-1)+ = m^2 P(X >= s-1) - 2 s m P(X >= s) + s (s+1) P(X > s), the second factorial moment.
        """
        m, s = self.depot, float(stock)
        above, at_least, before = (_poisson_above(s - back, m) for back in (0, 1, 2))
        mean = max(float(m * at_least - s * above), 0.0)
        factorial = max(float(m * m * before - 2.0 * s * m * at_least + s * (s + 1.0) * above), 0.0)
        return mean, max(factorial + mean - mean**2, 0.0)

    def exact(self, depot_stock: int, site_stock: FloatArray) -> FloatArray:
        """Backorders at the sites by the full distribution: owed pieces are each site's with its share's chance."""
        if self.depot > MOST_PIECES:
            raise InvalidArgument(
                f"{self.depot:,.0f} pieces are on the way to the depot; the exact method takes at most "
                f"{MOST_PIECES:,}. Use vari-metric."
            )
        owed = _poisson_pmf(self.depot)[depot_stock:]
        owed = np.concatenate([[1.0 - owed[1:].sum()], owed[1:]]) if owed.size else np.array([1.0])
        found = np.empty(self.direct.size)
        cases = list(zip(self.share, self.direct, site_stock, strict=True))
        answers: dict[tuple[float, float, float], float] = {}
        for index, case in enumerate(cases):
            if case not in answers:
                answers[case] = _exact_site(owed, *case)
            found[index] = answers[case]
        return found


def backorders_by_moments(mean: ArrayLike, variance: ArrayLike, stock: ArrayLike) -> FloatArray:
    """E (X - s)+, X negative binomial with these moments (Poisson where the variance is not above the mean).

    With p = mean / variance, size k = mean p / (1 - p), and k pmf(x; k) x = mean pmf(x - 1; k + 1):
    E (X - s)+ = mean P(X' >= s) - s P(X > s), X' of size k + 1. Broadcasts.
    """
    m, v, s = np.broadcast_arrays(*(np.asarray(each, dtype=np.float64) for each in (mean, variance, stock)))
    spread = v > m * (1.0 + _ALMOST_POISSON)
    found = np.maximum(m * _poisson_above(s - 1.0, m) - s * _poisson_above(s, m), 0.0)
    if spread.any():
        p = np.where(spread, m / np.where(spread, v, 1.0), 0.5)
        size = np.where(spread, m * p / (1.0 - p), 1.0)
        # P(X > s) = I_{1-p}(s + 1, size)
        above = betainc(s + 1.0, size, 1.0 - p)
        at_least = np.where(s > 0, betainc(np.maximum(s, 1.0), size + 1.0, 1.0 - p), 1.0)
        found = np.where(spread, np.maximum(m * at_least - s * above, 0.0), found)
    return found


def refuse_stock(values: FloatArray, name: str) -> None:
    """Raises InvalidArgument unless these are whole numbers of at least 0."""
    if not (np.isfinite(values).all() and (values >= 0).all() and (values == np.floor(values)).all()):
        raise InvalidArgument(f"The {name} must be a whole number of at least 0.")


def _poisson_above(count: ArrayLike, mean: ArrayLike) -> FloatArray:
    """P(X > count), 1 below 0."""
    given = np.asarray(count, dtype=np.float64)
    return np.where(given >= 0, pdtrc(np.maximum(given, 0.0), mean), 1.0)


def _poisson_pmf(mean: float) -> FloatArray:
    counts = np.arange(int(np.ceil(mean + 12.0 * np.sqrt(mean))) + 30)
    return np.exp(xlogy(counts, mean) - mean - gammaln(counts + 1.0))


def _exact_site(owed: FloatArray, share: float, direct: float, stock: float) -> float:
    """E (thinned depot backorders + Poisson(direct) - stock)+."""
    total = np.arange(owed.size)
    mine = np.zeros(owed.size)
    # rows of the binomial in blocks, so that memory stays small
    for first in range(0, owed.size, 512):
        b = total[first : first + 512, None]
        k = total[None, : first + 512]
        inside = k <= b
        gap = np.where(inside, b - k, 0)
        logs = gammaln(b + 1.0) - gammaln(k + 1.0) - gammaln(gap + 1.0) + xlogy(k, share) + xlog1py(gap, -share)
        mine[: k.size] += owed[first : first + 512] @ np.where(inside, np.exp(np.where(inside, logs, 0.0)), 0.0)
    pmf = np.convolve(mine, _poisson_pmf(direct))
    short = np.arange(pmf.size) - stock
    return float(pmf[short > 0] @ short[short > 0])
