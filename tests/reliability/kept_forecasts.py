"""A kept forecast as it stands in the book, without counting one."""

from __future__ import annotations

import datetime as dt
from typing import Any

from reliability.models import KeptForecast


def told(mean: float, low: int, high: int) -> dict[str, Any]:
    """Figures whose bands are one inside the other."""
    bands = {"0.5": [low + 1, high - 1], "0.8": [low, high], "0.95": [low - 1, high + 1]}
    return {"mean": mean, "median": round(mean), "bands": bands, "plan_for": {"0.95": high}}


def weekly_document(component: Any, begin: dt.date, weeks: int, mean: float = 4.0) -> dict[str, Any]:
    total = told(weeks * mean, round(weeks * mean - 6), round(weeks * mean + 6))
    used = {**total, "parts_used": total}
    return {
        "from": begin.isoformat(),
        "days": 7 * weeks,
        "as_of": (begin - dt.timedelta(days=10)).isoformat(),
        "component": component.code,
        "clock": component.clock,
        "sites": None,
        "what_if": {},
        "positions": 40,
        "failures_seen": 25,
        "counted": True,
        "total": used,
        "planned": told(0.0, 1, -1) | {"bands": {"0.5": [0, 0], "0.8": [0, 0], "0.95": [0, 0]}},
        "weeks": [
            {"from": (begin + dt.timedelta(days=7 * week)).isoformat(), **told(mean, 2, 6)} for week in range(weeks)
        ],
        "groups": {"needed": [{"group": "N2", **used}], "part": [], "site": [], "type": []},
        "age_profile": [],
        "follows": [],
        "left_out": [],
        "warnings": [],
    }


def make_kept_forecast(**fields: Any) -> KeptForecast:
    """Of all sites unless `sites` names some; four weeks from a Monday."""
    sites, component = fields.pop("sites", None), fields["component"]
    begin, weeks = fields.pop("begin", dt.date(2024, 6, 3)), fields.pop("weeks", 4)
    codes = None if sites is None else [site.code for site in sites]
    fields.setdefault("document", weekly_document(component, begin, weeks))
    fields.setdefault("question", {"component": component.code, "sites": codes, "what_if": {}})
    kept = KeptForecast.objects.create(
        begin=begin,
        days=7 * weeks,
        as_of=begin - dt.timedelta(days=10),
        of_all_sites=sites is None,
        version="0.1.0, methods 1",
        data_version=7,
        **fields,
    )
    kept.sites.add(*(sites or ()))
    return kept
