"""Log-likelihood of Weibull lives whose sites share a gamma multiplier on the hazard, the multiplier's spread averaged
over its prior."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import special

from reliability.stats.errors import InvalidArgument
from reliability.stats.lifetimes import BoolArray, FloatArray, IntArray, Lifetimes
from reliability.stats.newton import PlaneTerms
from reliability.stats.site_quadrature import (
    SiteIntervals,
    site_interval_multipliers,
    site_interval_terms,
    site_intervals,
)
from reliability.stats.weibull_likelihood import LARGEST_LOG_HAZARD, reference_log_age

SMALLEST_SPREAD, LARGEST_SPREAD = 1e-4, 30.0
COARSE_STEP = 0.3
# log posterior this far below its top adds nothing to the digits that count
NEGLIGIBLE = 16.0


@dataclass(frozen=True, eq=False)
class SpreadNodes:
    """Values of the spread nu and the logs of their prior masses, shapes (K,)."""

    spreads: FloatArray
    log_masses: FloatArray


def spread_nodes(prior_mean: float, lowest: float, highest: float, step: float) -> SpreadNodes:
    """Trapezoid in log nu under an exponential prior; the lowest node carries the prior mass below it as well.

    However small the spread, the likelihood then no longer changes: so little is lost below a node near that.
    """
    count = max(8, math.ceil(math.log(highest / lowest) / step) + 1)
    logs = np.linspace(math.log(lowest), math.log(highest), count)
    spreads = np.exp(logs)
    masses = spreads / prior_mean * np.exp(-spreads / prior_mean) * (logs[1] - logs[0])
    masses[[0, -1]] *= 0.5
    masses[0] += -math.expm1(-lowest / prior_mean)
    return SpreadNodes(spreads, np.log(masses))


@dataclass(frozen=True, eq=False)
class SiteSums:
    """Per site: exact failures D, and the cumulative hazard with its derivatives in (log shape, level), shapes (S,)."""

    failures: FloatArray
    hazard: FloatArray
    by_shape: FloatArray
    by_shape_twice: FloatArray


@dataclass(frozen=True, eq=False)
class SiteLikelihood:
    """Log-likelihood in (log shape, level) as `WeibullLikelihood`, with a multiplier z_s on each site's hazard.

    z_s ~ Gamma(1 / nu, 1 / nu): mean 1, variance nu; nu ~ exponential with mean `prior_mean`. Given nu, a site with
    D exact failures and cumulative hazard A gives
        sum over j < D of log(1 + j nu) - (D + 1 / nu) log(1 + nu A)
    beside its exact failures' log shape + w - log age; a site with interval rows is integrated by quadrature. The
    likelihoods for the nodes of nu are added with their prior masses. Clayton, Biometrika 65 (1978) 141-151;
    Klein & Moeschberger (2003), chapter 13.
    """

    log_reference: float
    log_ages: FloatArray  # sorted by site, shape (n,)
    signed_weights: FloatArray  # shape (n,)
    first_row: IntArray  # where each site's rows begin; empty sites repeat the next beginning, shape (S,)
    has_rows: FloatArray  # 1 where a site has such rows, shape (S,)
    failures: FloatArray  # exact failures of each site, shape (S,)
    sum_log_exact: float
    constant: float
    intervals: SiteIntervals | None
    nodes: SpreadNodes
    prior_mean: float

    def __call__(self, log_shape: float, level: float) -> PlaneTerms:
        """Value, slopes in log shape and level, second derivatives (shape twice, both, level twice)."""
        terms = self.node_terms(log_shape, level)
        if terms is None:
            return -math.inf, 0.0, 0.0, 0.0, 0.0, 0.0
        values = terms[0] + self.nodes.log_masses
        top = float(values.max())
        shares = np.exp(values - top)
        total = float(shares.sum())
        shares /= total
        _, by_shape, by_level, shape_twice, both, level_twice = terms
        mean_shape, mean_level = float(shares @ by_shape), float(shares @ by_level)
        value = top + math.log(total)
        if not math.isfinite(value):
            return -math.inf, 0.0, 0.0, 0.0, 0.0, 0.0
        return (
            value,
            mean_shape,
            mean_level,
            float(shares @ (shape_twice + by_shape * by_shape)) - mean_shape**2,
            float(shares @ (both + by_shape * by_level)) - mean_shape * mean_level,
            float(shares @ (level_twice + by_level * by_level)) - mean_level**2,
        )

    def node_terms(self, log_shape: float, level: float) -> FloatArray | None:
        """The six terms for each node of nu, shape (6, K); None where they overflow."""
        if not (abs(log_shape) < 50.0 and abs(level) < 1e300):
            return None
        shape = math.exp(log_shape)
        sums = self.site_sums(shape, level)
        with np.errstate(over="ignore", invalid="ignore", under="ignore", divide="ignore"):
            if self.intervals is None:
                terms = closed_form_terms(sums, self.nodes.spreads).sum(axis=1)
            else:
                plain = ~self.intervals.concerned
                terms = closed_form_terms(_only(sums, plain), self.nodes.spreads).sum(axis=1)
                terms += site_interval_terms(self.intervals, sums, shape, level, self.nodes.spreads).sum(axis=1)
        failures, tilt = float(self.failures.sum()), shape * self.sum_log_exact
        terms[0] += failures * (log_shape + level) + tilt + self.constant
        terms[1] += failures + tilt
        terms[2] += failures
        terms[3] += tilt
        return terms if np.isfinite(terms).all() else None

    def site_sums(self, shape: float, level: float) -> SiteSums:
        """Cumulative hazard of each site's signed rows and its derivatives in log shape."""
        y = shape * self.log_ages
        with np.errstate(over="ignore", under="ignore", invalid="ignore"):
            hazard = np.exp(np.minimum(y + level, LARGEST_LOG_HAZARD)) * self.signed_weights
            rows = np.stack([hazard, hazard * y, hazard * y * (y + 1.0)])
        # an empty site would repeat the next site's first row
        sums = np.add.reduceat(rows, self.first_row, axis=1) * self.has_rows
        return SiteSums(self.failures, np.maximum(sums[0], 0.0), sums[1], sums[2])

    def spread_shares(self, log_shape: float, level: float) -> FloatArray:
        """Posterior mass of each node of nu, given shape and level, shape (K,)."""
        terms = self.node_terms(log_shape, level)
        values = (terms[0] if terms is not None else 0.0) + self.nodes.log_masses
        shares = np.exp(values - values.max())
        return shares / shares.sum()

    def multipliers(self, log_shape: float, level: float) -> FloatArray:
        """Mean of each site's z given the records, averaged over nu, shape (S,)."""
        shape = math.exp(log_shape)
        sums, nu = self.site_sums(shape, level), self.nodes.spreads
        means = (1.0 + nu * sums.failures[:, None]) / (1.0 + nu * sums.hazard[:, None])
        if self.intervals is not None:
            means[self.intervals.concerned] = site_interval_multipliers(self.intervals, sums, shape, level, nu)
        return means @ self.spread_shares(log_shape, level)


def _only(sums: SiteSums, chosen: BoolArray) -> SiteSums:
    return SiteSums(sums.failures[chosen], sums.hazard[chosen], sums.by_shape[chosen], sums.by_shape_twice[chosen])


def closed_form_terms(sums: SiteSums, spreads: FloatArray) -> FloatArray:
    """The six terms of sites without interval rows, shape (6, S, K).

    With m = (1 + nu D) / (1 + nu A), the mean of z given the records, the slopes are -m dA and the second derivatives
    -m d2A + nu m^2 / (1 + nu D) dA dA.
    """
    nu = spreads[None, :]
    failures, hazard = sums.failures[:, None], sums.hazard[:, None]
    by_shape, by_shape_twice = sums.by_shape[:, None], sums.by_shape_twice[:, None]
    counted = 1.0 + nu * failures
    mean = counted / (1.0 + nu * hazard)
    gain = nu * mean * mean / counted
    value = rising_log(sums.failures, spreads) - (failures + 1.0 / nu) * np.log1p(nu * hazard)
    return np.stack(
        [
            value,
            -mean * by_shape,
            -mean * hazard,
            -mean * by_shape_twice + gain * by_shape * by_shape,
            -mean * by_shape + gain * by_shape * hazard,
            -mean * hazard + gain * hazard * hazard,
        ]
    )


def rising_log(counts: FloatArray, spreads: FloatArray) -> FloatArray:
    """log Gamma(D + 1 / nu) - log Gamma(1 / nu) - D log(1 / nu) = sum over j < D of log(1 + j nu), shape (S, K)."""
    counts, precision = counts[:, None], 1.0 / spreads[None, :]
    return special.gammaln(counts + precision) - special.gammaln(precision) - counts * np.log(precision)


def site_likelihood(lifetimes: Lifetimes, prior_mean: float, nodes: SpreadNodes | None = None) -> SiteLikelihood:
    """Prepare the rows once, sorted by site. Raises InvalidArgument without at least two sites."""
    if lifetimes.sites is None:
        raise InvalidArgument("No sites are given. Give each life its site, or ask for site_spread=False.")
    labels = lifetimes.site_labels
    if labels.size < 2:
        raise InvalidArgument(f"All lives are from the site {labels[0]}. With one site ask for site_spread=False.")
    if not (math.isfinite(prior_mean) and prior_mean > 0.0):
        raise InvalidArgument(f"The prior mean of the spread is {prior_mean:g}; it must be a number above 0.")
    log_reference = reference_log_age(lifetimes)
    codes, weights = lifetimes.site_codes, lifetimes.weights
    ends = np.where(lifetimes.is_interval, lifetimes.last_good, lifetimes.durations)
    late = lifetimes.entries > 0
    ages = np.concatenate([ends, lifetimes.entries[late]])
    signed = np.concatenate([weights, -weights[late]])
    sites = np.concatenate([codes, codes[late]])
    kept = ages > 0.0
    ages, signed, sites = _merged(ages[kept], signed[kept], sites[kept])
    starts = np.searchsorted(sites, np.arange(labels.size + 1))
    exact = lifetimes.is_exact
    log_exact = np.log(lifetimes.durations[exact])
    exact_weights = weights[exact]
    return SiteLikelihood(
        log_reference=log_reference,
        # one age of no weight keeps the last site's beginning inside the array
        log_ages=np.append(np.log(ages) - log_reference, 0.0),
        signed_weights=np.append(signed, 0.0),
        first_row=starts[:-1],
        has_rows=(np.diff(starts) > 0).astype(float),
        failures=np.bincount(codes[exact], weights=exact_weights, minlength=labels.size),
        sum_log_exact=float(exact_weights @ (log_exact - log_reference)),
        constant=-float(exact_weights @ log_exact),
        intervals=site_intervals(lifetimes, log_reference) if lifetimes.has_intervals else None,
        nodes=nodes or spread_nodes(prior_mean, SMALLEST_SPREAD, LARGEST_SPREAD * prior_mean, COARSE_STEP),
        prior_mean=prior_mean,
    )


def _merged(ages: FloatArray, signed: FloatArray, sites: IntArray) -> tuple[FloatArray, FloatArray, IntArray]:
    """Rows of one site and age added, sorted by site."""
    order = np.lexsort((ages, sites))
    ages, signed, sites = ages[order], signed[order], sites[order]
    new = np.append(True, (np.diff(ages) != 0.0) | (np.diff(sites) != 0)) if ages.size else np.zeros(0, dtype=bool)
    begins = np.flatnonzero(new)
    sums = np.add.reduceat(signed, begins) if begins.size else signed
    return ages[begins], sums, sites[begins]
