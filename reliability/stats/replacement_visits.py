"""Age replacement where planned replacements happen only at visits, and failures are put right as they come.

Visits come every v. A part fitted at a failure meets its first visit after w, somewhere in (0, v]; one fitted at a
visit after v. It is replaced at the first visit at which it is `age` or older. What w is for the next part follows from
when this one failed, so the waits form a Markov chain with one step a part: its cycles are semi-Markov, and the cost
rate is (stationary cost of a cycle) / (stationary length of a cycle) (Cox 1962, Renewal Theory, ch. 9; Ross 1970,
Applied Probability Models, ch. 5). The waits are cut into cells with the lives' masses taken at the cells' middles.
"""

from __future__ import annotations

from collections.abc import Callable
from math import ceil, isfinite

import numpy as np
from numpy.typing import NDArray

from reliability.stats.errors import InvalidArgument

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
Survival = Callable[[FloatArray], FloatArray]

FINE, COARSE = 64, 16  # cells of the wait, for one life and for many draws of it
PLACES = 30  # cells times visits stay below so many times the cells: many visits need fewer cells each
MOST_VISITS = 160  # with so many visits up to an age any wait is as likely


def check_costs(planned_cost: float, failure_cost: float) -> None:
    if not (isfinite(planned_cost) and isfinite(failure_cost) and planned_cost > 0 and failure_cost > 0):
        raise InvalidArgument(
            f"planned_cost is {planned_cost:g} and failure_cost {failure_cost:g}; both must be above 0."
        )


def best_visit_age(
    shape: float, scale: float, planned_cost: float, failure_cost: float, visit_interval: float, free_age: float
) -> tuple[float, float]:
    """Best age and its cost rate; `free_age` is the best one if every moment were a visit (it bounds the search)."""

    def survival(ages: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.exp(-((ages / scale) ** shape))[None]

    # Weibull lives of these ages are all but over; a later visit never comes to pass.
    last = max(scale * 40.0 ** (1.0 / shape), free_age)
    step = visit_interval / COARSE
    low, high = max(step, free_age - 2.0 * visit_interval), max(min(free_age + 2.0 * visit_interval, last), step)
    ages = np.unique(np.append(np.linspace(low, high, 4 * COARSE + 1), step))
    rates = visit_cost_rates(survival, ages, planned_cost, failure_cost, visit_interval, cells=FINE)[0]
    best = int(np.argmin(rates))
    return float(ages[best]), float(rates[best])


def visit_cost_rates(
    survival: Survival,
    ages: FloatArray,
    planned_cost: float,
    failure_cost: float,
    visit_interval: float,
    *,
    cells: int = COARSE,
) -> FloatArray:
    """Cost rates (rows, ages) of lives whose `survival` at ages (n,) is (rows, n)."""
    reach = float(ages.max())
    visits = ceil(reach / visit_interval) + 1
    if visits > MOST_VISITS:
        return _any_wait(survival, ages, planned_cost, failure_cost, visit_interval)
    cells = int(np.clip(PLACES * cells // visits, 3, cells))
    waits = visit_interval * np.append((np.arange(cells) + 0.5) / cells, 1.0)
    lived = [_lived(survival, wait + visit_interval * np.arange(visits)) for wait in waits]
    landed = [_landed(survival, wait, visits, cells, visit_interval) for wait in waits]
    alive = [survival(wait + visit_interval * np.arange(visits)) for wait in waits]
    rates = []
    for age in ages:
        meets = [_first_visit(age, wait, visit_interval) for wait in waits]
        planned = np.stack([each[:, meet] for each, meet in zip(alive, meets, strict=True)], axis=1)
        length = np.stack([each[:, meet] for each, meet in zip(lived, meets, strict=True)], axis=1)
        failing = np.stack([each[:, meet] for each, meet in zip(landed, meets, strict=True)], axis=1)
        share = _stationary(np.concatenate([failing, planned[:, :, None]], axis=2))
        cost = failure_cost - (failure_cost - planned_cost) * planned
        rates.append((share * cost).sum(axis=1) / (share * length).sum(axis=1))
    return np.stack(rates, axis=1)


def _first_visit(age: float, wait: float, interval: float) -> int:
    """Number, from 0, of the first visit at which a part with that first wait is as old as `age`."""
    return max(0, ceil((age - wait) / interval - 1e-9))


def _lived(survival: Survival, ages: FloatArray) -> FloatArray:
    """int_0^age S at increasing ages, (rows, n), by Gauss's rule with 8 points between them."""
    points, weights = np.polynomial.legendre.leggauss(8)
    edges = np.concatenate([[0.0], ages])
    half = np.diff(edges) / 2.0
    at = (edges[:-1] + half)[:, None] + half[:, None] * points
    values = survival(at.ravel())
    pieces = (values.reshape(values.shape[0], *at.shape) * weights).sum(axis=2) * half
    return np.asarray(np.cumsum(pieces, axis=1), dtype=np.float64)


def _landed(survival: Survival, wait: float, visits: int, cells: int, interval: float) -> FloatArray:
    """Mass failing before visit 0, 1 ..., by the cell of the wait that the next part begins with: (rows, visits,
    cells).
    """
    step = interval / cells
    # the next part's wait is the time from the failure to the visit after it
    ends = wait + interval * np.arange(visits)[:, None]
    edges = np.maximum(ends - step * np.arange(cells + 1), 0.0)
    alive = survival(edges.ravel()).reshape(-1, visits, cells + 1)
    mass = alive[:, :, 1:] - alive[:, :, :-1]
    summed: FloatArray = np.cumsum(mass, axis=1)
    return summed


def _stationary(steps: FloatArray) -> FloatArray:
    """Stationary shares (rows, states) of the chains (rows, states, states)."""
    states = steps.shape[1]
    # rounding and lives beyond the last place: every row sums to one
    steps = steps / steps.sum(axis=2, keepdims=True)
    system = np.swapaxes(steps, 1, 2) - np.eye(states)
    system[:, -1, :] = 1.0
    right = np.zeros((steps.shape[0], states, 1))
    right[:, -1] = 1.0
    return np.asarray(np.linalg.solve(system, right)[:, :, 0], dtype=np.float64)


def _any_wait(
    survival: Survival, ages: FloatArray, planned_cost: float, failure_cost: float, interval: float
) -> FloatArray:
    """Visits so dense that every wait is as likely: the age at the visit is even over (age, age + interval)."""
    points, weights = np.polynomial.legendre.leggauss(3)
    at = ages[:, None] + interval * (points + 1.0) / 2.0
    order = np.argsort(at, axis=None)
    lived = np.empty((survival(at[0, :1]).shape[0], at.size))
    lived[:, order] = _lived(survival, at.ravel()[order])
    alive = survival(at.ravel())
    share = weights / 2.0
    cost = failure_cost - (failure_cost - planned_cost) * alive
    shape = (lived.shape[0], ages.size, points.size)
    rates: FloatArray = (cost.reshape(shape) * share).sum(axis=2) / (lived.reshape(shape) * share).sum(axis=2)
    return rates
