"""Curves of constant life ratio, quantile, survival and shape in a regression's parameters, for its intervals."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from reliability.stats.life_regression_likelihood import outside
from reliability.stats.lifetimes import FloatArray
from reliability.stats.newton import Evaluate, Evaluation, maximise
from reliability.stats.weibull_curves import LEVEL_LIMITS, LOG_SHAPE_LIMITS

LARGEST_SHAPE_STEP, LARGEST_LEVEL_STEP = 1.0, 4.0
MOST_STEPS = 60


@dataclass(frozen=True, eq=False, kw_only=True)
class Constraint:
    """The parameters (log shape, g) that give a quantity the value psi:

        direction @ g = fixed + shape (by_shape + by_both psi) + by_psi psi

    Life ratio of a change c in covariate j: direction c e_j, psi the log ratio, by_both -1. Log age by which a share
    has failed at covariates x0: direction (1, x0), fixed the z of that share, by_shape the log reference age, by_both
    -1. z at an age: by_psi 1, by_shape minus the log of the age from the reference.
    """

    direction: FloatArray
    fixed: float = 0.0
    by_shape: float = 0.0
    by_psi: float = 0.0
    by_both: float = 0.0

    def value_of(self, point: FloatArray) -> float:
        shape = math.exp(point[0])
        along = float(self.direction @ point[1:])
        return (along - self.fixed - shape * self.by_shape) / (self.by_psi + shape * self.by_both)

    def gradient_of(self, point: FloatArray) -> FloatArray:
        """Slopes of psi in (log shape, g), shape (1 + p,)."""
        shape, psi = math.exp(point[0]), self.value_of(point)
        divisor = self.by_psi + shape * self.by_both
        return np.append(-shape * (self.by_shape + psi * self.by_both), self.direction) / divisor


@dataclass(frozen=True, eq=False, kw_only=True)
class ShapeConstraint:
    """psi = log shape."""

    def value_of(self, point: FloatArray) -> float:
        return float(point[0])

    def gradient_of(self, point: FloatArray) -> FloatArray:
        return np.append(1.0, np.zeros(point.size - 1))


def profile_of(
    evaluate: Evaluate, constraint: Constraint | ShapeConstraint, *, free_shape: bool
) -> Callable[[float, FloatArray], tuple[float, float, FloatArray]]:
    """The profile of a quantity: largest log-likelihood with psi held, its slope in psi, the other parameters there."""
    if isinstance(constraint, ShapeConstraint):
        return _shape_profile(evaluate)
    along, basis = split_direction(constraint.direction)

    def profile(psi: float, free: FloatArray) -> tuple[float, float, FloatArray]:
        slopes: dict[bytes, float] = {}

        def at(free: FloatArray) -> Evaluation:
            log_shape, rest = (free[0], free[1:]) if free_shape else (0.0, free)
            shape = math.exp(min(log_shape, 700.0))
            turn = shape * (constraint.by_shape + psi * constraint.by_both)
            held = constraint.fixed + turn + psi * constraint.by_psi
            value, gradient, hessian = evaluate(np.append(log_shape, along * held + basis @ rest))
            if not math.isfinite(value):
                return outside(free.size)
            move = np.zeros((1 + basis.shape[0], 1 + basis.shape[1]))
            move[0, 0], move[1:, 0], move[1:, 1:] = 1.0, along * turn, basis
            inner = float(gradient[1:] @ along)
            slopes[free.tobytes()] = inner * (constraint.by_psi + shape * constraint.by_both)
            hessian = move.T @ hessian @ move
            hessian[0, 0] += inner * turn
            kept = slice(0 if free_shape else 1, None)
            return value, (move.T @ gradient)[kept], hessian[kept, kept]

        return _height(at, free, free_shape, slopes)

    return profile


def split_direction(direction: FloatArray) -> tuple[FloatArray, FloatArray]:
    """g = along * (direction @ g) + basis @ rest, the basis orthonormal to the direction, shapes (p,), (p, p - 1)."""
    vectors = np.linalg.svd(direction[None, :])[2]
    return direction / float(direction @ direction), vectors[1:].T


def free_of(constraint: Constraint | ShapeConstraint, vector: FloatArray, *, free_shape: bool) -> FloatArray:
    """The free part of a point, or of a movement, in (log shape, g)."""
    if isinstance(constraint, ShapeConstraint):
        return vector[1:]
    rest = split_direction(constraint.direction)[1].T @ vector[1:]
    return np.append(vector[0], rest) if free_shape else rest


def _shape_profile(evaluate: Evaluate) -> Callable[[float, FloatArray], tuple[float, float, FloatArray]]:
    def profile(psi: float, free: FloatArray) -> tuple[float, float, FloatArray]:
        slopes: dict[bytes, float] = {}

        def at(free: FloatArray) -> Evaluation:
            value, gradient, hessian = evaluate(np.append(psi, free))
            if not math.isfinite(value):
                return outside(free.size)
            slopes[free.tobytes()] = float(gradient[0])
            return value, gradient[1:], hessian[1:, 1:]

        return _height(at, free, False, slopes)

    return profile


def _height(
    at: Evaluate, free: FloatArray, free_shape: bool, slopes: dict[bytes, float]
) -> tuple[float, float, FloatArray]:
    if free.size == 0:
        value = at(free)[0]
        return value, slopes.get(free.tobytes(), 0.0), free
    top = maximise(at, free, *limits(free.size, free_shape), MOST_STEPS)
    return top.value, slopes.get(top.point.tobytes(), 0.0), top.point


def limits(size: int, free_shape: bool) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Lowest and highest parameters and the largest step, shapes (size,)."""
    lower, upper = np.full(size, LEVEL_LIMITS[0]), np.full(size, LEVEL_LIMITS[1])
    step = np.full(size, LARGEST_LEVEL_STEP)
    if free_shape:
        lower[0], upper[0], step[0] = *LOG_SHAPE_LIMITS, LARGEST_SHAPE_STEP
    return lower, upper, step
