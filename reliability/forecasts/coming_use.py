"""What each component will break and use from tomorrow on, counted once a day and kept for order list and bench.

Counting takes seconds on a large fleet, so the worker does it and pages only read. What is kept are whole
distributions over all the weeks, the course of the weeks, and where each part goes in; entries of the same day move
them little, and `current` says whether there were any.
"""

from __future__ import annotations

import datetime as dt
import json
import math
from collections import defaultdict
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

from django.utils import timezone

from fleet.models import Book, Component, DataVersion, Part
from reliability.forecasts.question import Question, question_of
from reliability.kept import key_of
from reliability.models import KeptResult

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from reliability.stats.count_results import CountDistribution

KIND = "coming use"
KEPT_FOR = dt.timedelta(days=3)
WEEK = 7
FEWEST_WEEKS, MOST_WEEKS = 13, 52
UNKNOWN_LEAD_DAYS = 30
LEAST_CHANCE = 1e-9  # of a count: rarer ones are cut off


@dataclass(frozen=True)
class ComingUse:
    """Of one component, from `begin` on: known is False where nothing is known of its lives.

    used, failures: distributions over all the weeks; weekly: expected failures in each. standing: how many positions
    at each site hold which part and take which next. by_site: expected uses at each site.
    """

    component: str
    begin: dt.date
    known: bool
    failures: CountDistribution
    used: dict[str, CountDistribution]
    weekly: list[float]
    standing: list[tuple[str, str, str, int]]
    by_site: dict[str, float]
    counted_at: dt.datetime
    current: bool
    failures_seen: int = 0

    @cached_property
    def taking(self) -> dict[str, dict[str, int]]:
        """Positions that take a part next, by part and site."""
        found: dict[str, dict[str, int]] = defaultdict(lambda: defaultdict(int))
        for site, _, needed, count in self.standing:
            found[needed][site] += count
        return {part: dict(sites) for part, sites in found.items()}

    def use_at_sites(self, part: str) -> dict[str, float]:
        """Expected pieces of a part at each site: the site's uses, as many of its positions as take this part."""
        whole: dict[str, int] = defaultdict(int)
        for site, _, _, count in self.standing:
            whole[site] += count
        weights = {site: self.by_site.get(site, 0.0) * n / whole[site] for site, n in self.taking.get(part, {}).items()}
        total, mean = sum(weights.values()), self.used[part].mean if part in self.used else 0.0
        return {site: mean * weight / total for site, weight in weights.items()} if total else {}

    def draws(self, *, count: int | None = None) -> dict[str, NDArray[np.int64]]:
        """Drawn weeks of every part of the component, also of those that no position takes; empty where unknown."""
        from reliability.forecasts.weekly_use import DRAWS, weekly_use

        if not self.known:
            return {}
        codes = Part.objects.filter(component__code=self.component).values_list("code", flat=True)
        idle = [code for code in codes if code not in self.used]
        return weekly_use(self.used, self.weekly, idle=idle, draws=count or DRAWS, seed=self.seed)

    def failure_draws(self, count: int) -> NDArray[np.int64]:
        """Drawn weeks of failures, (count, weeks)."""
        from reliability.forecasts.weekly_use import weekly_use

        return weekly_use({self.component: self.failures}, self.weekly, draws=count, seed=self.seed)[self.component]

    @property
    def seed(self) -> int:
        return self.begin.toordinal()


def weeks_for(component: Component) -> int:
    """Whole weeks that cover the usual lead time of its slowest part and a review period; a quarter at least."""
    leads = Part.objects.filter(component=component).exclude(state="ended").values_list("lead_time_days", flat=True)
    longest = max((UNKNOWN_LEAD_DAYS if days is None else days for days in leads), default=UNKNOWN_LEAD_DAYS)
    needed = math.ceil((longest + Book.load().review_period_days) / WEEK)
    return min(max(needed, FEWEST_WEEKS), MOST_WEEKS)


def question_for(component: Component, today: dt.date | None = None, known_on: dt.date | None = None) -> Question:
    """From tomorrow on: what is used today is taken from the shelf already."""
    day = today or timezone.localdate()
    begin = day + dt.timedelta(days=1)
    return question_of(component, begin=begin, days=weeks_for(component) * WEEK, as_of=day, known_on=known_on)


def count_use(question: Question) -> dict[str, Any]:
    """The count as plain values."""
    from reliability.forecasts.learned import learned
    from reliability.forecasts.next_quarter import running_now, tallied

    running = running_now(question)
    taught = learned(question.component, question.as_of, question.known_on)
    tally = tallied(question, running, taught)
    standing: dict[tuple[str, str, str], int] = defaultdict(int)
    for row in running.rows:
        if row.joins == 0:
            standing[row.site, row.part, row.needed] += row.count
    return {
        "begin": question.begin.isoformat(),
        "known": bool(taught.designs) or not running.rows,
        "failures_seen": taught.failures,
        "failures": chances(tally.total.failures),
        "used": {str(part): chances(counts.parts_used) for part, counts in tally.groups["needed"].items()},
        "weekly": [week.mean for week in tally.weeks],
        "standing": [[*key, count] for key, count in sorted(standing.items())],
        "by_site": {str(site): counts.parts_used.mean for site, counts in tally.groups["site"].items()},
    }


def chances(distribution: CountDistribution) -> list[float]:
    """Cut where nothing is left to speak of."""
    pmf = distribution.pmf
    last = max((place for place, chance in enumerate(pmf) if chance > LEAST_CHANCE), default=0)
    whole = float(pmf[: last + 1].sum())
    return [float(f"{chance / whole:.6g}") for chance in pmf[: last + 1]]


def keep_use(component: Component, today: dt.date | None = None) -> ComingUse:
    """Counts and keeps it for today."""
    question, version = question_for(component, today), DataVersion.current()
    text = json.dumps(count_use(question), allow_nan=False, separators=(",", ":"))
    KeptResult.objects.filter(kind=KIND, made_at__lt=timezone.now() - KEPT_FOR).delete()
    row, _ = KeptResult.objects.update_or_create(
        kind=KIND,
        key=key_of(question.asked()),
        defaults={"data_version": version, "payload": text.encode(), "made_at": timezone.now()},
    )
    return read_use(component.code, row, version)


def all_counted(components: Iterable[Component]) -> bool:
    """Whether today's use of each is kept; reads no counts."""
    keys = {key_of(question_for(each).asked()) for each in components}
    return KeptResult.objects.filter(kind=KIND, key__in=keys).count() == len(keys)


def kept_uses(components: Iterable[Component], *, count: bool) -> dict[str, ComingUse]:
    """By component; what is not kept for today is counted now, or left out."""
    listed = list(components)
    keys = {each.code: key_of(question_for(each).asked()) for each in listed}
    version = DataVersion.current()
    rows = {row.key: row for row in KeptResult.objects.filter(kind=KIND, key__in=list(keys.values()))}
    found: dict[str, ComingUse] = {}
    for each in listed:
        row = rows.get(keys[each.code])
        if row is not None:
            found[each.code] = read_use(each.code, row, version)
        elif count:
            found[each.code] = keep_use(each)
    return found


def read_use(component: str, row: KeptResult, version: int) -> ComingUse:
    told = json.loads(bytes(row.payload))
    return use_of(component, told, row.made_at, current=row.data_version == version)


def use_of(component: str, told: dict[str, Any], counted_at: dt.datetime, *, current: bool) -> ComingUse:
    """From the plain values of a count."""
    return ComingUse(
        component=component,
        begin=dt.date.fromisoformat(told["begin"]),
        known=told["known"],
        failures=distribution(told["failures"]),
        used={part: distribution(pmf) for part, pmf in told["used"].items()},
        weekly=told["weekly"],
        standing=[(site, part, needed, count) for site, part, needed, count in told["standing"]],
        by_site=told["by_site"],
        counted_at=counted_at,
        current=current,
        failures_seen=told["failures_seen"],
    )


def distribution(pmf: list[float]) -> CountDistribution:
    import numpy as np

    from reliability.stats.count_results import CountDistribution

    found = np.array(pmf)
    return CountDistribution(found / found.sum())
