"""What a what-if changes against the base case: same draws of the lives, same duty, same luck of every part.

Both are simulated side by side, so that the band is one of the difference: of two quarters that differ only in what is
assumed. The mean is that of the exact counts where they apply. Of a large fleet a sample of positions is simulated,
evenly spread over sites, types, parts and ages, and told for the whole; what its smallness adds to the spread is taken
out again.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from reliability.forecasts.count import is_simulated, simulate, singles, totals
from reliability.forecasts.learned import learned
from reliability.forecasts.next_quarter import checked, running_now
from reliability.forecasts.positions import Positions, positions_of
from reliability.forecasts.question import Question
from reliability.forecasts.season import season_of
from reliability.forecasts.simulated import for_all

if TYPE_CHECKING:
    from reliability.forecasts.learned import Learned
    from reliability.running_parts import RunningParts

BANDS = (0.5, 0.8, 0.95)
KINDS = ("failures", "parts_used", "planned")
SIMULATED = 180_000  # draws times positions
FEWEST_DRAWS, MOST_DRAWS = 200, 800
SAMPLE = 1200  # positions of a fleet that is larger


def difference_document(question: Question, *, bands: Sequence[float] = BANDS) -> dict[str, Any]:
    """`failures`, `parts_used`, `planned`: each the mean and bands of what-if minus base; negative is fewer.

    "mean" and "bands" stand once more at the top, for failures. Parts taken along with other components' failures are
    the same in both cases, but for the duty; they are not in it.
    """
    checked(question)
    running = running_now(question)
    taught = learned(question.component, question.as_of, question.known_on)
    if not running.rows or not taught.designs or question.what_if.is_base:
        found = {kind: {"mean": 0.0, "bands": {f"{band:g}": [0, 0] for band in bands}} for kind in KINDS}
    else:
        found = _differences(question, running, taught, bands)
    return {**found["failures"], **found}


def _differences(
    question: Question, running: RunningParts, taught: Learned, bands: Sequence[float]
) -> dict[str, dict[str, Any]]:
    import numpy as np

    cases = [(asked, positions_of(running.rows, asked, taught)) for asked in (question, question.base)]
    size = max(float(positions.weights.sum()) for _, positions in cases)
    share = question.share_for(size, SAMPLE)
    draws = int(np.clip(SIMULATED / max(size * share, 1.0), FEWEST_DRAWS, MOST_DRAWS))
    assumed, base = (_played(asked, taught, positions, share, draws) for asked, positions in cases)
    exact = None
    if not any(is_simulated(asked) for asked, _ in cases):
        exact = [totals(asked, taught, positions) for asked, positions in cases]
    whole = season_of(question, taught.duty).whole
    found = {}
    for place, kind in enumerate(KINDS):
        size = min(assumed[place].shape[1], base[place].shape[1])
        differences = whole * for_all(assumed[place][:, :size] - base[place][:, :size], share)
        shift = 0.0
        if exact is not None:
            wanted = getattr(exact[0], kind).mean - getattr(exact[1], kind).mean
            shift = wanted - differences.mean()
        edges = {
            f"{band:g}": np.quantile(differences + shift, [(1 - band) / 2, (1 + band) / 2], method="nearest")
            for band in bands
        }
        found[kind] = {
            "mean": float(differences.mean() + shift),
            "bands": {name: [round(float(low)), round(float(high))] for name, (low, high) in edges.items()},
        }
    return found


def _played(asked: Question, taught: Learned, positions: Positions, share: float, draws: int) -> Any:
    """Failures, parts used and planned ones of every draw and position, of this share of the positions."""
    return simulate(asked.of_share(share), taught, singles(positions, share), draws=draws).by_position
