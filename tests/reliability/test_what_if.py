"""What-ifs: figures that no forecast can assume are refused, and what is asked survives as JSON."""

from __future__ import annotations

import datetime as dt
import json
from typing import Any

import pytest

from reliability.forecasts.what_if import UnusableWhatIf, WhatIf


@pytest.mark.parametrize(
    ("figures", "field"),
    [
        ({"duty": 0.0}, "duty"),
        ({"duty": 50.0}, "duty"),
        ({"replace_at": 0.0}, "replace_at"),
        ({"service_level": 1.0}, "service_level"),
        ({"superseding_from": dt.date(2026, 1, 1)}, "superseding"),
        ({"retrofit_a_week": 3.0}, "superseding"),
        ({"superseding": "N3", "retrofit_a_week": -1.0}, "retrofit_a_week"),
    ],
)
def test_figures_out_of_reach_are_refused_on_their_field(figures: dict[str, Any], field: str) -> None:
    with pytest.raises(UnusableWhatIf) as refusal:
        WhatIf(**figures)
    assert refusal.value.field == field


def test_what_is_asked_survives_as_json() -> None:
    asked = WhatIf(duty=1.2, superseding="N3", superseding_from=dt.date(2027, 1, 4), retrofit_a_week=5.0)
    assert WhatIf.from_told(json.loads(json.dumps(asked.told()))) == asked
    assert WhatIf().told() == {}


def test_another_service_level_alone_changes_nothing_that_fails() -> None:
    assert WhatIf(service_level=0.9).is_base
    assert not WhatIf(duty=1.1).is_base
