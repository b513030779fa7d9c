"""Background work that judges past forecasts: when somebody asks, and by itself once a quarter has ended."""

from __future__ import annotations

from typing import Any

from fleet.models import Component, Work
from fleet.work import Progress, WorkFailed, work_kind

ASKED, DUE = "backtest", "backtest_due"
QUARTERS, MOST_QUARTERS = 8, 40


@work_kind(ASKED)
def judge_past_forecasts(work: Work, progress: Progress) -> dict[str, Any]:
    """The last quarters of one component, or of all; an earlier attempt's quarters are read, not judged again."""
    from reliability.forecasts.backtest import backtest

    code = work.arguments.get("component")
    components = list(Component.objects.all() if code is None else Component.objects.filter(code=code))
    if not components:
        raise WorkFailed(f"There is no component {code} any more. Choose another on the Forecast screen.")
    quarters = work.arguments.get("quarters") or QUARTERS
    documents = backtest(components, quarters, since=work.made_at, tell=progress.step)
    return {"components": [each["component"] for each in documents]}


@work_kind(DUE, daily="Judging past forecasts")
def judge_what_is_due(work: Work, progress: Progress) -> dict[str, Any]:
    """Components of which a quarter has ended since the last time, most days none."""
    from reliability.forecasts.backtest import backtest, is_due

    due = [component for component in Component.objects.all() if is_due(component)]
    documents = backtest(due, since=work.made_at, tell=progress.step) if due else []
    return {"components": [each["component"] for each in documents]}


@work_kind("expect_failures", daily="Counting what is to be expected now")
def expect_failures(work: Work, progress: Progress) -> dict[str, Any]:
    """This week and this quarter of every component, as Today compares them."""
    from django.utils import timezone

    from reliability.forecasts.expected_now import keep_expected
    from reliability.lives_as_known import shared_records

    components, today = list(Component.objects.all()), timezone.localdate()
    with shared_records():
        for place, component in enumerate(components):
            progress.step(place, len(components), component.title)
            keep_expected(component, today)
    return {"components": len(components)}
