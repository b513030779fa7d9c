"""The answer to “how long do they live?”: one document for the command, the screen and the files."""

from __future__ import annotations

import datetime as dt
import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from django.utils import timezone

from reliability.fleet_lives import FleetLives
from reliability.kept import kept
from reliability.lifetimes_from_fleet import lives

if TYPE_CHECKING:
    from reliability.stats.fitted import LifeFit
    from reliability.stats.lifetimes import Lifetimes

FEWEST_FAILURES = 5  # below, no maximum-likelihood shape is shown
SHOWN_TO_LAST, TEST_LENGTH = 0.9, 2.0  # a test that shows nine in ten to last an age, run to twice that age
MOST_FITTED = 60  # groups; beyond them the curve alone speaks, so that an answer comes in seconds
ALL = "all"
QUANTITIES: dict[str, Any] = {"b10": ("quantile", 0.1), "median": ("quantile", 0.5), "mean": "mean"}
STATES = ("failed", "running", "withdrawn", "worn", "not known", "other mode")
NOT_FITTED = ("b10", "median", "mean", "weibull", "independent", "few_failures", "fitted")
PARAMETERS: dict[str, Any] = {"shape": "shape", "scale": "scale"}


def kept_life_document(component: str, **choices: Any) -> dict[str, Any]:
    """As `life_document`, read where it was computed before from the same data."""
    choices.setdefault("as_of", timezone.localdate())
    question = {"component": component, **{name: value for name, value in choices.items() if value is not None}}
    return kept("life", question, lambda: life_document(component, **choices))


def life_document(
    component: str,
    *,
    clock: str | None = None,
    by: str | None = None,
    sites: Sequence[str] | None = None,
    parts: Sequence[str] | None = None,
    types: Sequence[str] | None = None,
    modes: Sequence[str] | None = None,
    as_of: dt.date | None = None,
    with_rigs: bool = False,
    worn_is_failure: bool = True,
    life_set: str | None = None,
    confidence: float = 0.95,
    most: int | None = None,
) -> dict[str, Any]:
    """What JSON can hold: numbers are finite, a missing or endless limit is None beside a flag.

    `most`: only so many groups, those with most lives; the others are counted in `more_groups`.
    """
    found = lives(
        component,
        clock=clock,
        by=by,
        sites=sites,
        parts=parts,
        types=types,
        modes=modes,
        as_of=as_of,
        with_rigs=with_rigs,
        worn_is_failure=worn_is_failure,
        life_set=life_set,
    )
    return document_of(found, confidence, most)


def document_of(found: FleetLives, confidence: float = 0.95, most: int | None = None) -> dict[str, Any]:
    from reliability.wording import life_sentence

    by_lives = sorted(found.groups, key=lambda label: -found.count(*STATES, group=label))
    # the one that most parts still run of is always told: it matters most now
    running = max(by_lives, key=lambda label: found.count("running", group=label), default=None)
    by_lives.sort(key=lambda label: label != running)
    shown = set(by_lives[:most])
    fitted = set(by_lives[:MOST_FITTED])
    document: dict[str, Any] = {
        "component": found.component,
        "component_name": found.component_name,
        "clock": found.clock,
        "as_of": found.as_of.isoformat(),
        "confidence": confidence,
        "by": found.by,
        "modes": list(found.modes),
        "mode_names": found.mode_names,
        "life_set": found.life_set,
        "groups": [_group(found, label, confidence, fit=label in fitted) for label in found.groups if label in shown],
        "more_groups": [_counts(found, label) for label in found.groups if label not in shown],
        "at_risk": _at_risk(found, shown),
        "left_out": [{"reason": row.reason, "count": row.count} for row in found.left_out],
        "warnings": list(found.warnings),
    }
    for group in document["groups"]:
        group["sentence"] = life_sentence(document, group)
    return document


def _at_risk(found: FleetLives, shown: set[str]) -> dict[str, Any]:
    """Parts under observation at a few round ages, by group."""
    from reliability.risk_ages import under_observation

    if found.lifetimes is None:
        return {"age": [], "counts": {}}
    counted = under_observation(found.lifetimes, [label for label in found.groups if label in shown])
    return {**counted, "counts": {label or ALL: counts for label, counts in counted["counts"].items()}}


def _counts(found: FleetLives, label: str) -> dict[str, Any]:
    return {
        "group": label or ALL,
        "lives": found.count(*STATES, group=label),
        "failures": found.count("failed", group=label),
        "running": found.count("running", group=label),
    }


def _group(found: FleetLives, label: str, confidence: float, *, fit: bool) -> dict[str, Any]:
    assert found.lifetimes is not None
    chosen = found.lifetimes.groups == label
    lifetimes = found.lifetimes.subset(chosen)
    answer: dict[str, Any] = {
        **_counts(found, label),
        "removed_otherwise": found.count("withdrawn", "worn", "not known", "other mode", group=label),
        "exposure": finite(lifetimes.exposure),
        "sites": len(lifetimes.site_labels),
        "notes": [],
    }
    answer["curve"] = curve_of(lifetimes, confidence, answer["notes"])
    answer.update(_estimates(lifetimes, confidence, answer["notes"]) if fit else dict.fromkeys(NOT_FITTED))
    if found.if_not_known_failed is not None:
        other = found.if_not_known_failed.subset(chosen)
        answer["if_not_known_failed"] = {"failures": _count(other.failures), **_estimates(other, confidence, [])}
    return answer


def _estimates(lifetimes: Lifetimes, confidence: float, notes: list[str]) -> dict[str, Any]:
    """B10, median, mean and Weibull; where sites differ from that likelihood, with independent lives beside it."""
    from reliability.fitted_line import fitted_line
    from reliability.stats.errors import StatisticsError
    from reliability.stats.weibull_fit import fit_weibull

    answer: dict[str, Any] = {**dict.fromkeys(QUANTITIES), "weibull": None, "independent": None, "few_failures": None}
    answer["fitted"] = None
    if lifetimes.failures < FEWEST_FAILURES:
        return {**answer, "few_failures": _few_failures(lifetimes, confidence)}
    try:
        fit = fit_weibull(lifetimes)
    except StatisticsError as error:
        notes.append(str(error))
        return {**answer, "few_failures": _few_failures(lifetimes, confidence)}
    answer.update(_told_by(fit, confidence, notes), fitted=fitted_line(fit, lifetimes, confidence))
    if len(lifetimes.site_labels) > 1:
        try:
            between = fit_weibull(lifetimes, site_spread=True)
        except StatisticsError as error:
            notes.append(f"The spread between sites could not be estimated: {error}")
            return answer
        independent = {name: answer[name] for name in (*QUANTITIES, "weibull")}
        answer.update(_told_by(between, confidence, notes))
        answer["weibull"].update(_between_sites(between, confidence))
        answer["independent"] = independent
    return answer


def _told_by(fit: LifeFit, confidence: float, notes: list[str]) -> dict[str, Any]:
    answer = {name: interval_of(fit, quantity, confidence, notes) for name, quantity in QUANTITIES.items()}
    weibull: dict[str, Any] = {
        name: interval_of(fit, quantity, confidence, notes) for name, quantity in PARAMETERS.items()
    }
    weibull.update(
        log_likelihood=finite(fit.log_likelihood),
        aicc=finite(fit.aicc),
        method="likelihood-ratio",
        distribution=fit.distribution,
        wald={name: interval_of(fit, quantity, confidence, [], "wald") for name, quantity in PARAMETERS.items()},
    )
    return {**answer, "weibull": weibull}


def _between_sites(fit: Any, confidence: float) -> dict[str, Any]:
    low, high = fit.spread_interval(confidence)
    return {
        "site_spread": {"estimate": finite(fit.spread), "lower": finite(low), "upper": finite(high)},
        "site_multipliers": {str(site): finite(value) for site, value in fit.site_multipliers.items()},
    }


def interval_of(
    fit: LifeFit, quantity: Any, confidence: float, notes: list[str], method: str = "likelihood-ratio"
) -> dict[str, Any]:
    """Estimate and limits; a limit that the records do not give is None and named in `unbounded`."""
    from reliability.stats.errors import StatisticsError

    try:
        found = fit.interval(quantity, confidence, method)
    except StatisticsError as error:
        notes.append(str(error))
        return {"estimate": None, "lower": None, "upper": None, "unbounded": ["lower", "upper"]}
    answer: dict[str, Any] = {
        "estimate": finite(found.estimate),
        "lower": finite(found.lower),
        "upper": finite(found.upper),
    }
    open_ends = [
        name
        for name, unbounded in (("lower", found.lower_unbounded), ("upper", found.upper_unbounded))
        if unbounded or answer[name] is None
    ]
    if open_ends:
        answer["unbounded"] = open_ends
    return answer


def _few_failures(lifetimes: Lifetimes, confidence: float) -> dict[str, Any]:
    """What so few failures still bound, over a range of assumed shapes, and what would demonstrate more."""
    from reliability.stats.few_failures import known_shape_bounds, success_run_size

    bounds = known_shape_bounds(lifetimes, probability=0.1, confidence_level=confidence)
    return {
        "confidence": confidence,
        "bounds": [
            {
                "shape": bound.shape,
                "b10_lower": finite(bound.quantile_lower),
                "mean_lower": finite(bound.mean_lower),
                "scale": finite(bound.scale),
                "scale_lower": finite(bound.scale_lower),
                "parts_to_twice": success_run_size(
                    SHOWN_TO_LAST, confidence, life_ratio=TEST_LENGTH, shape=bound.shape
                ),
            }
            for bound in bounds
        ],
        "parts_for_nine_in_ten": success_run_size(SHOWN_TO_LAST, confidence),
    }


def curve_of(lifetimes: Lifetimes, confidence: float, notes: list[str]) -> dict[str, Any]:
    """The non-parametric curve from its start, with log-log band and numbers at risk."""
    from reliability.survival_curve import survival_curve

    curve = survival_curve(lifetimes, confidence)
    notes.extend(curve.notes)
    return {
        "age": [finite(age) for age in curve.ages],
        "survival": [finite(value) for value in curve.survival],
        "lower": [finite(value) for value in curve.lower],
        "upper": [finite(value) for value in curve.upper],
        "at_risk": [_count(value) for value in curve.at_risk],
        "failures": [_count(value) for value in curve.failures],
        "given_survival_to": finite(curve.given_survival_to),
        "last_age": finite(curve.last_age),
        "method": curve.method,
        "band": curve.band,
        "median": _quantile(curve, 0.5),
        "b10": _quantile(curve, 0.1),
    }


def _quantile(curve: Any, probability: float) -> dict[str, Any]:
    """Read off the curve: limits of None say that the band does not come down to it."""
    estimate, lower, upper = curve.quantile(probability)
    return {
        "estimate": finite(estimate),
        "lower": finite(lower),
        "upper": finite(upper),
        "reached": estimate is not None,
    }


def finite(value: float | None) -> float | None:
    """A number that JSON can hold; whole numbers stay whole."""
    if value is None or not math.isfinite(value):
        return None
    return int(value) if float(value).is_integer() and abs(value) < 2**53 else float(value)


def _count(value: float) -> int | float:
    whole = round(float(value))
    return whole if abs(whole - float(value)) < 1e-9 else float(value)
