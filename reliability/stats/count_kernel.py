"""Renewal counts of a part fitted new, on a grid of each class's own horizon.

A life ends by failure, by removal for another reason, or by planned replacement; one kind (or all) is counted, the rest
renew the part in silence. With c and s the masses of counted and silent ends and r the time that remains, the tails
P_k(r) = P(N >= k) obey P_k = c * P_{k-1} + s * P_k, P_0 = 1 (Cox 1962, Renewal Theory). Convolutions are products of
damped Fourier transforms: a sequence times damping^i wraps round with a factor of 1e-9.

The grid has half-cells: masses of whole cells lie at cell midpoints (odd places), tails are known at every place,
and the first failure's distribution is exact. On a visit lattice the places are visits.
"""

from __future__ import annotations

from functools import cached_property

import numpy as np
import scipy.fft
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

MOST_RENEWALS = 300
_TAIL_LEFT = 1e-7  # of a position over the horizon; a million of them then miss a tenth of a part
_WINDOW_LEFT = 1e-6  # of a position within a window
_SHORT = 60  # places up to which windows are summed term by term: faster than transforms, without their rounding


class Transform:
    """Products of damped Fourier transforms for sequences of a given length.

    tie: the share of a mass on an edge that lies below it. One half where masses stand for cells spread about their
    places; 0 on a lattice, where an event at the edge comes before what follows it.
    """

    def __init__(self, places: int, tie: float = 0.5) -> None:
        self.places, self.tie = places, tie
        self._size = scipy.fft.next_fast_len(2 * places, real=True)
        self._damping = 10.0 ** (-9.0 / self._size * np.arange(places))

    def forward(self, sequence: FloatArray) -> NDArray[np.complex128]:
        """Transform along the last axis, of at most `places` entries."""
        return scipy.fft.rfft(sequence * self._damping[: sequence.shape[-1]], self._size, axis=-1)

    def up_to(self, limit: int) -> FloatArray:
        """1 below the limit, the tie's share on it, 0 beyond: (places,)."""
        return up_to(np.arange(self.places), limit, self.tie)

    def back(self, spectrum: NDArray[np.complex128]) -> FloatArray:
        """The sequence again, first `places` entries."""
        return scipy.fft.irfft(spectrum, self._size, axis=-1)[..., : self.places] / self._damping


class FromNew:
    """Tails of the counted number for a new part with remaining places 0 .. places - 1.

    counted, silent: masses (draws, classes, places); counted_by: exact cumulative counted share (same shape).
    """

    def __init__(
        self, transform: Transform, counted: FloatArray, silent: FloatArray | None, counted_by: FloatArray
    ) -> None:
        self._transform = transform
        self._plain = counted, silent
        self._counted = transform.forward(counted)
        self._silent = None if silent is None else transform.forward(silent)
        self._first = transform.forward(counted_by)
        self._counted_by = counted_by

    def tails(self) -> FloatArray:
        """P(N >= k) for k = 0, 1, ... up to where no draw has 1e-7 left: (draws, classes, K + 1, places)."""
        spectrum = self._first
        if self._silent is None:
            current, step = self._counted_by, self._counted
        else:
            spectrum = spectrum / (1.0 - self._silent)
            current, step = self._transform.back(spectrum), self._counted / (1.0 - self._silent)
        found = [np.ones_like(current), np.clip(current, 0.0, 1.0)]
        while found[-1][..., -1].max(initial=0.0) > _TAIL_LEFT and len(found) < MOST_RENEWALS:
            spectrum = spectrum * step
            found.append(np.clip(self._transform.back(spectrum), 0.0, 1.0))
        return np.stack(found, axis=2)

    def window_tails(self, whole: FloatArray, width: int) -> FloatArray:
        """Tails of the number counted within the last `width` places, for every remaining time, shaped like `whole`.

        Renewals before the window are silent: beyond the width U_k = c * (U_{k-1} inside) + s * (U_k inside)
        + (c + s) * (U_k beyond).
        """
        return self.staged_tails(whole[:, :, : self._enough(whole, width)], width, None, -1)

    def staged_tails(self, whole: FloatArray, width: int, next_tails: FloatArray | None, next_until: int) -> FloatArray:
        """Window tails where a part fitted with at most `next_until` places left follows `next_tails` instead.

        whole: this design's plain tails (or any array with enough orders); next_tails: the other design's window tails.
        """
        if next_tails is None:
            return self._plain_window_tails(whole, width)
        transform = self._transform
        silent = np.zeros_like(self._counted) if self._silent is None else self._silent
        every = 1.0 / (1.0 - self._counted - silent)
        inside, known_mask = transform.up_to(width), transform.up_to(next_until)
        beyond_mask = 1.0 - transform.up_to(max(width, next_until))
        found = [np.ones_like(whole[:, :, 0])]
        # a cell centred on the very end lies half beyond it
        found[0][..., 0] = 1.0 - transform.tie
        for order in range(1, whole.shape[2]):
            counted_part = self._counted * transform.forward(found[-1] * inside)
            following = next_tails[:, :, min(order, next_tails.shape[2] - 1)] * (order < next_tails.shape[2])
            near = following * known_mask
            if next_until < width:
                source = transform.back(counted_part + silent * transform.forward(near))
                fitted_before = transform.forward(source * (1.0 - known_mask))
                near = near + transform.back(fitted_before / (1.0 - silent))
            near = near * (1.0 - beyond_mask)
            ending = counted_part + silent * transform.forward(near * inside)
            if next_until > width:
                ending = ending + (self._counted + silent) * transform.forward(near * (1.0 - inside))
            far = transform.back(transform.forward(transform.back(ending) * beyond_mask) * every)
            found.append(np.clip(near + far, 0.0, 1.0))
        return np.stack(found, axis=2)

    def _plain_window_tails(self, whole: FloatArray, width: int) -> FloatArray:
        """Window tails of one design, all orders at once: within the window they are the plain tails."""
        transform = self._transform
        inside = transform.up_to(width)
        near = whole * inside
        near[:, :, 0] = inside
        near[:, :, 0, 0] *= 1.0 - transform.tie
        first = max(int(np.count_nonzero(inside == 1.0)), 1)  # from here on a part is fitted before the window
        found = np.empty_like(whole)
        found[:, :, 0] = 1.0
        # a cell centred on the very end lies half beyond it
        found[:, :, 0, 0] = 1.0 - transform.tie
        far = near[:, :, 1:]
        if first < transform.places:
            product = self._product if transform.places > _SHORT else _short_product
            counted, silent = self._plain
            source = product(near[:, :, :-1], counted, first, width)
            if silent is not None:
                source += product(near[:, :, 1:], silent, first, width)
            source *= 1.0 - inside[first:]
            far[..., first:] += product(source, self._renewals[..., : transform.places - first], 0, None)
        np.clip(far, 0.0, 1.0, out=found[:, :, 1:])
        return found

    @cached_property
    def _renewals(self) -> FloatArray:
        """Masses of all fittings so far, whatever ended the part before, a new one at place 0 among them."""
        every = self._counted if self._silent is None else self._counted + self._silent
        return self._transform.back(1.0 / (1.0 - every))

    def _product(self, sequences: FloatArray, masses: FloatArray, first: int, width: int | None) -> FloatArray:
        """What `_short_product` gives, through transforms."""
        forward = self._transform.forward
        return self._transform.back(forward(sequences) * forward(masses)[:, :, None])[..., first : masses.shape[2]]

    def _enough(self, whole: FloatArray, width: int) -> int:
        # one more than for a new part: the running one may be about to fail
        return _orders(whole[:, :, :, min(width, whole.shape[3] - 1)]) + 1


def _short_product(sequences: FloatArray, masses: FloatArray, first: int, width: int | None) -> FloatArray:
    """Convolution of sequences (draws, classes, orders, places) with masses (draws, classes, places) from `first` on.

    width: the last place at which a sequence is above 0, where that is known.
    """
    places = masses.shape[2]
    width = places - 1 if width is None else width
    padded = np.zeros((*masses.shape[:2], places + width))
    padded[..., width:] = masses
    windows = sliding_window_view(padded, places - first, axis=2)
    # masses[r - u] for u = 0 .. width and r = first .. places - 1
    reached = windows[:, :, first + width - np.arange(width + 1)]
    return sequences[..., : width + 1] @ reached


def _orders(tails: FloatArray) -> int:
    """How many orders (0 included) carry weight in tails (draws, classes, orders)."""
    alive = tails.max(axis=(0, 1), initial=0.0) > _WINDOW_LEFT
    return max(int(np.count_nonzero(alive)), 2)


def up_to(place: IntArray, limit: int, tie: float) -> FloatArray:
    """1 for places below the limit, `tie` on it, 0 beyond."""
    return np.where(place < limit, 1.0, np.where(place == limit, tie, 0.0))
