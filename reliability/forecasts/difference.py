"""What a what-if changes against the base case: same draws of the lives, same duty, same luck of every part.

Both are simulated side by side, so that the band is one of the difference: of two quarters that differ only in what is
assumed. The mean is that of the exact counts where they apply.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from reliability.forecasts.count import count, is_simulated, simulate
from reliability.forecasts.learned import learned
from reliability.forecasts.next_quarter import checked, running_now
from reliability.forecasts.positions import positions_of
from reliability.forecasts.question import Question

if TYPE_CHECKING:
    from reliability.forecasts.learned import Learned
    from reliability.running_parts import RunningParts

BANDS = (0.5, 0.8, 0.95)
KINDS = ("failures", "parts_used", "planned")


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

    cases = [(asked, positions_of(running.rows, asked, taught)) for asked in _paired(question)]
    simulated = [simulate(asked, taught, positions) for asked, positions in cases]
    exact = None
    if not any(is_simulated(asked) for asked, _ in cases):
        exact = [count(asked, taught, positions) for asked, positions in cases]
    found = {}
    for kind in KINDS:
        assumed, base = (getattr(each, kind) for each in simulated)
        differences = assumed - base
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


def _paired(question: Question) -> tuple[Question, Question]:
    """The what-if and its base case, on draws of the same designs."""
    return question, question.base
