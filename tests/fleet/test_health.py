"""The address that a watcher asks, without signing in."""

from __future__ import annotations

import pytest
from django.db import OperationalError, connection
from django.test import Client


@pytest.mark.django_db
def test_it_answers_anybody(client: Client) -> None:
    answer = client.get("/health")
    assert (answer.status_code, answer.content) == (200, b"ok")
    assert "no-store" in answer["Cache-Control"]


@pytest.mark.django_db
def test_it_says_when_the_database_is_gone(client: Client, monkeypatch: pytest.MonkeyPatch) -> None:
    def gone() -> None:
        raise OperationalError("the server closed the connection")

    monkeypatch.setattr(connection, "cursor", gone)
    answer = client.get("/health")
    assert (answer.status_code, answer.content) == (503, b"the database does not answer")


def test_it_is_for_asking_only(client: Client) -> None:
    assert client.post("/health").status_code == 405
