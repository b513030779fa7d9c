"""How long a design with few failures lives, with what another design of the same component says of it as prior.

The prior of `weibull_posterior` on the level, half a failure's worth of knowledge, gives way to log median ~ normal:
designs of one component differ, but seldom by more than a few times (a hierarchical prior: Gelman, Carlin, Stern,
Dunson, Vehtari & Rubin 2013, Bayesian Data Analysis, ch. 5). The posterior is a grid, so that another prior is another
weight of its points, and the mean of the weights is what it adds to a model's evidence.
"""

from __future__ import annotations

from dataclasses import replace
from math import log

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr

from reliability.stats.errors import InvalidArgument
from reliability.stats.life_posterior import Candidate, LifePosterior
from reliability.stats.posterior import WeibullPosterior
from reliability.stats.posterior_lognormal import LognormalGrid

FloatArray = NDArray[np.float64]
_Model = WeibullPosterior | LognormalGrid


def log_median(posterior: LifePosterior) -> tuple[float, float]:
    """Mean and standard deviation of the log of the median life, over all models."""
    shares = np.array([candidate.share for candidate in posterior.candidates])
    found = [(_medians(candidate.posterior), candidate.posterior.weight) for candidate in posterior.candidates]
    means = np.array([weight @ median for median, weight in found])
    squares = np.array([weight @ median**2 for median, weight in found])
    shares = shares / shares.sum()
    mean = float(shares @ means)
    return mean, float(np.sqrt(max(shares @ squares - mean**2, 0.0)))


def leaning_on_life(posterior: LifePosterior, prior: tuple[float, float]) -> LifePosterior:
    """The same records with a normal prior on the log of the median life, (mean, standard deviation)."""
    if not prior[1] > 0:
        raise InvalidArgument("The prior's standard deviation must be above 0.")
    leaned = [_leaned(candidate.posterior, prior) for candidate in posterior.candidates]
    logs = np.array([log(candidate.share) for candidate in posterior.candidates]) + [each[1] for each in leaned]
    shares = np.exp(logs - logs.max())
    candidates = [
        Candidate(model, candidate.lognormal, candidate.spread, float(share))
        for (model, _), candidate, share in zip(leaned, posterior.candidates, shares / shares.sum(), strict=True)
        if share > 0
    ]
    weibull, _ = _leaned(posterior.weibull, prior)
    assert isinstance(weibull, WeibullPosterior)
    return LifePosterior(candidates, weibull)


def _leaned(model: _Model, prior: tuple[float, float]) -> tuple[_Model, float]:
    """The model with its points weighed anew, and the log of the mean weight."""
    logs = -0.5 * ((_medians(model) - prior[0]) / prior[1]) ** 2 - 0.5 * _log_hazard_so_far(model)
    peak = logs.max()
    weight = model.weight * np.exp(logs - peak)
    return replace(model, weight=weight / weight.sum()), float(peak + np.log(weight.sum()))


def _medians(model: _Model) -> FloatArray:
    """Log median of each point."""
    if isinstance(model, LognormalGrid):
        return model.log_median
    return (log(log(2.0)) - model.log_level) * np.exp(-model.log_shape)


def _log_hazard_so_far(model: _Model) -> FloatArray:
    """Log of the cumulative hazard at the greatest age seen, half of which is the plain prior."""
    age = log(float(model.lifetimes.durations.max()))
    if isinstance(model, LognormalGrid):
        standard = (age - model.log_median) * np.exp(-model.log_deviation)
        return np.log(np.maximum(-log_ndtr(-standard), 1e-300))
    return model.log_level + np.exp(model.log_shape) * age
