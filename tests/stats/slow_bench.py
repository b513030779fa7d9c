"""A bench followed event by event: slow, plain, and written without the code under test."""

from __future__ import annotations

import heapq


def hour_of(moment: float, hours_by_day: list[float]) -> float:
    """Bench hours offered before a moment."""
    whole = int(moment)
    return sum(hours_by_day[:whole]) + (moment - whole) * (hours_by_day[whole] if whole < len(hours_by_day) else 0.0)


def slow_bench(jobs: list[tuple[float, float, float]], hours_by_day: list[float], places: int) -> list[float | None]:
    """Moments at which jobs (arrived, available, hours) are finished; None: not within the days.

    The state moves from event to event: a job becomes workable, a day ends, a job is finished. Between events every
    busy person works at the day's pace. Jobs are taken in the order in which they became workable, then as listed.
    """
    events = [(max(available, 0.0), place) for place, (_, available, _) in enumerate(jobs)]
    heapq.heapify(events)
    left = {place: hours for place, (_, _, hours) in enumerate(jobs)}
    queue: list[int] = []
    busy: list[int] = []
    finished: list[float | None] = [None] * len(jobs)
    now, end = 0.0, float(len(hours_by_day))
    while now < end:
        while events and events[0][0] <= now + 1e-12:
            queue.append(heapq.heappop(events)[1])
        while queue and len(busy) < places:
            busy.append(queue.pop(0))
        pace = hours_by_day[int(now + 1e-12)] / places
        until = min(float(int(now + 1e-12) + 1), events[0][0] if events else end)
        if busy and pace > 0:
            until = min(until, now + min(left[job] for job in busy) / pace)
        for job in list(busy):
            left[job] -= pace * (until - now)
            if left[job] <= 1e-9:
                busy.remove(job)
                finished[job] = until
        now = until
    return finished
