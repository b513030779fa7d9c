"""From a forecast's exact distributions to drawn weeks, which the order list and the bench take.

The count gives each part's use over all the days as a whole distribution, and the course of the weeks as means. A
future draws its total from the first and spreads it by the second: in trials against simulated fleets the use up to
any week was within a few per cent, also where parts had just begun to age.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from reliability.stats.count_results import CountDistribution
from reliability.stats.stocking_paths import weekly_from_total

DRAWS = 2000


def weekly_use(
    totals: Mapping[str, CountDistribution],
    weekly_means: Sequence[float],
    *,
    idle: Iterable[str] = (),
    draws: int = DRAWS,
    seed: int = 0,
) -> dict[str, NDArray[np.int64]]:
    """Drawn weeks (draws, weeks) of each part. totals: by part over all the weeks; weekly_means: the course of the
    component's weeks, whatever its level. idle: parts of it that no position takes any more, of which none is used
    (which is known, other than the use of a part without any forecast). The same seed gives the same futures.
    """
    found = {part: np.zeros((draws, len(weekly_means)), dtype=np.int64) for part in idle}
    for part, total in totals.items():
        rng = np.random.default_rng([seed, *part.encode()])
        found[part] = weekly_from_total(total.pmf, weekly_means, draws, rng)
    return found
