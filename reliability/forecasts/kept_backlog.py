"""Whether the bench keeps up, from the records of today: kept until something there changes."""

from __future__ import annotations

import datetime as dt
import hashlib
import json
from dataclasses import asdict, dataclass
from typing import Any

from django.utils import timezone

from fleet.models import Component, DataVersion
from reliability.forecasts.backlog import Backlog, Bench, Change, backlog, changes_told, replicates_for
from reliability.forecasts.bench_records import RETROFIT, BenchRecords, bench_records
from reliability.forecasts.bench_words import change_sentence, ends, sentences, target
from reliability.forecasts.coming_use import ComingUse, kept_uses
from reliability.kept import key_of
from reliability.models import KeptResult

KIND = "bench backlog"
DAYS = 91
KEPT_FOR = dt.timedelta(days=3)


@dataclass(frozen=True)
class BenchQuestion:
    """target_on: by when the target is to be met; the rest is what would be changed."""

    target_on: dt.date | None = None
    more_hours: float = 0.0
    from_on: dt.date | None = None
    until_on: dt.date | None = None
    retrofits_a_week: float | None = None

    @property
    def change(self) -> Change | None:
        if not self.more_hours and self.retrofits_a_week is None:
            return None
        pace = {} if self.retrofits_a_week is None else {RETROFIT: self.retrofits_a_week}
        return Change(self.more_hours, self.from_on, self.until_on, pace)


USUAL = BenchQuestion()


def bench_document(question: BenchQuestion = USUAL, *, count: bool = True) -> dict[str, Any]:
    """The document of the backlog with its sentences, and what a change does; `refused` where nothing can be told."""
    uses = kept_uses(Component.objects.all(), count=count)
    records = bench_records(uses, target_on=question.target_on)
    if records.bench is None:
        return {"refused": records.refused}
    if question != USUAL:
        return told(records, records.bench, uses, question)
    state = state_of(records.bench, uses)
    today = records.bench.today
    row = KeptResult.objects.filter(kind=KIND, key=key_of({"today": today})).first()
    if row is not None:
        kept = json.loads(bytes(row.payload))
        if kept["state"] == state:
            return dict(kept)
    document = {**told(records, records.bench, uses, question), "state": state}
    text = json.dumps(document, allow_nan=False, separators=(",", ":"))
    KeptResult.objects.filter(kind=KIND, made_at__lt=timezone.now() - KEPT_FOR).delete()
    KeptResult.objects.update_or_create(
        kind=KIND,
        key=key_of({"today": today}),
        defaults={"data_version": DataVersion.current(), "payload": text.encode(), "made_at": timezone.now()},
    )
    return dict(json.loads(text))


def last_bench_document(today: dt.date | None = None) -> dict[str, Any] | None:
    """Today's as it was last made, without looking whether anything changed since."""
    day = today or timezone.localdate()
    row = KeptResult.objects.filter(kind=KIND, key=key_of({"today": day})).first()
    return None if row is None else dict(json.loads(bytes(row.payload)))


def earlier_bench_document() -> dict[str, Any] | None:
    """That of the last day before today that is still kept."""
    today = timezone.localdate()
    days = (today - dt.timedelta(days=back) for back in range(1, KEPT_FOR.days + 1))
    return next((found for day in days if (found := last_bench_document(day)) is not None), None)


def told(records: BenchRecords, bench: Bench, uses: dict[str, ComingUse], question: BenchQuestion) -> dict[str, Any]:
    change = question.change
    replicates = replicates_for(bench, change)
    found = backlog(bench, replicates=replicates)
    document = {
        **found.document(),
        "sentences": sentences(found),
        "ends_sentence": ends(found),
        "target_sentence": target(found),
        "notes": records.notes,
        "current": all(use.current for use in uses.values()),
        "hours_by_week": hours_by_week(found),
        "retrofits_a_week": next(kind.planned_a_week for kind in bench.kinds if kind.kind == RETROFIT),
        "kinds": kinds_told(found),
        "replicates": replicates,
    }
    if change is not None:
        changed = backlog(bench, change=change, replicates=replicates)
        what = changes_told(changed, found)
        document |= {
            "changed": changed.document(),
            "changed_sentences": sentences(changed),
            "difference": what,
            "difference_sentence": change_sentence(what, found),
        }
    return document


def kinds_told(found: Backlog) -> list[dict[str, Any]]:
    """What the forecast rests on, kind by kind."""
    rows = []
    for kind in found.bench.kinds:
        weeks = None if kind.weekly_failures is None else float(kind.weekly_failures[:, : DAYS // 7].mean())
        share = min((kind.came + 0.5) / (kind.of + 1.0), 1.0)
        rows.append(
            {
                "kind": kind.kind,
                "name": kind.name,
                "came": kind.came,
                "of": kind.of,
                "a_week": kind.planned_a_week + (0.0 if weeks is None else weeks * share),
                "jobs": len(kind.hours),
                "hours": sum(kind.hours) / len(kind.hours) if kind.hours else None,
                "how": found.how.get(kind.kind, ""),
            }
        )
    return rows


def hours_by_week(found: Backlog) -> list[float]:
    """Hours that the calendar has in each of the weeks."""
    from reliability.forecasts.backlog import hours_by_day

    bench = found.bench
    hours = hours_by_day(bench.hours, bench.today, bench.days)
    return [float(hours[first : first + 7].sum()) for first in range(0, bench.days, 7)]


def state_of(bench: Bench, uses: dict[str, ComingUse]) -> str:
    """Changes with whatever the forecast is made from; what is drawn follows from when it was counted."""
    plain = [
        (kind.kind, kind.hours, kind.parts_waits, kind.finished, kind.ready, kind.came, kind.of, kind.planned_a_week)
        for kind in bench.kinds
    ]
    calendar = asdict(bench.hours)
    calendar["weeks"] = sorted((week.isoformat(), hours) for week, hours in bench.hours.weeks.items())
    calendar["closed"] = sorted(day.isoformat() for day in bench.hours.closed)
    counted = sorted((code, use.counted_at.isoformat()) for code, use in uses.items())
    rest = [bench.today, bench.target, bench.ready_modules, bench.fleet, bench.days]
    text = json.dumps([plain, [asdict(job) for job in bench.jobs], calendar, counted, rest], default=str)
    return hashlib.sha256(text.encode()).hexdigest()
