"""Setting up Django and reading the URL table must not read the numerical libraries: that takes seconds."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

from tests.layout.import_rules import NUMERICAL

ROOT = Path(__file__).resolve().parent.parent.parent
LOOK = """
import sys, django
django.setup()
{more}
print(" ".join(sorted(sys.modules)))
"""


def modules_after_setup(more: str) -> set[str]:
    environment = {**os.environ, "DJANGO_SETTINGS_MODULE": "tests.settings"}
    done = subprocess.run(
        [sys.executable, "-c", LOOK.format(more=more)],
        cwd=ROOT,
        env=environment,
        capture_output=True,
        text=True,
        check=True,
    )
    return set(done.stdout.split())


def test_no_numerical_library_is_read_at_the_start() -> None:
    modules = modules_after_setup("from django.urls import get_resolver; get_resolver().url_patterns")
    assert "fleet.models" in modules
    assert modules.intersection(NUMERICAL) == set()


def test_the_test_above_would_notice() -> None:
    assert modules_after_setup("import numpy").intersection(NUMERICAL) == {"numpy"}
