"""Answers are computed once for a version of the data."""

from __future__ import annotations

import threading
from typing import Any

import pytest
from django.db import connection

from fleet.models import DataVersion
from reliability.kept import kept, key_of
from reliability.models import KeptResult

QUESTION = {"component": "NUT", "by": "part", "as_of": "2026-12-01"}


class Counting:
    """An answer that counts how often it was made."""

    def __init__(self) -> None:
        self.times = 0

    def __call__(self) -> dict[str, Any]:
        self.times += 1
        return {"made": self.times, "median": 61.00000000000001, "upper": None}


@pytest.mark.django_db
def test_the_second_time_it_is_read() -> None:
    answer = Counting()
    assert kept("life", QUESTION, answer) == kept("life", dict(reversed(QUESTION.items())), answer)
    assert answer.times == 1
    assert kept("life", QUESTION, answer)["median"] == 61.00000000000001


@pytest.mark.django_db
def test_a_change_of_the_data_makes_it_new_and_drops_the_old() -> None:
    answer = Counting()
    kept("life", QUESTION, answer)
    kept("life", {**QUESTION, "by": "site"}, answer)
    DataVersion.raise_version()
    assert kept("life", QUESTION, answer)["made"] == 3
    assert KeptResult.objects.count() == 1


@pytest.mark.django_db
def test_another_question_or_kind_has_its_own_answer() -> None:
    answer = Counting()
    kept("life", QUESTION, answer)
    kept("life", {**QUESTION, "by": "site"}, answer)
    kept("forecast", QUESTION, answer)
    assert answer.times == 3


@pytest.mark.django_db
def test_what_changes_while_it_is_computed_is_not_overlooked() -> None:
    answer = Counting()

    def changing() -> dict[str, Any]:
        DataVersion.raise_version()
        return answer()

    kept("life", QUESTION, changing)
    kept("life", QUESTION, answer)
    assert answer.times == 2


@pytest.mark.django_db
def test_numbers_that_json_cannot_hold_are_refused() -> None:
    with pytest.raises(ValueError, match="not JSON compliant"):
        kept("life", QUESTION, lambda: float("inf"))


@pytest.mark.django_db(transaction=True)
def test_many_at_one_moment_all_get_the_answer() -> None:
    start = threading.Barrier(4)
    answers: list[Any] = []

    def ask() -> None:
        try:
            start.wait(timeout=20)
            answers.append(kept("life", QUESTION, lambda: {"median": 61}))
        finally:
            connection.close()

    threads = [threading.Thread(target=ask) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(timeout=60)
    assert answers == [{"median": 61}] * 4
    assert KeptResult.objects.filter(kind="life", key=key_of(QUESTION)).count() == 1
