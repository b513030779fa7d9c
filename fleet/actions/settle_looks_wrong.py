"""A planner or manager answers a doubt: the record was corrected, or it is right as it stands."""

from __future__ import annotations

from django.utils import timezone

from fleet.actions.base import change, sees
from fleet.actions.catalogue import opened
from fleet.actions.checks_values import clean_text
from fleet.actions.errors import AlreadyDone, BadValue, NotAllowed, day_words
from fleet.actions.writes import save_again
from fleet.models import LooksWrong, Person
from fleet.rights import CORRECT

OUTCOMES = ("corrected", "confirmed")


def settle_looks_wrong(*, by: Person, doubt: LooksWrong, outcome: str, answer: str = "") -> LooksWrong:
    if outcome not in OUTCOMES:
        raise BadValue("Say whether the record was corrected or confirmed.", field="outcome")
    answer = clean_text(answer, field="answer", longest=500, words="The answer")
    with change(by=by, right=CORRECT, raises_version=False):
        if not sees(by, doubt):
            raise NotAllowed("This record belongs to a site that is none of yours. Ask a manager of your book.")
        doubt = opened(LooksWrong, doubt)
        if doubt.outcome and doubt.settled_at is not None:
            raise AlreadyDone(
                f"This was settled on {day_words(doubt.settled_at.date())}: {doubt.outcome}. Look at the record again."
            )
        doubt.outcome, doubt.answer = outcome, answer
        doubt.settled_by, doubt.settled_at = by, timezone.now()
        save_again(doubt)
    return doubt
