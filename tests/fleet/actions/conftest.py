"""The cast: a weir with one carriage, its crew Rosa, the planner Ines, the contact; and Tom, crew elsewhere."""

from __future__ import annotations

import pytest

from fleet.models import Person
from tests.factories import Carriage, make_crew, make_planner, make_site


@pytest.fixture
def weir() -> Carriage:
    return Carriage()


@pytest.fixture
def rosa(weir: Carriage) -> Person:
    return weir.crew


@pytest.fixture
def ines() -> Person:
    return make_planner(name="Ines")


@pytest.fixture
def tom() -> Person:
    """He should have no access."""
    return make_crew(make_site())
