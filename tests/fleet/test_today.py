"""What waits for a decision, told once. Cast: Cleo is crew at the weir; one carriage stands still without a nut."""

from __future__ import annotations

import pytest
from django.test import Client

from tests.factories import Carriage
from tests.fleet.log_page import at, send

pytestmark = pytest.mark.django_db


def test_what_a_module_lacks_is_told_in_words_where_its_stop_is_told_and_else_by_itself() -> None:
    weir = Carriage(code="KM-1")
    weir.nuts.name = "drive nut"
    weir.nuts.save()
    weir.fit(weir.n1, "2026-01-10")
    cleo = Client()
    cleo.force_login(weir.crew)
    send(cleo, weir.module, at(weir.nut, outcome="failed", mode=weir.worn), finish="no spare", strokes="100")
    today = cleo.get("/")
    page = today.content.decode()
    assert today.context["empty_positions"] == []
    assert "no drive nut" in page
    assert "Waiting for a part" not in page
    assert "It runs again" in cleo.get("/m/KM-1").content.decode()
    send(cleo, weir.module, all_well="on", left="running", strokes="200")
    page = cleo.get("/").content.decode()
    assert "Waiting for a part" in page
    assert "has no drive nut" in page
