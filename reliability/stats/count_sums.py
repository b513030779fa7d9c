"""The distribution of a sum of independent counts, from the tails of its members, averaged over draws."""

from __future__ import annotations

import numpy as np
import scipy.fft
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

_SERIES_FROM = 9.0  # variance above which eight cumulants reproduce the characteristic function


class CountMixture:
    """Collects the average over draws of the distribution of sum_i w_i copies of N_i.

    `add` takes tails P(N_i >= k | draw), shape (draws, rows, k = 1 ..), and weights (rows,). The generating function of
    a sum is the product of its members': evaluated on the unit circle and inverted by one FFT. Where a draw's sum has a
    variance above 9 and its cumulants fall fast, the logarithm is summed as its first eight, good to 1e-7.
    """

    def __init__(self) -> None:
        self._mass = np.zeros(64)
        self._draws = 0

    def add(self, tails: FloatArray, weights: FloatArray) -> None:
        """Add these draws to the mixture, each with the same weight."""
        count, rows, _ = tails.shape
        self._draws += count
        if not rows or not weights.any():
            self._mass[0] += count
            return
        probabilities = _probabilities(tails)
        cumulants = _summed_cumulants(probabilities, weights)
        wide = (cumulants[1] > _SERIES_FROM) & _series_serves(cumulants)
        if wide.any():
            self._add_wide(cumulants[:, wide])
        if not wide.all():
            narrow = slice(None) if not wide.any() else ~wide
            self._add_narrow(tails[narrow], weights, cumulants[0, ~wide], cumulants[1, ~wide])

    def pmf(self) -> FloatArray:
        """Probabilities of 0, 1, 2 ... up to where less than 1e-12 is left."""
        mass = np.maximum(self._mass, 0.0)
        left = np.cumsum(mass[::-1])[::-1] / max(mass.sum(), 1e-300)
        size = max(int(np.count_nonzero(left > 1e-12)), 1)
        return mass[:size] / mass[:size].sum()

    def _room(self, size: int) -> None:
        if size > self._mass.size:
            self._mass = np.concatenate([self._mass, np.zeros(max(size, 2 * self._mass.size) - self._mass.size)])

    def _add_wide(self, cumulants: FloatArray) -> None:
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
        self._room(int(offset.max()) + size)
        for start, row in zip(offset.astype(np.int64), mass, strict=True):
            self._mass[start : start + size] += row

    def _add_narrow(self, tails: FloatArray, weights: FloatArray, mean: FloatArray, variance: FloatArray) -> None:
        top = float((mean + 12.0 * np.sqrt(np.maximum(variance, 0.0))).max())
        size = scipy.fft.next_fast_len(int(np.ceil(top)) + 24, real=True)
        angle = 2.0 * np.pi / size * np.arange(size // 2 + 1)
        single = weights == 1.0
        chunk = max(1, int(1.5e6 / (tails.shape[1] * angle.size)))
        for start in range(0, tails.shape[0], chunk):
            spectrum = _generating(tails[start : start + chunk], weights, single, angle)
            mass = scipy.fft.irfft(np.conj(spectrum), size, axis=1).sum(axis=0)
            self._room(size)
            self._mass[:size] += mass


def _probabilities(tails: FloatArray) -> FloatArray:
    """P(N = 0), P(N = 1), ... from tails; rounding that makes a tail rise is put right."""
    full = np.concatenate([np.ones((*tails.shape[:2], 1)), tails, np.zeros((*tails.shape[:2], 1))], axis=2)
    return np.maximum(full[..., :-1] - full[..., 1:], 0.0)


def _summed_cumulants(probabilities: FloatArray, weights: FloatArray) -> FloatArray:
    """Cumulants 1 to 8 of the sum, (8, draws)."""
    counts = np.arange(probabilities.shape[2], dtype=np.float64)
    mean = probabilities @ counts
    centred = counts - mean[..., None]
    power = probabilities * centred
    moments = []
    for _ in range(7):
        power = power * centred
        moments.append(power.sum(axis=2))
    m2, m3, m4, m5, m6, m7, m8 = moments
    rows = (
        mean,
        m2,
        m3,
        m4 - 3 * m2**2,
        m5 - 10 * m3 * m2,
        m6 - 15 * m4 * m2 - 10 * m3**2 + 30 * m2**3,
        m7 - 21 * m5 * m2 - 35 * m4 * m3 + 210 * m3 * m2**2,
        m8 - 28 * m6 * m2 - 56 * m5 * m3 - 35 * m4**2 + 420 * m4 * m2**2 + 560 * m3**2 * m2 - 630 * m2**4,
    )
    return np.stack([row @ weights for row in rows])


def _series_serves(cumulants: FloatArray) -> NDArray[np.bool_]:
    """True where the last terms are small five deviations from zero frequency; early failures in a row spoil it."""
    step = 5.0 / np.sqrt(np.maximum(cumulants[1], 1e-9))
    return (np.abs(cumulants[6]) * step**7 / 5040.0 < 0.3) & (np.abs(cumulants[7]) * step**8 / 40320.0 < 0.1)


def _cumulant_series(cumulants: FloatArray, angle: FloatArray, offset: FloatArray) -> NDArray[np.complex128]:
    """Characteristic function of the sum less `offset`, (draws, angles)."""
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


def _generating(
    tails: FloatArray, weights: FloatArray, single: NDArray[np.bool_], angle: FloatArray
) -> NDArray[np.complex128]:
    """Product over rows of G_i(e^{i angle})^w_i, G(z) = 1 + sum_k P(N >= k) (z - 1) z^(k - 1): (draws, angles)."""
    orders = np.arange(tails.shape[2])
    circle = np.exp(1j * angle)
    basis = (circle - 1.0) * circle ** orders[:, None]
    product = np.ones((tails.shape[0], angle.size), dtype=np.complex128)
    if single.any():
        product *= np.multiply.reduce(_values(tails[:, single], basis), axis=1)
    if not single.all():
        several = tails[:, ~single]
        # turned back by the whole number next to its mean, so that the angle of a fractional power stays on one branch
        middle = np.rint(several.sum(axis=2))
        values = _values(several, basis) * np.exp(-1j * middle[..., None] * angle)
        power = weights[~single][None, :, None]
        size = (0.5 * power * np.log(np.maximum(values.real**2 + values.imag**2, 1e-300))).sum(axis=1)
        turn = (power * np.arctan2(values.imag, values.real)).sum(axis=1) + (middle @ weights[~single])[:, None] * angle
        product *= np.exp(size) * (np.cos(turn) + 1j * np.sin(turn))
    return product


def _values(tails: FloatArray, basis: NDArray[np.complex128]) -> NDArray[np.complex128]:
    values = np.empty((*tails.shape[:2], basis.shape[1]), dtype=np.complex128)
    values.real = 1.0 + tails @ basis.real
    values.imag = tails @ basis.imag
    return values
