"""Running parts and what was learned, as the arrays that a count takes: one line for any number of like positions."""

from __future__ import annotations

import datetime as dt
import math
from collections import defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Any, NamedTuple

from reliability.forecasts.learned import Learned
from reliability.forecasts.question import Question
from reliability.forecasts.site_rules import with_rules_of_others
from reliability.forecasts.what_if import UnusableWhatIf
from reliability.running_parts import RunningRow

SHORTEST_DAYS = 7.0  # between two planned replacements
AGE_CELLS = 60  # ages are told apart to this share of the typical life
MOST_PACES = 120  # of all sites together
PACE_STEP = 0.25  # paces are told apart to this share
AGE_DRAWS = 40
CEILING_CELLS = 15  # the most that ages can be are told apart to this share of the typical life
NEVER = math.inf


class Place(NamedTuple):
    """Positions alike in everything but age; times in days from the start of the count, pace in use a day."""

    site: str
    type: str
    part: str
    needed: str
    pace: float
    rule: float  # age at planned replacement; in days in service where it goes by the pace
    rule_per_pace: float  # use a day in service over the pace, for such a rule
    every: float  # days between visits, 0 where failures are found at once
    next: float
    down: float
    joins: float
    leaves: float
    upgrading: bool  # whether parts here are being changed for a newer design, whatever is assumed
    oldest: float = 0.0  # above the age: that is the least it can be, this the most, and each draw of the lives decides


@dataclass(frozen=True, eq=False)
class Positions:
    """Columns (n,) in the unit of the component's clock; weights may be fractions where an age is spread."""

    ages: Any
    horizons: Any
    weights: Any
    places: list[Place]

    def column(self, name: str) -> list[Any]:
        return [getattr(place, name) for place in self.places]

    def clock(self, name: str) -> Any:
        """A time of the places on the clock."""
        import numpy as np

        return np.array([getattr(place, name) * place.pace for place in self.places])

    def __len__(self) -> int:
        return len(self.places)


def positions_of(rows: Iterable[RunningRow], question: Question, learned: Learned) -> Positions:
    """Rows of about equal age and pace as one: the cost grows with the number of distinct ages."""
    import numpy as np

    rows = list(rows)
    learned = with_rules_of_others(rows, question.component.clock, learned)
    entries = [
        (place, age, weight)
        for row in rows
        for place, age, weight in _spread(row, question, learned)
        if place.pace > 0 and place.leaves > 0
    ]
    found: dict[Place, list[tuple[float, float]]] = defaultdict(list)
    for (place, age, weight), pace in zip(entries, _shared_paces(entries), strict=True):
        rule = place.rule * pace * place.rule_per_pace if place.rule_per_pace else place.rule
        found[place._replace(pace=pace, rule=rule, rule_per_pace=0.0)].append((age, weight))
    ages, weights, places = [], [], []
    for place, members in sorted(found.items()):
        cell = max(learned.design(place.part).typical / AGE_CELLS, 1e-9)
        cells: dict[int, list[float]] = defaultdict(lambda: [0.0, 0.0])
        for age, weight in members:
            total = cells[round(age / cell)]
            total[0] += weight
            total[1] += weight * age
        for _, (weight, aged_sum) in sorted(cells.items()):
            ages.append(aged_sum / weight)
            weights.append(weight)
            places.append(place)
    _refuse_too_often(question, [place.pace for place in places])
    horizons = np.array([place.pace * question.span for place in places])
    return Positions(np.array(ages), horizons, np.array(weights), places)


def _refuse_too_often(question: Question, paces: list[float]) -> None:
    """Parts changed more than once a week: nobody plans it, and counting each change takes minutes."""
    asked = question.what_if.replace_at
    usual = sorted(paces)[len(paces) // 2] if paces else 0.0
    if asked is None or asked >= SHORTEST_DAYS * usual:
        return
    least = 10.0 ** math.ceil(math.log10(SHORTEST_DAYS * usual))
    raise UnusableWhatIf(
        "replace_at",
        f"{asked:g} {question.component.clock} pass in less than a week of usual use. Give an age of {least:g} or so, "
        "or more.",
    )


def _shared_paces(entries: list[tuple[Place, float, float]]) -> list[float]:
    """Paces of a site that differ little are replaced by their mean, so that no use is lost or gained.

    Where sites and paces are very many, each site's modules are split by pace into as many equal shares as there is
    room for, two at least.
    """
    steps = [round(math.log(place.pace) / PACE_STEP) for place, _, _ in entries]
    keys = [(place.site, step) for (place, _, _), step in zip(entries, steps, strict=True)]
    if len(set(keys)) > MOST_PACES:
        by_site: dict[str, list[int]] = defaultdict(list)
        for number, (place, _, _) in enumerate(entries):
            by_site[place.site].append(number)
        shares = max(2, MOST_PACES // len(by_site))
        for site, numbers in by_site.items():
            numbers.sort(key=lambda number: entries[number][0].pace)
            for rank, number in enumerate(numbers):
                keys[number] = (site, rank * shares // len(numbers))
    sums: dict[tuple[str, int], list[float]] = defaultdict(lambda: [0.0, 0.0])
    for key, (place, _, weight) in zip(keys, entries, strict=True):
        sums[key][0] += weight
        sums[key][1] += weight * place.pace
    return [sums[key][1] / sums[key][0] for key in keys]


def _spread(row: RunningRow, question: Question, learned: Learned) -> Iterator[tuple[Place, float, float]]:
    """A row as one or more: a module that stands still may go several ways, and so may an age under a rule that is
    known only at least.
    """
    days = question.component.clock == "days"
    use = 1.0 if days else question.what_if.duty * learned.duty.factor(question.span)
    pace = row.a_day * learned.standing.share(row.site) * use
    shift = question.shift
    # ages in days speak of the end of the as-of day, on the other clocks of its morning; the count of the morning on
    # which it starts
    aged_since = shift - (1.0 if days else 0.0)
    rule, by_days = _rule(row, question, learned)
    place = Place(
        site=row.site,
        type=row.type,
        part=row.part,
        needed=question.superseded_from_start or row.needed,
        pace=pace,
        rule=rule,
        rule_per_pace=row.a_day / pace if by_days and pace > 0 else 0.0,
        every=0.0,
        next=0.0,
        down=0.0,
        joins=max(row.joins - shift, 0.0) if row.joins > 0 else 0.0,
        leaves=row.leaves - shift,
        upgrading=row.part != row.needed,
    )
    place = _visited(place, row, question, learned)
    ages = [(row.age, 1.0)]
    if row.least and place.rule < NEVER:
        ages = _ages_below(row, place.rule * (pace * place.rule_per_pace or 1.0), learned)
    elif row.least and row.most > row.age:
        place = place._replace(oldest=_ceiling(row, 0.0 if row.joins > 0 else aged_since * pace, learned))
    for age, share in ages:
        aged = age if row.joins > 0 else max(age + aged_since * pace, 0.0)
        left = learned.standing.days_left(row.stopped) - shift if row.stopped >= 0 else 0.0
        if left <= 0:
            yield place, aged, row.count * share
            continue
        # it may be this part that failed: then a new one goes in; else this one waits as it is
        left = round(left, 1)
        yield place._replace(down=left, oldest=0.0), age, row.count * share * learned.stop_share
        yield place._replace(joins=left), age, row.count * share * (1.0 - learned.stop_share)


def _ceiling(row: RunningRow, aged: float, learned: Learned) -> float:
    """The most a part of unknown age can be, to a share of the typical life; never below the least."""
    if row.most == NEVER:
        return NEVER
    cell = max(learned.design(row.part).typical / CEILING_CELLS, 1e-9)
    return max(row.age + max(round((row.most - row.age) / cell), 1) * cell + aged, 0.0)


def _ages_below(row: RunningRow, rule: float, learned: Learned) -> list[tuple[float, float]]:
    """Ages and their shares for a part of unknown age where parts are replaced at an age."""
    import numpy as np

    from reliability.stats.count_compound import ages_at_least

    longest = min(row.most or NEVER, rule)
    if longest <= row.age:
        return [(row.age, 1.0)]
    drawn = learned.design(row.part).life.draws(AGE_DRAWS, np.random.default_rng(0))
    ages, weights = ages_at_least(drawn, row.age, longest=longest)
    return list(zip(ages.tolist(), weights.tolist(), strict=True))


def _rule(row: RunningRow, question: Question, learned: Learned) -> tuple[float, bool]:
    """The age at planned replacement: assumed for all, else what the site's records show; and whether in days."""
    if question.what_if.replace_at is not None:
        return question.what_if.replace_at, False
    rule = learned.rules.get(row.site)
    if rule is None:
        return NEVER, False
    return rule.age, rule.clock != question.component.clock


def _visited(place: Place, row: RunningRow, question: Question, learned: Learned) -> Place:
    """Visits, where failures wait for one: the day entered for the site, else an interval after the module's last."""
    visits = learned.visits.get(row.site)
    if visits is None:
        return place
    every = visits.every
    if visits.next_on is not None:
        upcoming = float((dt.date.fromisoformat(visits.next_on) - question.start).days)
    elif row.seen >= 0:
        # one that is overdue may come any day
        upcoming = max(every - row.seen - question.shift, 1.0)
    else:
        upcoming = math.ceil(every / 2)
    while upcoming <= 0:
        upcoming += every
    # at noon, so that a visit on a Monday belongs to the week it begins
    return place._replace(every=max(every, upcoming + 0.5), next=upcoming + 0.5)
