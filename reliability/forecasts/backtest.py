"""How good past forecasts would have been: every past quarter judged, summed up and kept.

The answer for a component is kept until it is made again, so that it outlives the page that asked for it. Each quarter
is kept on its own as soon as it is judged: whoever goes on after a killed worker judges no quarter twice.
"""

from __future__ import annotations

import datetime as dt
import json
from collections.abc import Callable
from typing import Any

from django.utils import timezone

from fleet.formats import long_day
from fleet.models import Component, DataVersion
from reliability.forecasts.backtest_quarter import (
    BANDS,
    DAYS,
    MEASURES,
    Stand,
    first_record,
    judge_quarter,
    past_quarters,
)
from reliability.forecasts.backtest_summary import summed_up
from reliability.forecasts.backtest_works import QUARTERS
from reliability.forecasts.horizon import next_quarter
from reliability.kept import key_of
from reliability.lives_as_known import shared_records
from reliability.models import KeptResult

KIND, KIND_QUARTER = "backtest", "backtest quarter"
KEPT_FOR = dt.timedelta(days=120)
Tell = Callable[[int, int, str], None]


def backtest(
    components: list[Component],
    quarters: int = QUARTERS,
    *,
    today: dt.date | None = None,
    since: dt.datetime | None = None,
    tell: Tell = lambda done, total, message: None,
) -> list[dict[str, Any]]:
    """Judges and keeps the last quarters of each component; what was judged since that moment is not judged again.

    `tell(done, total, message)` may raise to stop it. Quarter by quarter, so that the clocks of a day are made once.
    """
    begins = past_quarters(today or timezone.localdate(), quarters)
    found: dict[str, list[dict[str, Any]]] = {component.code: [] for component in components}
    version, total = DataVersion.current(), len(begins) * len(components)
    with shared_records():
        for place, begin in enumerate(begins):
            for number, component in enumerate(components):
                tell(place * len(components) + number, total, f"{component.title}, quarter from {long_day(begin)}")
                found[component.code].append(kept_quarter(Stand(component, begin), version, since))
    documents = [document_of(each, quarters, found[each.code], today) for each in components]
    for document in documents:
        keep(KIND, key_of({"component": document["component"]}), version, document)
    KeptResult.objects.filter(kind=KIND_QUARTER, made_at__lt=timezone.now() - KEPT_FOR).delete()
    return documents


def kept_quarter(stand: Stand, version: int, since: dt.datetime | None) -> dict[str, Any]:
    """A quarter as judged for the same data, or by an earlier attempt of the same work."""
    key = key_of({"component": stand.component.code, "begin": stand.begin.isoformat(), "days": DAYS})
    row = KeptResult.objects.filter(kind=KIND_QUARTER, key=key).first()
    if row is not None and (row.data_version == version or (since is not None and row.made_at >= since)):
        return json.loads(bytes(row.payload))
    quarter = judge_quarter(stand)
    keep(KIND_QUARTER, key, version, quarter)
    return quarter


def keep(kind: str, key: str, version: int, document: dict[str, Any]) -> None:
    text = json.dumps(document, allow_nan=False, separators=(",", ":"))
    KeptResult.objects.update_or_create(
        kind=kind, key=key, defaults={"data_version": version, "payload": text.encode(), "made_at": timezone.now()}
    )


def document_of(
    component: Component, asked: int, quarters: list[dict[str, Any]], today: dt.date | None = None
) -> dict[str, Any]:
    """Quarters in the order of time, sums over them for each measure, and what could not be judged and why."""
    judged = [each for each in quarters if "passed_over" not in each]
    return {
        "component": component.code,
        "title": component.title,
        "as_of": (today or timezone.localdate()).isoformat(),
        "asked": asked,
        "judged": len(judged),
        "days": DAYS,
        "bands": [f"{band:g}" for band in BANDS],
        "first_after": first_possible(component, today).isoformat(),
        "passed_over": [each for each in quarters if "passed_over" in each],
        "measures": {name: summed_up(name, judged) for name in MEASURES} if judged else {},
    }


def first_possible(component: Component, today: dt.date | None = None) -> dt.date:
    """The day on which the first quarter that begins after the first record is over."""
    begun = first_record(component) or today or timezone.localdate()
    return next_quarter(begun) + dt.timedelta(days=DAYS)


def latest(component: Component) -> dict[str, Any] | None:
    """The kept document with `counted_at`, and `current`: False where entries came after it; None if there is none."""
    row = KeptResult.objects.filter(kind=KIND, key=key_of({"component": component.code})).first()
    if row is None:
        return None
    document = json.loads(bytes(row.payload))
    return {**document, "counted_at": row.made_at, "current": row.data_version == DataVersion.current()}


def latest_line(component: Component) -> dict[str, Any] | None:
    """For the Forecast screen: `sentence`, `note`, `counted_at`, `current`; None where no backtest was made yet."""
    from reliability.forecasts.backtest_words import line

    document = latest(component)
    if document is None:
        return None
    return {**{name: document[name] for name in ("component", "counted_at", "current", "judged")}, **line(document)}


def is_due(component: Component, today: dt.date | None = None) -> bool:
    """Whether a quarter has ended since the kept backtest, or none was ever made."""
    document = latest(component)
    if document is None:
        return True
    newest = past_quarters(today or timezone.localdate(), 1)[0]
    return dt.date.fromisoformat(document["as_of"]) < newest + dt.timedelta(days=DAYS)
