"""How the bench stands and what would hold it, in the sentences a manager reads."""

from __future__ import annotations

import datetime as dt
from typing import Any

from fleet.formats import counted, number
from reliability.forecasts.backlog import SOON, Backlog
from reliability.forecasts.supply_words import day, simulated


def sentences(found: Backlog) -> list[str]:
    """The first stands above the chart, the rest below it."""
    told = [course(found), balance(found), turn_round(found), ready(found), target(found)]
    return [sentence for sentence in told if sentence]


def course(found: Backlog) -> str:
    """`23 modules are at the bench. On 2 March there will be about 31 (80 of 100 cases: 18 to 47).`"""
    now = int(found.course.modules.values[0, 0])
    verb = "is" if now == 1 else "are"
    return f"{counted(now, 'module')} {verb} at the bench. {ends(found)}"


def ends(found: Backlog) -> str:
    """`On 2 March there will be about 31 (80 of 100 cases: 18 to 47).`"""
    modules, today = found.course.modules, found.bench.today
    end = today + dt.timedelta(days=found.course.days)
    lower, upper = modules.band(0.8)
    return (
        f"On {day(end, today)} there will be about {_about(float(modules.mean[-1]))} "
        f"(80 of 100 cases: {_to(lower[-1], upper[-1])})."
    )


def balance(found: Backlog) -> str:
    """Hours that come in against hours that are there."""
    mean, low, high = found.coming_a_week
    offered = found.offered_a_week
    start = (
        f"About {number(mean, 0)} hours of work come in a week (80 of 100 cases: {_to(low, high)}) and "
        f"{number(offered, 0)} are there to do it"
    )
    if found.falls_behind > 0.95:
        return f"{start}: the bench falls behind."
    if found.falls_behind < 0.05:
        return f"{start}: the bench keeps up."
    return f"{start}: it falls behind in {_of_hundred(found.falls_behind)} cases."


def turn_round(found: Backlog) -> str:
    weeks = SOON // 7
    last = min(SOON, found.course.days)
    middle, low, high = (found.course.turn_round(p, 0, last) for p in (0.5, 0.1, 0.9))
    if not found.course.received.values[:, last].any():
        return ""
    who = f"A module received in the next {weeks} weeks"
    if low is None or middle is None:
        return f"{who} is more likely than not still unfinished after the {number(found.course.days)} days looked at."
    after = "within a day" if middle < 1 else f"after about {counted(round(middle), 'day')}"
    if high is None:
        spread = f"{counted(round(low), 'day')} to longer than the {number(found.course.days)} looked at"
    else:
        spread = f"{number(low, 0)} to {counted(round(high), 'day')}"
    return f"{who} is finished {after} (80 of 100 cases: {spread})."


def ready(found: Backlog) -> str:
    """The pool and the chance that it is empty."""
    today, pool = found.bench.today, found.course.pool
    end = today + dt.timedelta(days=found.course.days)
    count = found.bench.ready_modules
    ever = float(pool.chance_ever_at_most(0)[-1])
    lower, upper = pool.band(0.8)
    if count == 0:
        first = "No ready module is in the pool"
    else:
        first = f"The pool holds {counted(count, 'ready module')}"
    spread = f"(80 of 100 cases: {_to(lower[-1], upper[-1])})"
    told = f"{first}; on {day(end, today)} it holds about {_about(float(pool.mean[-1]))} {spread}."
    if lower[-1] < 0:
        told += " Below 0, so many places in the field wait for one."
    if count == 0:
        return told
    return f"{told} The chance that it is empty on some day until then is {simulated(ever)}."


def target(found: Backlog) -> str:
    """Hours a week that bring the backlog under its target, and how likely the planned ones do."""
    bench, needed = found.bench, found.needed
    if needed is None:
        return ""
    goal = f"{number(bench.target)} or fewer by {day(bench.target_on, bench.today)}"
    answer, sure = needed.enough(0.8), needed.enough(0.95)
    planned = f"{number(needed.planned, 0)} are planned, enough in {_of_hundred(needed.chance_as_planned)}"
    if answer.hours_a_week is None:
        return f"No number of hours is likely to bring the backlog to {goal}: jobs wait for parts, or come too late."
    told = (
        f"To bring the backlog to {goal}, about {number(answer.hours_a_week, 0)} hours a week are enough in 80 of 100 "
        f"cases"
    )
    if sure.hours_a_week is not None:
        told += f" and {number(sure.hours_a_week, 0)} in 95"
    return f"{told}; {planned}."


def change_sentence(told: dict[str, Any], found: Backlog) -> str:
    """What a change of plan does to the backlog at the end: `On 2 March 9 modules fewer (80 of 100 cases: 5 to 14)`."""
    mean, (low, high) = told["modules"]["mean"][-1], told["modules"]["bands"]["0.8"][-1]
    end = day(dt.date.fromisoformat(told["weeks"][-1]), found.bench.today)
    if low == high == 0:
        return f"On {end} it makes no difference to the backlog."
    if high <= 0:
        return f"On {end} about {_about(-mean)} modules fewer at the bench (80 of 100 cases: {_to(-high, -low)} fewer)."
    if low >= 0:
        return f"On {end} about {_about(mean)} modules more at the bench (80 of 100 cases: {_to(low, high)} more)."
    spread = f"between {number(-low, 0)} modules fewer and {number(high, 0)} more in 80 of 100 cases"
    return f"On {end} {spread}: whether it helps, we cannot tell."


def _about(value: float) -> str:
    tenths = round(value, 1)
    return number(tenths, 0 if abs(value) >= 10 or tenths.is_integer() else 1)


def _to(low: float, high: float) -> str:
    first, last = number(float(low), 0), number(float(high), 0)
    return first if first == last else f"{first} to {last}"


def _of_hundred(chance: float) -> str:
    hundred = round(chance * 100)
    if hundred == 0:
        return "fewer than 1 of 100"
    return "nearly 100 of 100" if hundred == 100 else f"{number(hundred)} of 100"
