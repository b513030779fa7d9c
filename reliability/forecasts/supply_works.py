"""Background work on what stores and bench need."""

from __future__ import annotations

from typing import Any

from fleet.models import Book, Component, Work
from fleet.work import Progress, work_kind


@work_kind("count_use", daily="Counting what stores and bench will need")
def count_use(work: Work, progress: Progress) -> dict[str, Any]:
    """What every component uses from tomorrow on, then order list and backlog, so that no page waits for them."""
    from reliability.forecasts.coming_use import keep_use
    from reliability.forecasts.kept_backlog import bench_document
    from reliability.forecasts.kept_order import order_document

    components = list(Component.objects.all())
    for place, component in enumerate(components):
        progress.step(place, len(components) + 1, component.title)
        keep_use(component)
    progress.step(len(components), len(components) + 1, "order list and bench")
    order_document(Book.load().currency)
    bench_document()
    return {"components": len(components)}


@work_kind("backtest_bench", daily="Judging past forecasts of the bench")
def judge_past_backlogs(work: Work, progress: Progress) -> dict[str, Any]:
    """Once a quarter has ended since the last time; most days nothing. Asked for by name it is done in any case."""
    from reliability.forecasts.backlog_backtest import is_bench_due, judge_bench

    if not (is_bench_due() or work.arguments.get("again")):
        return {"judged": 0}
    return {"judged": judge_bench(since=work.made_at, tell=progress.step)["judged"]}
