"""How much longer do parts of one group live, up to a horizon: the difference of restricted mean lives."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy import special

from reliability.stats.errors import InvalidArgument, TooFewFailures, UndefinedEstimate
from reliability.stats.kaplan_meier import RestrictedMean, delayed_start, kaplan_meier
from reliability.stats.lifetimes import FloatArray, IntArray, Lifetimes
from reliability.stats.profile_intervals import normal_quantile

INTERVALS = ("log-log", "normal", "sites")
MOST_CELLS = 2_000_000  # of a table of sites and ages held at once
ROUNDING = 1e-9  # sums of weights up and down may leave dust where nobody is at risk


@dataclass(frozen=True, eq=False)
class RestrictedMeanDifference:
    """E[min(T, horizon)] of the second group less that of the first, in the unit of the durations.

    Above 0: the second group lives longer. first and second carry each group's own mean. given_survival_to: age from
    which both are counted (0 from new). interval names the method of lower and upper; p_value is two-sided, normal
    (Student's t with sites - 1 degrees of freedom for "sites").
    """

    estimate: float
    lower: float
    upper: float
    p_value: float
    standard_error: float
    horizon: float
    confidence_level: float
    interval: str
    given_survival_to: float
    first: RestrictedMean
    second: RestrictedMean


def restricted_mean_difference(
    first: Lifetimes,
    second: Lifetimes,
    horizon: float,
    confidence_level: float = 0.95,
    *,
    interval: str = "log-log",
    minimum_at_risk: float = 0,
) -> RestrictedMeanDifference:
    """Mean age reached by the horizon in the second group less the first, from the Kaplan–Meier curves.

    interval "log-log": each mean's limits on log(-log(mean / horizon)), joined as d - sqrt((m2 - l2)^2 + (u1 - m1)^2)
    and its mirror (Zou & Donner, Statistics in Medicine 27 (2008) 1693-1702), never beyond ± horizon. "normal":
    d ± z sqrt(v1 + v2). Both take lives as independent. "sites": whole sites left out in turn (jackknife, t with
    sites - 1 degrees of freedom): for sites that differ; sites of both groups are left out together.
    minimum_at_risk: as kaplan_meier; both groups then start at the later of their two starts.

    Royston & Parmar, BMC Medical Research Methodology 13 (2013) 152; Klein & Moeschberger (2003), section 4.5.
    Raises TooFewFailures where a group has no failure before the horizon, UndefinedEstimate where its failures do not
    vary, InvalidArgument for a horizon beyond the last age observed, UnsupportedRows for rows with last_good.
    """
    z = normal_quantile(confidence_level)
    if interval not in INTERVALS:
        raise InvalidArgument(f"The interval {interval!r} is not known. Choose one of {', '.join(INTERVALS)}.")
    start = max(delayed_start(lives, minimum_at_risk, None) for lives in (first, second))
    means = [_mean(lives, horizon, confidence_level, start) for lives in (first, second)]
    estimate = means[1].estimate - means[0].estimate
    if interval == "sites":
        error, freedom = _site_error(first, second, horizon, start)
        half = error * float(special.stdtrit(freedom, 0.5 + 0.5 * confidence_level))
        lower, upper = estimate - half, estimate + half
        p_value = 2.0 * float(special.stdtr(freedom, -abs(estimate) / error)) if error > 0.0 else 1.0
    else:
        _refuse_no_spread(means, (first, second))
        error = math.sqrt(means[0].variance + means[1].variance)
        p_value = 2.0 * float(special.ndtr(-abs(estimate) / error))
        lower, upper = estimate - z * error, estimate + z * error
        if interval == "log-log":
            (low1, high1), (low2, high2) = (_log_log_limits(mean, start, z) for mean in means)
            lower = estimate - math.hypot(means[1].estimate - low2, high1 - means[0].estimate)
            upper = estimate + math.hypot(high2 - means[1].estimate, means[0].estimate - low1)
    return RestrictedMeanDifference(
        estimate=estimate,
        lower=lower,
        upper=upper,
        p_value=min(1.0, p_value),
        standard_error=error,
        horizon=float(horizon),
        confidence_level=confidence_level,
        interval=interval,
        given_survival_to=start,
        first=means[0],
        second=means[1],
    )


def _mean(lives: Lifetimes, horizon: float, confidence_level: float, start: float) -> RestrictedMean:
    return kaplan_meier(lives, confidence_level, given_survival_to=start).restricted_mean(horizon)


def _refuse_no_spread(means: list[RestrictedMean], groups: tuple[Lifetimes, Lifetimes]) -> None:
    for name, mean, lives in zip(("first", "second"), means, groups, strict=True):
        if mean.variance > 0.0:
            continue
        if mean.estimate >= mean.horizon * (1.0 - 1e-12):
            raise TooFewFailures(
                f"No failure in the {name} group before the horizon {mean.horizon:g} ({lives.count:g} lives), so its "
                "mean has no interval. Choose a later horizon, or take the bound that few failures give.",
                failures=0,
                needed=1,
            )
        raise UndefinedEstimate(
            f"All lives of the {name} group that were at risk failed at one age, so nothing tells how its mean may "
            "vary. Wait for more records."
        )


def _log_log_limits(mean: RestrictedMean, start: float, z: float) -> tuple[float, float]:
    reach = mean.horizon - start
    share = (mean.estimate - start) / reach
    stretch = math.exp(min(z * mean.standard_error / reach / (share * -math.log(share)), 700.0))
    return start + reach * share**stretch, start + reach * share ** (1.0 / stretch)


def _site_error(first: Lifetimes, second: Lifetimes, horizon: float, start: float) -> tuple[float, int]:
    """Jackknife standard error over sites and its degrees of freedom."""
    if first.sites is None or second.sites is None:
        raise InvalidArgument('Leaving sites out needs the site of each life. Give sites, or choose "log-log".')
    sites = list(dict.fromkeys([*first.site_labels.tolist(), *second.site_labels.tolist()]))
    if len(sites) < 3:
        raise InvalidArgument(
            f'{len(sites)} sites are too few to leave one out in turn; 3 are needed. Choose the interval "log-log".'
        )
    differences = np.zeros(len(sites))
    for lives, sign in ((first, -1.0), (second, 1.0)):
        differences += sign * means_without_sites(lives, sites, horizon, start)
    unknown = np.flatnonzero(np.isnan(differences))
    if unknown.size:
        raise UndefinedEstimate(
            f"Without the site {sites[unknown[0]]} the means up to {horizon:g} are not known. Choose an earlier "
            'horizon, or the interval "log-log".'
        )
    count = differences.size
    spread = ((differences - differences.mean()) ** 2).sum()
    return float(np.sqrt((count - 1.0) / count * spread)), count - 1


def means_without_sites(lives: Lifetimes, sites: list[Any], horizon: float, start: float) -> FloatArray:
    """Restricted mean with each of the sites left out in turn, shape (S,); NaN where it is not known up to the horizon.

    From failures and numbers at risk of each site at each failure age: the curve without a site has the total less its
    own, so that nothing is sorted again. All curves at once, by blocks of sites.
    """
    place = {site: number for number, site in enumerate(sites)}
    codes = np.array([place[site] for site in lives.site_labels.tolist()])[lives.site_codes]
    times = np.unique(lives.durations[lives.observed])
    times = times[times > start]
    step = np.searchsorted(times, lives.durations, side="left")
    enters = np.searchsorted(times, lives.entries, side="right")
    leaves = np.searchsorted(times, lives.durations, side="right")
    died = lives.observed & (lives.durations > start)
    last_ages = _last_ages_without(lives.durations, codes, len(sites))
    weights = np.asarray(lives.weights, dtype=float)
    total_failed = np.bincount(step[died], weights=weights[died], minlength=times.size)[: times.size]
    changes = np.bincount(enters, weights=weights, minlength=times.size + 1)
    changes -= np.bincount(leaves, weights=weights, minlength=times.size + 1)
    total_at_risk = np.cumsum(changes)[:-1]
    inside = int(np.searchsorted(times, horizon, side="right"))
    widths = np.diff(np.concatenate([[start], times[:inside], [horizon]]))
    block = max(1, MOST_CELLS // max(times.size, 1))
    order = np.argsort(codes, kind="stable")
    bounds = np.searchsorted(codes[order], np.arange(0, len(sites) + block, block))
    means = np.empty(len(sites))
    for number, low in enumerate(range(0, len(sites), block)):
        rows, size = order[bounds[number] : bounds[number + 1]], min(block, len(sites) - low)
        own, width = (codes[rows] - low) * (times.size + 1), times.size + 1
        gone = died[rows]
        failed = _table(own[gone] + step[rows][gone], weights[rows][gone], size, width)[:, :-1]
        at_risk = _table(own + enters[rows], weights[rows], size, width)
        at_risk -= _table(own + leaves[rows], weights[rows], size, width)
        left = total_at_risk - np.cumsum(at_risk, axis=1)[:, :-1]
        hazard = np.divide(total_failed - failed, left, out=np.zeros_like(left), where=left > ROUNDING)
        survival = np.cumprod(np.maximum(1.0 - hazard, 0.0), axis=1)
        areas = widths[0] + survival[:, :inside] @ widths[1:]
        ended = survival[:, -1] == 0.0 if times.size else np.zeros(size, dtype=bool)
        last = last_ages[low : low + size]
        known = (last > start) & (ended | (horizon <= last))
        means[low : low + size] = np.where(known, start + areas, np.nan)
    return means


def _table(cells: IntArray, weights: FloatArray, height: int, width: int) -> FloatArray:
    sums = np.bincount(cells, weights=weights, minlength=height * width).astype(np.float64, copy=False)
    return sums.reshape(height, width)


def _last_ages_without(durations: FloatArray, codes: IntArray, count: int) -> FloatArray:
    """The greatest age among the lives of all other sites; -inf where there are none."""
    greatest = np.full(count, -np.inf)
    np.maximum.at(greatest, codes, durations)
    top = int(np.argmax(greatest))
    others = np.delete(greatest, top).max(initial=-np.inf)
    without = np.full(count, greatest[top])
    without[top] = others
    return without
