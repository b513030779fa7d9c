"""Weibull shapes of many samples drawn again from the same clusters of lives, without a search for each."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from reliability.stats.life_regression_likelihood import RegressionLikelihood, regression_likelihood
from reliability.stats.lifetimes import FloatArray, Lifetimes
from reliability.stats.weibull_fit import WeibullFit

# from a node at most half this far away (in standard errors of the samples) a Newton step ends next to the top
NODE_STEP = 0.5
ROUNDS = 4
FARTHEST = 12.0


def drawn_log_shapes(lives: Lifetimes, fit: WeibullFit, codes: NDArray[np.int64], times: FloatArray) -> FloatArray:
    """Log shape of each sample, in which cluster s counts times[r, s] times, shape (R,); NaN where it has none.

    The log-likelihood of a sample is that of its clusters added up, so its slope and curvature at any point follow
    from the clusters' own. These are computed at nodes near the samples' tops, from which each sample takes Newton
    steps, going on from the node nearest to where it came.
    """
    likelihood = regression_likelihood(lives, np.ones((len(lives), 1)), lognormal=False)
    log_shape = math.log(fit.shape)
    centre = np.array([log_shape, fit.shape * (likelihood.log_reference - math.log(fit.scale))])
    gradient, hessian = likelihood.by_cluster(centre, codes, times.shape[1])
    whole = np.linalg.inv(-hessian.sum(axis=0))
    # the spread of the samples, which is larger than that of independent lives where clusters differ
    moved = gradient @ whole
    root = np.linalg.cholesky(moved.T @ moved + 1e-12 * whole)
    nodes = _Nodes(likelihood, centre, root, codes, times.shape[1])
    place = np.zeros((times.shape[0], 2))
    for _ in range(ROUNDS):
        place = _stepped(nodes, place, times)
    inside = np.abs(place).max(axis=1) < FARTHEST
    return np.where(inside, centre[0] + place @ root[0], np.nan)


class _Nodes:
    """Slopes (S, 2) and curvatures (S, 2, 2) of the clusters at whitened places, computed when first asked for."""

    def __init__(
        self,
        likelihood: RegressionLikelihood,
        centre: FloatArray,
        root: FloatArray,
        codes: NDArray[np.int64],
        clusters: int,
    ) -> None:
        self._likelihood, self._centre, self._root = likelihood, centre, root
        self._codes, self._clusters = codes, clusters
        self._known: dict[tuple[float, float], tuple[FloatArray, FloatArray]] = {}

    def at(self, place: tuple[float, float]) -> tuple[FloatArray, FloatArray]:
        if place not in self._known:
            point = self._centre + self._root @ np.array(place)
            gradient, hessian = self._likelihood.by_cluster(point, self._codes, self._clusters)
            self._known[place] = gradient @ self._root, self._root.T @ hessian @ self._root
        return self._known[place]


def _stepped(nodes: _Nodes, place: FloatArray, times: FloatArray) -> FloatArray:
    """Each sample's Newton step from the node nearest to its place, shape (R, 2)."""
    nearest = np.round(np.clip(np.nan_to_num(place), -FARTHEST, FARTHEST) / NODE_STEP) * NODE_STEP
    moved = np.full_like(place, np.nan)
    for node in np.unique(nearest, axis=0):
        rows = np.flatnonzero((nearest == node).all(axis=1))
        gradient, hessian = nodes.at((float(node[0]), float(node[1])))
        slope, bend = times[rows] @ gradient, np.tensordot(times[rows], hessian, axes=(1, 0))
        determinant = bend[:, 0, 0] * bend[:, 1, 1] - bend[:, 0, 1] ** 2
        usable = (bend[:, 0, 0] < 0.0) & (determinant > 1e-9 * bend[:, 0, 0] * bend[:, 1, 1])
        step = np.full_like(slope, np.nan)
        step[usable] = np.linalg.solve(-bend[usable], slope[usable][..., None])[..., 0]
        moved[rows] = node + np.clip(step, -3.0, 3.0)
    return moved
