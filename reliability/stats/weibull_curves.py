"""Curves of constant shape, quantile, survival and mean in the Weibull parameters (log shape, level)."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy import special

from reliability.stats.profile_intervals import CurvePoint

LOG_SHAPE_LIMITS = (math.log(1e-3), math.log(1e7))
LEVEL_LIMITS = (-1e9, 1e9)


@dataclass(frozen=True)
class ShapeCurve:
    """psi = log shape; the level is free."""

    free_limits = LEVEL_LIMITS

    def value_of(self, log_shape: float, level: float) -> float:
        return log_shape

    def gradient_of(self, log_shape: float, level: float) -> tuple[float, float]:
        return 1.0, 0.0

    def free_of(self, log_shape: float, level: float) -> float:
        return level

    def at(self, psi: float, free: float) -> CurvePoint:
        return psi, free, 0.0, 1.0, 0.0, 0.0, 1.0, 0.0, 0.0


@dataclass(frozen=True, kw_only=True)
class _LevelFromShape:
    """Curves on which the log shape is free (equal limits hold it) and decides the level."""

    log_reference: float
    free_limits: tuple[float, float] = LOG_SHAPE_LIMITS

    def free_of(self, log_shape: float, level: float) -> float:
        return log_shape


@dataclass(frozen=True, kw_only=True)
class QuantileCurve(_LevelFromShape):
    """psi = log of the age with cumulative hazard exp(log_hazard): level = log_hazard - shape (psi - log reference)."""

    log_hazard: float

    def value_of(self, log_shape: float, level: float) -> float:
        return self.log_reference + (self.log_hazard - level) * math.exp(-log_shape)

    def gradient_of(self, log_shape: float, level: float) -> tuple[float, float]:
        short = math.exp(-log_shape)
        return (level - self.log_hazard) * short, -short

    def at(self, psi: float, free: float) -> CurvePoint:
        shape = math.exp(free)
        turn = -shape * (psi - self.log_reference)
        return free, self.log_hazard + turn, 1.0, turn, 0.0, turn, 0.0, -shape, -shape


@dataclass(frozen=True, kw_only=True)
class SurvivalCurve(_LevelFromShape):
    """psi = log cumulative hazard at one age: level = psi - shape (log age - log reference)."""

    log_age: float

    def value_of(self, log_shape: float, level: float) -> float:
        return level + math.exp(log_shape) * (self.log_age - self.log_reference)

    def gradient_of(self, log_shape: float, level: float) -> tuple[float, float]:
        return math.exp(log_shape) * (self.log_age - self.log_reference), 1.0

    def at(self, psi: float, free: float) -> CurvePoint:
        turn = -math.exp(free) * (self.log_age - self.log_reference)
        return free, psi + turn, 1.0, turn, 0.0, turn, 0.0, 1.0, 0.0


@dataclass(frozen=True, kw_only=True)
class MeanCurve(_LevelFromShape):
    """psi = log mean = log scale + log Gamma(1 + 1 / shape)."""

    def value_of(self, log_shape: float, level: float) -> float:
        short = math.exp(-log_shape)
        return self.log_reference - level * short + math.lgamma(1.0 + short)

    def gradient_of(self, log_shape: float, level: float) -> tuple[float, float]:
        short = math.exp(-log_shape)
        return (level - float(special.digamma(1.0 + short))) * short, -short

    def at(self, psi: float, free: float) -> CurvePoint:
        shape = math.exp(free)
        short = 1.0 / shape
        level = -shape * (psi - self.log_reference - math.lgamma(1.0 + short))
        turn = level - float(special.digamma(1.0 + short))
        # the second derivative of log Gamma is the Hurwitz zeta function with exponent 2
        bend = turn + float(special.zeta(2.0, 1.0 + short)) * short
        return free, level, 1.0, turn, 0.0, bend, 0.0, -shape, -shape
