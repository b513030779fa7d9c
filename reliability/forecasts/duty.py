"""What the clocks of the past teach of the use to come: its season, and how far it strays from what was expected."""

from __future__ import annotations

import datetime as dt
import math
from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

from django.db.models import Q
from django.utils import timezone

from fleet.models import ClockPoint, Placement, SiteKind
from reliability.lives_as_known import modules_as_known

QUARTER, QUARTERS, LOOK_BACK = 91, 8, 90
YEAR, MOST_YEARS, STEP, STEPS = 364, 2, 28, 13  # whole weeks
MOST_MODULES, FEWEST_MODULES = 300, 3
# duty that strays without any season would pass for one in about 1 of 75 fleets
PLAIN_SEASON, FEWEST_PAIRS = 0.1, 3
SEASON_GAIN, GAIN_OF_FEW = 0.45, 0.35


@dataclass(frozen=True)
class Duty:
    """Spread of log(use / expected use) over a quarter, common and a site's own; and the season.

    season: log of the use in the first 28, 56, ... days after this day of the year over that of the ninety days before,
    the mean of earlier years; empty where they do not agree.
    """

    common: float
    own: float
    season: list[float]

    @property
    def spread(self) -> float | tuple[float, float]:
        """As `forecast_counts` takes it."""
        return (self.common, self.own) if self.common or self.own else 0.0

    def factor(self, days: float) -> float:
        """Use a day in the coming days over that of the past ninety."""
        if not self.season:
            return 1.0
        place = min(days / STEP, float(len(self.season))) - 1.0
        left = min(max(int(place), 0), len(self.season) - 1)
        right = min(left + 1, len(self.season) - 1)
        share = min(max(place - left, 0.0), 1.0)
        return math.exp(self.season[left] * (1.0 - share) + self.season[right] * share)


def duty(clock: str, as_of: dt.date, known_on: dt.date | None = None) -> Duty:
    """Expected is what the forecast expects: the use a day of the ninety days before, times the season's factor.

    The season counts where the same quarters of two years tell each quarter's use from the ninety days before better
    than no season does. Days in service do not stray.
    """
    from reliability.stats.duty_spread import learned_duty_spread

    if clock == "days":
        return Duty(0.0, 0.0, [])
    uses = _Uses(clock, as_of, known_on)
    found = {number: uses.over(-QUARTER * number, QUARTER) for number in range(1, QUARTERS + 1)}
    season = _season(uses, _logs(found))
    rows = _rows(found, season=bool(season))
    columns = zip(*rows, strict=True) if rows else ([], [], [], [])
    spread = learned_duty_spread(*columns)
    return Duty(spread.common, spread.own, season)


Totals = dict[str, tuple[float, float]]  # use, and expected use, by site


def _logs(found: dict[int, Totals]) -> dict[int, float]:
    """log(use / expected use) of all sites together, by quarter."""
    logs = {}
    for number, sites in found.items():
        if sites:
            logs[number] = math.log(sum(use for use, _ in sites.values()) / sum(hoped for _, hoped in sites.values()))
    return logs


def _season(uses: _Uses, logs: dict[int, float]) -> list[float]:
    """The curve of earlier years, where a year ago tells more than nothing."""
    pairs = [(log, logs[number + 4]) for number, log in logs.items() if number + 4 in logs]
    if len(pairs) < FEWEST_PAIRS:
        return []
    plain = math.sqrt(sum(log**2 for log, _ in pairs) / len(pairs))
    with_season = math.sqrt(sum((log - earlier) ** 2 for log, earlier in pairs) / len(pairs))
    gain = GAIN_OF_FEW if len(pairs) == FEWEST_PAIRS else SEASON_GAIN
    if plain < PLAIN_SEASON or with_season > gain * plain:
        return []
    curve = []
    for step in range(1, STEPS + 1):
        years = [_logs({0: uses.over(-YEAR * year, STEP * step)}).get(0) for year in range(1, MOST_YEARS + 1)]
        known = [log for log in years if log is not None]
        if not known:
            break
        curve.append(sum(known) / len(known))
    return curve


def _rows(found: dict[int, Totals], *, season: bool) -> list[tuple[float, float, int, str]]:
    """(use, expected use, quarter, site); with a season the quarter a year before tells what was expected."""
    logs = _logs(found)
    rows = []
    for number, sites in found.items():
        if season and number + 4 not in logs:
            continue
        factor = math.exp(logs[number + 4]) if season else 1.0
        rows += [(use, hoped * factor, number, site) for site, (use, hoped) in sorted(sites.items())]
    return rows


class _Uses:
    """Counts of a sample of modules, spread over the fleet, with the days on which they were read."""

    def __init__(self, clock: str, as_of: dt.date, known_on: dt.date | None) -> None:
        import numpy as np

        self.today = as_of.toordinal()
        self.sites = dict(
            Placement.objects.standing()
            .filter(Q(to_on=None) | Q(to_on__gt=as_of), from_on__lte=as_of, site__kind=SiteKind.FIELD)
            .order_by("module_id")
            .values_list("module_id", "site__code")
        )
        modules = list(self.sites)[:: max(1, -(-len(self.sites) // MOST_MODULES))]
        since = self.today - max(QUARTER * QUARTERS, YEAR * MOST_YEARS) - LOOK_BACK - 30
        knots: dict[int, list[tuple[float, float, bool]]] = defaultdict(list)
        for module, day, value, read in _points(clock, modules, since, self.today, known_on):
            if value is not None:
                knots[module].append((day, value, read))
        self.knots = {
            module: (
                np.array([day for day, _, _ in seen]),
                np.array([value for _, value, _ in seen]),
                np.array([day for day, _, read in seen if read]),
            )
            for module, seen in knots.items()
        }

    def over(self, begin: float, days: float) -> Totals:
        """Use of the days after `begin` (from today, below 0) and what the ninety before promised, by site."""
        import numpy as np

        at = self.today + begin
        edges = (at - LOOK_BACK, at, at + days)
        totals: dict[str, list[float]] = defaultdict(lambda: [0.0, 0.0])
        modules = 0
        for module, (day, value, read) in self.knots.items():
            # readings must hold the stretch on both sides: in between the clock is a straight line
            if read.size < 2 or read[0] > edges[0] + 14 or read[-1] < edges[2] - 14 or not _read_in(read, edges):
                continue
            before, now, after = np.interp(edges, day, value)
            if now > before and after > now:
                modules += 1
                total = totals[self.sites[module]]
                total[0] += after - now
                total[1] += (now - before) * days / LOOK_BACK
        return {site: (use, hoped) for site, (use, hoped) in totals.items()} if modules >= FEWEST_MODULES else {}


def _points(
    clock: str, modules: list[int], since: float, until: float, known_on: dt.date | None
) -> Iterator[tuple[int, float, float | None, bool]]:
    """Module, day, count and whether it was read, in order; of the past as the clocks were by then."""
    if known_on is None or known_on >= timezone.localdate():
        points = ClockPoint.objects.filter(module__in=modules, day__gte=since, day__lte=until)
        columns = ("module_id", "day", clock, f"{clock}_read")
        yield from points.order_by("module_id", "day").values_list(*columns)
        return
    for loaded, clocks in modules_as_known(modules, known_on):
        for knot in clocks.knots:
            if since <= knot.day <= until:
                yield loaded.record.module, knot.day, getattr(knot, clock), getattr(knot, f"{clock}_read")


def _read_in(read: Any, edges: Sequence[float]) -> bool:
    return all(((read > low - 1) & (read <= high + 1)).any() for low, high in pairwise(edges))
