"""How much longer do parts of one group live, up to a horizon: the difference of restricted mean lives."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import special

from reliability.stats.errors import InvalidArgument, StatisticsError, TooFewFailures, UndefinedEstimate
from reliability.stats.kaplan_meier import RestrictedMean, delayed_start, kaplan_meier
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.profile_intervals import normal_quantile

INTERVALS = ("log-log", "normal", "sites")


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
                "mean has no interval. Choose a later horizon, or ask for the bound that few failures give "
                "(known_shape_bounds).",
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
    differences = []
    for site in sites:
        try:
            means = []
            for lives in (first, second):
                kept = np.asarray(lives.sites != site)
                part = lives if kept.all() else lives.subset(kept)
                means.append(_mean(part, horizon, 0.95, start).estimate)
        except StatisticsError as error:
            raise UndefinedEstimate(
                f"Without the site {site} the means up to {horizon:g} are not known. Choose an earlier horizon, or the "
                'interval "log-log".'
            ) from error
        differences.append(means[1] - means[0])
    values = np.array(differences)
    count = values.size
    return float(np.sqrt((count - 1.0) / count * ((values - values.mean()) ** 2).sum())), count - 1
