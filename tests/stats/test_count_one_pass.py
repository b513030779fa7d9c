"""One pass over a stretch, its weeks and two groupings answers what separate passes answer."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reliability.stats.counts import CountForecast, forecast_counts
from reliability.stats.errors import InvalidArgument
from reliability.stats.posterior import KnownWeibull

_rng = np.random.default_rng(3)
AGES = _rng.uniform(0, 90, 200)
SITES = [f"S{number % 5}" for number in range(200)]
TYPES = ["A" if number % 3 else "B" for number in range(200)]
LIFE = KnownWeibull(2.0, 100.0, 0.3)


def count(**asked: Any) -> CountForecast:
    settings = {"draws": 40, "other_removals": 0.003, "sites": SITES, "rng": np.random.default_rng(1), **asked}
    return forecast_counts(LIFE, AGES, 126.0, **settings)


def test_a_stretch_its_weeks_sites_and_types_in_one_pass() -> None:
    one = count(groups=SITES, also_groups=[TYPES], windows=[0, 35, 42, 49, 126], stretch=(1, 4))
    whole = count(groups=SITES, windows=[0, 35, 126], group_window=1)
    kinds = count(groups=TYPES, windows=[0, 35, 126], group_window=1)
    weeks = count(windows=[0, 35, 42, 49, 126])
    assert one.failures.pmf == pytest.approx(whole.by_window[1].failures.pmf, abs=1e-4)
    assert one.parts_used.mean == pytest.approx(whole.by_window[1].parts_used.mean, rel=1e-3)
    for site, counts in whole.by_group.items():
        assert one.by_group[site].failures.mean == pytest.approx(counts.failures.mean, rel=2e-3)
    for kind, counts in kinds.by_group.items():
        assert one.by_also[0][kind].parts_used.mean == pytest.approx(counts.parts_used.mean, rel=2e-3)
    assert one.windows == ((35.0, 42.0), (42.0, 49.0), (49.0, 126.0))
    for week, same in zip(one.by_window, weeks.by_window[1:], strict=True):
        assert week.failures.mean == pytest.approx(same.failures.mean, rel=2e-3)


def test_removals_counted_elsewhere_leave_the_failures_alone() -> None:
    all_of_them, half, none = (count(taken_share=share) for share in (0.0, 0.5, 1.0))
    assert half.failures.mean == pytest.approx(all_of_them.failures.mean, rel=1e-9)
    assert none.parts_used.mean == pytest.approx(none.failures.mean, rel=2e-3)
    middle = 0.5 * (all_of_them.parts_used.mean + none.parts_used.mean)
    assert half.parts_used.mean == pytest.approx(middle, rel=2e-3)


@pytest.mark.parametrize(
    "wrong", [{"stretch": (2, 2), "windows": [0, 1, 2, 3]}, {"also_groups": [TYPES]}, {"taken_share": 1.5}]
)
def test_what_makes_no_sense_is_refused(wrong: dict[str, Any]) -> None:
    with pytest.raises(InvalidArgument):
        count(**wrong)
