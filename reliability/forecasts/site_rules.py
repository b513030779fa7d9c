"""By which rule of planned replacement a site goes that has not come so far as to show one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from fleet.formats import number
from reliability.forecasts.learned import Learned
from reliability.forecasts.question import Question
from reliability.forecasts.removals import OUTLIVED, Rule
from reliability.running_parts import RunningRow


def with_rules_of_others(rows: Sequence[RunningRow], clock: str, learned: Learned) -> Learned:
    """The same, with the others' rule for sites where no part was let grow older than that."""
    rule = learned.elsewhere
    if rule is None:
        return learned
    return replace(learned, rules=_rules(rows, clock, learned, rule))


def by_others(rows: Sequence[RunningRow], question: Question, learned: Learned) -> list[str]:
    """Names the sites that are counted by the others' rule, among those asked for."""
    rule = learned.elsewhere
    if rule is None or question.what_if.replace_at is not None:
        return []
    sites = sorted(set(_rules(rows, question.component.clock, learned, rule)) - set(learned.rules))
    if not sites:
        return []
    have, they = ("has", "it counts") if len(sites) == 1 else ("have", "they count")
    return [
        f"{', '.join(sites)} {have} shown no planned replacement yet, nor a part that outlived one: {they} with the "
        f"rule of the other sites, at about {number(rule.age, 0)} {rule.clock}."
    ]


def _rules(rows: Sequence[RunningRow], clock: str, learned: Learned, rule: Rule) -> dict[str, Rule]:
    old = set(learned.lived_on)
    for row in rows:
        if row.age > OUTLIVED * rule.age * (1.0 if rule.clock == clock else row.a_day):
            old.add(row.site)
    return dict.fromkeys({row.site for row in rows} - old, rule) | learned.rules
