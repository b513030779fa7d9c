"""Safeguarded Newton searches with analytic derivatives, shared by the parametric fits."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from reliability.stats.lifetimes import FloatArray

# value; slopes in x and y; second derivatives xx, xy, yy of a function of two parameters
PlaneTerms = tuple[float, float, float, float, float, float]
EvaluatePlane = Callable[[float, float], PlaneTerms]
# value, slope and second derivative of a function of one parameter
EvaluateLine = Callable[[float], tuple[float, float, float]]
# value, gradient (p,), hessian (p, p) of a function of p parameters
Evaluation = tuple[float, FloatArray, FloatArray]
Evaluate = Callable[[FloatArray], Evaluation]

MAXIMUM_ITERATIONS = 200
# half the squared Newton step in standard errors; the last step is still taken, and squares the error once more
DECREMENT_ENOUGH = 1e-9
# where rounding or quadrature allow no better: within 0.04 standard errors of the top
NEAR_ENOUGH = 1e-3
# inside a profile only the height matters, and its error is the square of the step's
LINE_DECREMENT_ENOUGH = 1e-6


@dataclass(frozen=True, eq=False)
class Maximum:
    """Where a search ended: `converged` is False where it stopped at a limit or ran out of iterations."""

    point: FloatArray
    value: float
    gradient: FloatArray
    hessian: FloatArray
    iterations: int
    converged: bool
    at_limit: bool


def maximise(
    evaluate: Evaluate,
    start: FloatArray,
    lower: FloatArray,
    upper: FloatArray,
    largest_step: FloatArray,
    most_iterations: int = MAXIMUM_ITERATIONS,
) -> Maximum:
    """Maximum of a smooth function of p parameters inside a box, by Newton steps with halving.

    Where the Hessian is not negative definite its eigenvalues are turned negative, so that every step climbs.
    largest_step (p,) bounds a single step. A point pressed against the box ends the search with at_limit.
    """
    point = np.clip(np.asarray(start, dtype=float), lower, upper)
    value, gradient, hessian = evaluate(point)
    for iteration in range(1, most_iterations + 1):
        step = climbing_step(gradient, hessian)
        decrement = 0.5 * float(gradient @ step)
        # shortened as a whole, also at the edge of the box: bending it would leave a narrow ridge
        room = np.where(step > 0.0, upper - point, point - lower)
        step = step * min(1.0, float(np.min(np.minimum(largest_step, room) / np.maximum(np.abs(step), 1e-300))))
        target = np.clip(point + step, lower, upper)
        moved = _climb(evaluate, point, value, target)
        if moved is None:
            # no step climbs: either rounding is reached or the function is flat to the last digit
            return _ended(point, value, gradient, hessian, iteration, decrement < NEAR_ENOUGH, lower, upper)
        before, (point, value, gradient, hessian, halvings) = value, moved
        # many halvings for next to no gain: value and slope no longer agree to the digits that are left
        stalled = halvings >= 3 and value - before < 0.05 * decrement
        if decrement < DECREMENT_ENOUGH or stalled:
            return _ended(point, value, gradient, hessian, iteration, decrement < NEAR_ENOUGH, lower, upper)
        pressed = ((point <= lower) & (gradient < 0)) | ((point >= upper) & (gradient > 0))
        if pressed.any():
            return _ended(point, value, gradient, hessian, iteration, False, lower, upper)
    return _ended(point, value, gradient, hessian, most_iterations, False, lower, upper)


def maximise_plane(
    evaluate: EvaluatePlane,
    start: tuple[float, float],
    lower: tuple[float, float],
    upper: tuple[float, float],
    largest_step: tuple[float, float],
    most_iterations: int = MAXIMUM_ITERATIONS,
) -> Maximum:
    """`maximise` for a function of two numbers that returns six."""

    def at(point: FloatArray) -> Evaluation:
        value, by_x, by_y, xx, xy, yy = evaluate(float(point[0]), float(point[1]))
        return value, np.array([by_x, by_y]), np.array([[xx, xy], [xy, yy]])

    return maximise(at, np.array(start), np.array(lower), np.array(upper), np.array(largest_step), most_iterations)


def maximise_line(
    evaluate: EvaluateLine, start: float, lower: float, upper: float, largest_step: float
) -> tuple[float, float]:
    """Where a smooth function of one parameter is largest between the limits, and its value there.

    Plain numbers throughout: profile intervals call this hundreds of times.
    """
    point = min(max(start, lower), upper)
    value, slope, bend = evaluate(point)
    if lower == upper:
        return point, value
    for _ in range(MAXIMUM_ITERATIONS):
        step = slope / max(abs(bend), 1e-300)
        decrement = 0.5 * slope * step
        step = min(max(step, -largest_step), largest_step)
        target = min(max(point + step, lower), upper)
        rounding = 1e-13 * (1.0 + abs(value))
        reached, new_slope, new_bend = evaluate(target) if target != point else (-math.inf, 0.0, 0.0)
        halvings = 0
        while not (reached >= value - rounding and math.isfinite(new_slope) and math.isfinite(new_bend)):
            target = point + 0.5 * (target - point)
            halvings += 1
            if halvings > 60 or target == point:
                return point, value
            reached, new_slope, new_bend = evaluate(target)
        stalled = halvings >= 3 and reached - value < 0.05 * decrement
        point, value, slope, bend = target, reached, new_slope, new_bend
        if stalled or decrement < LINE_DECREMENT_ENOUGH:
            return point, value
    return point, value


def climbing_step(gradient: FloatArray, hessian: FloatArray) -> FloatArray:
    """The Newton step, with the Hessian's eigenvalues made negative where they are not, shape (p,)."""
    if gradient.size == 1:
        return gradient / max(abs(float(hessian[0, 0])), 1e-300)
    if gradient.size == 2:
        (a, b), (_, c) = hessian.tolist()
        determinant = a * c - b * b
        if a < 0.0 and determinant > 1e-12 * a * c:
            x, y = gradient.tolist()
            return np.array([b * y - c * x, b * x - a * y]) / determinant
    values, vectors = np.linalg.eigh(hessian)
    size = np.maximum(np.abs(values), 1e-12 * max(float(np.abs(values).max()), 1e-300))
    return vectors @ ((vectors.T @ gradient) / size)


def _climb(
    evaluate: Evaluate, point: FloatArray, value: float, target: FloatArray
) -> tuple[FloatArray, float, FloatArray, FloatArray, int] | None:
    """The first of target, half way, a quarter of the way … that is no worse, with the number of halvings; or None."""
    rounding = 1e-13 * (1.0 + abs(value))
    for halvings in range(60):
        if (target == point).all():
            return None
        reached, gradient, hessian = evaluate(target)
        if reached >= value - rounding and np.isfinite(gradient).all() and np.isfinite(hessian).all():
            return target, reached, gradient, hessian, halvings
        target = point + 0.5 * (target - point)
    return None


def _ended(
    point: FloatArray,
    value: float,
    gradient: FloatArray,
    hessian: FloatArray,
    iterations: int,
    converged: bool,
    lower: FloatArray,
    upper: FloatArray,
) -> Maximum:
    at_limit = bool(((point <= lower) | (point >= upper)).any())
    return Maximum(point, float(value), gradient, hessian, iterations, converged and not at_limit, at_limit)
