"""Distributions of sums of independent counts, from the tails of their members, averaged over draws.

The generating function of a sum is the product of its members': its logarithm is summed, evaluated on the unit
circle, and inverted by one FFT. Three ways to the same logarithm, chosen by what is exact and cheap:

- a variance above 5: the first eight cumulants; probabilities are then right to 3e-6, to 1e-9 from a variance of 9;
- else, members that rarely fail (P(N >= 1) below 0.3) together: its power series in z, log p_0 + sum_j c_j z^j (De Pril
  1989, ASTIN Bulletin 19, 9), with enough terms to leave less than 1e-10;
- and the others one by one.
"""

from __future__ import annotations

import numpy as np
import scipy.fft
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
ComplexArray = NDArray[np.complex128]

_SERIES_FROM = 5.0
_RARE = 0.3
_AT_ONCE = 30_000  # probabilities whose powers stay in the processor's cache


class CountMixtures:
    """The average over draws of the distributions of several sums, sum_i w_gi copies of N_i for each sum g.

    targets: how many stretches each sum is told for; their draws are added side by side, in one call.
    """

    def __init__(self, sums: int, targets: int = 1) -> None:
        self.targets = targets
        self._mass = [[np.zeros(64) for _ in range(sums)] for _ in range(targets)]

    def add(self, tails: FloatArray, weights: FloatArray, shares: float | FloatArray = 1.0) -> None:
        """Add draws: tails P(N_i >= k), (targets * draws, rows, k = 1 ..), all draws of the first target first.

        weights (sums, rows). shares: how many draws each of them stands for, one number or (draws,).
        """
        if not self.targets:
            return
        share = np.broadcast_to(np.asarray(shares, dtype=np.float64), (tails.shape[0] // self.targets,))
        if not tails.shape[1] or not weights.any():
            for masses in self._mass:
                for mass in masses:
                    mass[0] += share.sum()
            return
        tails = tails[..., : max(int(np.count_nonzero(tails.max(axis=(0, 1)) > 1e-10)), 1)]
        probabilities = _probabilities(tails)
        low = _moments(probabilities, weights)
        wide = low[1] > _SERIES_FROM
        some = np.flatnonzero(wide.any(axis=0))
        if some.size:
            cumulants = np.empty((8, low.shape[1], some.size))
            step = max(1, _AT_ONCE // probabilities[0].size)
            for start in range(0, low.shape[1], step):
                part = slice(start, start + step)
                cumulants[:, part] = _cumulants(probabilities[part], low[:, part, some], weights[some])
            wide[:, some] &= _series_serves(cumulants)
            for place, number in enumerate(some.tolist()):
                self._add_wide(number, np.flatnonzero(wide[:, number]), cumulants[:, :, place], share)
        narrow = np.flatnonzero(~wide.all(axis=0))
        if narrow.size:
            rows = np.flatnonzero(weights[narrow].any(axis=0))
            members = tails[:, rows], probabilities[:, rows], weights[np.ix_(narrow, rows)]
            self._add_narrow(
                narrow, members, low[:, :, narrow], ~wide[:, narrow] * np.tile(share, self.targets)[:, None]
            )

    def pmfs(self, target: int = 0) -> list[FloatArray]:
        """For each sum the probabilities of 0, 1, 2 ... up to where less than 1e-12 is left."""
        return [_trimmed(np.maximum(mass, 0.0)) for mass in self._mass[target]]

    def _put(self, target: int, number: int, start: int, mass: FloatArray) -> None:
        held = self._mass[target][number]
        if start + mass.size > held.size:
            held = np.concatenate([held, np.zeros(max(start + mass.size, 2 * held.size) - held.size)])
            self._mass[target][number] = held
        held[start : start + mass.size] += mass

    def _add_wide(self, number: int, chosen: IntArray, cumulants: FloatArray, share: FloatArray) -> None:
        if not chosen.size:
            return
        cumulants = cumulants[:, chosen]
        mean, deviation = cumulants[0], np.sqrt(cumulants[1])
        size = scipy.fft.next_fast_len(int(np.ceil(18.0 * deviation.max())) + 24, real=True)
        offset = np.maximum(np.rint(mean) - size // 2, 0.0)
        angle = 2.0 * np.pi / size * np.arange(size // 2 + 1)
        used = angle[angle <= 7.5 / deviation.min()]
        power = _cumulant_series(cumulants, used, offset)
        # beyond 7.5 deviations the function is below 1e-12, and the series has no meaning there
        power = np.where(used <= 7.5 / deviation[:, None], power, 0.0)
        spectrum = np.zeros((mean.size, angle.size), dtype=np.complex128)
        spectrum[:, : used.size] = power
        mass = scipy.fft.irfft(np.conj(spectrum), size, axis=1)
        target, draw = np.divmod(chosen, share.size)
        mass *= share[draw][:, None]
        for owner, start, row in zip(target.tolist(), offset.astype(np.int64).tolist(), mass, strict=True):
            self._put(owner, number, start, row)

    def _add_narrow(
        self,
        numbers: IntArray,
        members: tuple[FloatArray, FloatArray, FloatArray],
        low: FloatArray,
        share: FloatArray,
    ) -> None:
        """The sums `numbers`, each with `share` (targets * draws, sums) of every draw; 0 where it is wide there.

        members: tails, probabilities and weights of their rows alone.
        """
        tails, probabilities, weights = members
        top = float(np.where(share > 0, low[0] + 12.0 * np.sqrt(np.maximum(low[1], 0.0)), 0.0).max())
        size = scipy.fft.next_fast_len(int(np.ceil(top)) + 16, real=True)
        angle = 2.0 * np.pi / size * np.arange(size // 2 + 1)
        rare = tails[..., 0].max(axis=0) < _RARE
        draws = share.shape[0] // self.targets
        rows = max(int(np.count_nonzero(~rare)), weights.shape[0])
        chunk = max(1, int(1.5e6 / (rows * angle.size)))
        for target in range(self.targets):
            spectrum = np.zeros((weights.shape[0], angle.size), dtype=np.complex128)
            for start in range(target * draws, (target + 1) * draws, chunk):
                part = slice(start, min(start + chunk, (target + 1) * draws))
                found = np.ones((part.stop - start, *spectrum.shape), dtype=np.complex128)
                if rare.any():
                    found *= _by_power_series(probabilities[part][:, rare], weights[:, rare], angle)
                if not rare.all():
                    found *= _by_members(tails[part][:, ~rare], weights[:, ~rare], angle)
                spectrum += np.einsum("dga,dg->ga", found, share[part])
            # the transform of an average is the average of the transforms
            mass = scipy.fft.irfft(np.conj(spectrum), size, axis=1)
            for number, row in zip(numbers.tolist(), mass, strict=True):
                self._put(target, number, 0, row)


def _trimmed(mass: FloatArray) -> FloatArray:
    left = np.cumsum(mass[::-1])[::-1] / max(mass.sum(), 1e-300)
    size = max(int(np.count_nonzero(left > 1e-12)), 1)
    return mass[:size] / mass[:size].sum()


def _probabilities(tails: FloatArray) -> FloatArray:
    """P(N = 0), P(N = 1), ... from tails; rounding that makes a tail rise is put right."""
    full = np.empty((*tails.shape[:2], tails.shape[2] + 1))
    full[..., 0] = 1.0 - tails[..., 0]
    full[..., 1:-1] = tails[..., :-1] - tails[..., 1:]
    full[..., -1] = tails[..., -1]
    return np.maximum(full, 0.0, out=full)


def _moments(probabilities: FloatArray, weights: FloatArray) -> FloatArray:
    """Mean and variance of each sum, (2, draws, sums)."""
    counts = np.arange(probabilities.shape[2], dtype=np.float64)
    mean = probabilities @ counts
    variance = probabilities @ counts**2 - mean**2
    return np.stack([mean @ weights.T, variance @ weights.T])


def _cumulants(probabilities: FloatArray, low: FloatArray, weights: FloatArray) -> FloatArray:
    """Cumulants 1 to 8 of each sum, (8, draws, sums)."""
    counts = np.arange(probabilities.shape[2], dtype=np.float64)
    centred = counts - (probabilities @ counts)[..., None]
    power = probabilities * centred
    moments = []
    for _ in range(7):
        power *= centred
        moments.append(power.sum(axis=2) if power.shape[2] > 8 else power @ np.ones(power.shape[2]))
    m2, m3, m4, m5, m6, m7, m8 = moments
    square, product = m2 * m2, m3 * m2
    eighth = m8 - 28 * m6 * m2 - 56 * m5 * m3 - 35 * m4 * m4
    rows = (
        m3,
        m4 - 3 * square,
        m5 - 10 * product,
        m6 - 15 * m4 * m2 - 10 * m3 * m3 + 30 * square * m2,
        m7 - 21 * m5 * m2 - 35 * m4 * m3 + 210 * product * m2,
        eighth + 420 * m4 * square + 560 * product * m3 - 630 * square * square,
    )
    return np.concatenate([low, np.stack([row @ weights.T for row in rows])])


def _series_serves(cumulants: FloatArray) -> NDArray[np.bool_]:
    """True where the last terms are small five deviations from zero frequency; early failures in a row spoil it."""
    step = 5.0 / np.sqrt(np.maximum(cumulants[1], 1e-9))
    return (np.abs(cumulants[6]) * step**7 / 5040.0 < 0.3) & (np.abs(cumulants[7]) * step**8 / 40320.0 < 0.1)


def _cumulant_series(cumulants: FloatArray, angle: FloatArray, offset: FloatArray) -> ComplexArray:
    """Characteristic function of a sum less `offset`, (draws, angles)."""
    shifted = cumulants.copy()
    shifted[0] -= offset
    real = np.zeros((shifted.shape[1], angle.size))
    imaginary = np.zeros_like(real)
    factorial = 1.0
    for order in range(1, 9):
        factorial *= order
        term = shifted[order - 1][:, None] * (angle**order / factorial)
        sign = -1.0 if order % 4 in (2, 3) else 1.0
        if order % 2:
            imaginary += sign * term
        else:
            real += sign * term
    return np.exp(np.minimum(real, 0.0)) * (np.cos(imaginary) + 1j * np.sin(imaginary))


def _by_power_series(probabilities: FloatArray, weights: FloatArray, angle: FloatArray) -> ComplexArray:
    """Generating functions of sums of rare counts: j c_j p_0 = j p_j - sum_i i c_i p_(j - i), (draws, sums, angles)."""
    none = probabilities[..., 0]
    ratio = probabilities[..., 1:] / none[..., None]
    orders = ratio.shape[2]
    odds = float((1.0 - none).max() / none.min())
    size = int(np.clip(np.ceil(-23.0 / np.log(max(odds, 1e-5))), orders + 1, 32))
    terms: list[FloatArray] = []  # j c_j of each row
    for order in range(1, size + 1):
        term = order * ratio[..., order - 1] if order <= orders else np.zeros_like(none)
        for back in range(1, min(order - 1, orders) + 1):
            term = term - ratio[..., back - 1] * terms[order - back - 1]
        terms.append(term)
    total = np.stack([np.log(none) @ weights.T, *(term @ weights.T / (j + 1) for j, term in enumerate(terms))], axis=2)
    circle = np.arange(size + 1)[:, None] * angle
    real, imaginary = total @ np.cos(circle), total @ np.sin(circle)
    return np.exp(real) * (np.cos(imaginary) + 1j * np.sin(imaginary))


def _by_members(tails: FloatArray, weights: FloatArray, angle: FloatArray) -> ComplexArray:
    """Generating functions as products over rows of G_i(z)^w, G(z) = 1 + sum_k P(N >= k) (z - 1) z^(k - 1)."""
    orders = np.arange(tails.shape[2])
    circle = np.exp(1j * angle)
    basis = (circle - 1.0) * circle ** orders[:, None]
    values = np.empty((*tails.shape[:2], angle.size), dtype=np.complex128)
    values.real = 1.0 + tails @ basis.real
    values.imag = tails @ basis.imag
    found = np.empty((tails.shape[0], weights.shape[0], angle.size), dtype=np.complex128)
    several = np.flatnonzero(((weights != 0.0) & (weights != 1.0)).any(axis=0))
    size, turn = _logarithms(values[:, several], tails[:, several], angle)
    for number, weight in enumerate(weights):
        product = np.multiply.reduce(values[:, weight == 1.0], axis=1)
        power = np.where(weight[several] == 1.0, 0.0, weight[several])
        if power.any():
            angles = power @ turn
            product = product * np.exp(power @ size) * (np.cos(angles) + 1j * np.sin(angles))
        found[:, number] = product
    return found


def _logarithms(values: ComplexArray, tails: FloatArray, angle: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Log of the size and the angle of generating functions, on one branch near the angle of their mean."""
    # turned back by the whole number next to the mean before the angle is taken
    middle = np.rint(tails.sum(axis=2))[..., None] * angle
    turned = values * (np.cos(middle) - 1j * np.sin(middle))
    size = 0.5 * np.log(np.maximum(values.real**2 + values.imag**2, 1e-300))
    return size, np.arctan2(turned.imag, turned.real) + middle
