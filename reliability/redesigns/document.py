"""The evidence on one component of a redesign as one document: for the page, the print, the files and the command."""

from __future__ import annotations

from typing import Any

import numpy as np

from fleet.models import FailureMode, Site
from reliability.fleet_lives import FleetLives
from reliability.kept import kept
from reliability.life_answer import document_of, finite
from reliability.redesigns.candidates import candidates_of, rigs_of
from reliability.redesigns.comparability import Comparability, comparability, duties_of
from reliability.redesigns.compared import AFTER, BEFORE, Compared, all_history, at_the_same_time
from reliability.redesigns.evidence import at_like_duty, evidence_of, told_ratio
from reliability.redesigns.few import FEW, few_failures_of
from reliability.redesigns.fitting_faults import fitting_faults
from reliability.redesigns.lives_of_positions import position_records
from reliability.redesigns.question import RedesignQuestion
from reliability.redesigns.single_modes import single_modes
from reliability.redesigns.watching import ahead_of, looks_of, verdict_of, weeks_watched
from reliability.redesigns.with_past import sides_with_past
from reliability.stats.difference import life_ratio
from reliability.stats.errors import StatisticsError
from reliability.stats.life_ratio_posterior import LifeRatioPosterior, life_ratio_posterior
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.ranks import ranked
from reliability.stats.weibull_fit import fit_weibull

Paired = tuple[tuple[Lifetimes, Lifetimes], dict[str, Any]] | None

# Over all history only the ratio with sites that differ is shown: the others would cost as much again.
ASIDE = ("positions differ", "one shape for both", "lives independent")


def kept_redesign(question: RedesignQuestion) -> dict[str, Any]:
    """Read where it was computed before from the same data."""
    found: dict[str, Any] = kept("redesign", question.asked(), lambda: redesign_document(question))
    return found


def redesign_document(question: RedesignQuestion) -> dict[str, Any]:
    """Numbers are finite; what cannot be told is None, with its reason among the notes."""
    choices: dict[str, Any] = {
        "as_of": question.as_of,
        "sites": list(question.sites) if question.sites is not None else None,
    }
    sides = (question.component, question.new, question.old)
    parts = dict.fromkeys([*question.new, *question.old, *question.also])
    choices["records"] = position_records(question.component, list(parts), as_of=question.as_of)
    whole = all_history(*sides, with_rigs=True, **choices)
    everything = whole.without_rigs()
    beside = at_the_same_time(*sides, not_before=question.not_before, **choices)
    alike = comparability(everything, beside)
    if question.modes:
        everything, beside = everything.if_only(question.modes), beside.if_only(question.modes)
    names = {mode.code: mode.title for mode in FailureMode.objects.filter(component=question.component)}
    paired = sides_with_past(everything, beside.starts)
    posterior, reason = _posterior(paired)
    chances = None
    if posterior is not None:
        chances = {"longer": posterior.probability(), "hope": posterior.probability(question.hope)}
    shape = _old_shape(everything)
    looks = looks_of(beside, everything)
    now = looks[-1] if looks else None
    verdict, path = verdict_of(looks, question.hope, shape, chances["longer"] if chances else None)
    history = _curves(everything, question)
    return {
        **question.asked(),
        "component_name": question.component.title,
        "clock": everything.clock,
        "mode_names": [names.get(code, code) for code in question.modes],
        "verdict": verdict,
        "path": path,
        "weeks_watched": weeks_watched(beside),
        "chances": chances,
        "chances_missing": reason,
        "ahead": None if posterior is None else ahead_of(beside, now, verdict, posterior.effects(), _a_module(beside)),
        "same_dates": {
            **_with_past(
                evidence_of(beside, question.confidence, without=["positions differ"]), paired, question.confidence
            ),
            "at_like_duty": _at_like_duty(beside, alike, question.confidence),
            "curves": _curves(beside, question),
        },
        "all_history": {
            **evidence_of(everything, question.confidence, without=ASIDE, now=looks[-1] if looks else None),
            "curves": history,
        },
        "starts": {site: day.isoformat() for site, day in sorted(beside.starts.items())},
        "comparability": _told(alike),
        "by_mode": {"age": None, "rows": []} if question.modes else single_modes(beside, names, question.confidence),
        "fitting_faults": fitting_faults(everything, question.confidence),
        "candidates": candidates_of(question, choices),
        "rigs": rigs_of(question, whole, choices),
        "few": few_failures_of(everything, question.confidence, _target(history, question.hope), shape),
        "records": _records(everything),
        "left_out": [{"reason": reason, "count": count} for reason, count in sorted(everything.left_out.items())],
    }


def _curves(lives: Compared, question: RedesignQuestion) -> dict[str, Any] | None:
    """Both sides as a document of lives: curves with bands, numbers at risk, B10, median, mean, shape."""
    if lives.lifetimes is None:
        return None
    labels = {BEFORE: " and ".join(question.old), AFTER: " and ".join(question.new)}
    pooled, states = lives.pooled_by_state()
    sides = [side for side in (BEFORE, AFTER) if side in pooled.group_labels]
    found = FleetLives(
        component=question.component.code,
        clock=lives.clock,
        as_of=question.as_of,
        by="part",
        lifetimes=pooled.with_groups(np.array([labels[side] for side in pooled.group_labels])[pooled.group_codes]),
        states=states,
        component_name=question.component.title,
        modes=question.modes,
        groups=tuple(labels[side] for side in sides),
    )
    return document_of(found, question.confidence)


def _at_like_duty(lives: Compared, alike: Comparability, confidence: float) -> dict[str, Any] | None:
    """Asked only where it may matter: lives counted in days under unlike use."""
    if lives.clock != "days" or not alike.duty.unlike or lives.lifetimes is None:
        return None
    return at_like_duty(lives, duties_of(lives)[1], confidence)


def _with_past(evidence: dict[str, Any], paired: Paired, confidence: float) -> dict[str, Any]:
    """Where positions differ the ratio over the same dates is right only with the past of the positions."""
    if paired is None or not evidence["ratio"]:
        return evidence
    sides, options = paired
    try:
        told = told_ratio(life_ratio(*sides, confidence_level=confidence, **options))
    except StatisticsError as error:
        return {
            **evidence,
            "ratio": {**evidence["ratio"], "positions differ": None},
            "notes": [*evidence["notes"], f"With the past of the positions: {error}"],
        }
    return {**evidence, "ratio": {**evidence["ratio"], "positions differ": told}}


def _posterior(paired: Paired) -> tuple[LifeRatioPosterior | None, str]:
    """Before records exist on both sides no probability is told."""
    if paired is None:
        return None, "No old and new part have yet run over the same dates at one site."
    sides, options = paired
    try:
        return life_ratio_posterior(*sides, **options), ""
    except StatisticsError as error:
        return None, str(error)


def _old_shape(lives: Compared) -> float | None:
    old = lives.side(BEFORE)
    if old is None or old.failures < FEW:
        return None
    try:
        return float(fit_weibull(old).shape)
    except StatisticsError:
        return None


def _target(history: dict[str, Any] | None, hope: float) -> float | None:
    """The B10 life hoped for: that of the old parts times the hope."""
    groups = history["groups"] if history else []
    old = groups[0]["b10"] if groups else None
    return None if old is None or old["estimate"] is None else float(old["estimate"]) * hope


def _a_module(lives: Compared) -> float:
    """Positions of such a part in a module."""
    if not len(lives.modules):
        return 1.0
    # a number of a position stands for one module only
    return ranked(lives.positions)[0].size / ranked(lives.modules)[0].size


def _records(lives: Compared) -> dict[str, Any]:
    """What the records leave open: sites that may not report at once, removals without a reason."""
    there = set() if lives.lifetimes is None else set(lives.lifetimes.site_labels.tolist())
    unanswered = Site.objects.filter(code__in=there, reports_at_once=None).values_list("code", flat=True)
    return {
        "unanswered": sorted(unanswered),
        "not_known": int(lives.in_state("not known").sum()),
        "removed": int((~lives.in_state("running")).sum()),
    }


def _told(alike: Comparability) -> dict[str, Any]:
    return {
        "mixes": [
            {
                "name": mix.name,
                "of": mix.of,
                "overlap": finite(mix.overlap),
                "rows": [
                    {"label": label, "before": before, "after": after}
                    for label, before, after in zip(mix.labels, mix.before, mix.after, strict=True)
                ],
            }
            for mix in alike.mixes
        ],
        "duty": {"clock": alike.duty.clock, "before": finite(alike.duty.before), "after": finite(alike.duty.after)},
        "unlike_duty": alike.duty.unlike,
        "all_at_once": list(alike.all_at_once),
        "beside": list(alike.concurrent_sites),
    }
