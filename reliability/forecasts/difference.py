"""What a what-if changes against the base case: same draws of the lives, same duty, same chance."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from reliability.forecasts.question import Question
from reliability.forecasts.what_if import NotCountedYet

BANDS = (0.5, 0.8, 0.95)


def difference_document(question: Question, *, bands: Sequence[float] = BANDS) -> dict[str, Any]:
    """`failures`, `parts_used`, `planned`: each the mean and bands of what-if minus base; negative is fewer.

    "mean" and "bands" stand once more at the top, for failures.
    """
    raise NotCountedYet("What differs from the base case is not counted yet.")
