"""Each rule finds its breach in a small made-up project, at the right line, and leaves sound code alone."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Iterable
from pathlib import Path

import pytest

from tests.layout import file_rules, import_rules, page_rules, record_rules, word_rules
from tests.layout.findings import Finding
from tests.layout.test_layout import RULES

Rule = Callable[[Path], Iterable[Finding]]
LONG = "row\n" * 401
UNFINISHED = "TO" + "DO"

# rule, file, its text, the line that has to be named (0: the rule must stay silent)
CASES: list[tuple[Rule, str, str, int]] = [
    (import_rules.fleet_knows_no_reliability, "fleet/a.py", "import os\nimport reliability.stats\n", 2),
    (import_rules.fleet_knows_no_reliability, "fleet/a.py", "def f():\n    from reliability import wording\n", 2),
    (import_rules.fleet_knows_no_reliability, "fleet/a.py", "from fleet import reliability_of_name\n", 0),
    (import_rules.stats_stand_alone, "reliability/stats/a.py", "from django.db import models\n", 1),
    (import_rules.stats_stand_alone, "reliability/stats/a.py", "\nfrom .. import wording\n", 2),
    (import_rules.stats_stand_alone, "reliability/stats/a.py", "import datetime\n", 1),
    (import_rules.stats_stand_alone, "reliability/stats/a.py", "from .b import fit\nimport numpy\n", 0),
    (import_rules.only_one_file_makes_life_data, "reliability/wording.py", "from fleet.models import Part\n", 1),
    (import_rules.only_one_file_makes_life_data, "reliability/lifetimes_from_fleet.py", "import fleet.models\n", 0),
    (import_rules.only_one_file_makes_life_data, "reliability/a.py", "from fleet.models.codes import natural_key\n", 0),
    (import_rules.only_one_file_makes_life_data, "reliability/views/life.py", "from fleet.models import Part\n", 0),
    (import_rules.charts_only_draw, "reliability/charts/a.py", "import plotly\nimport scipy.stats\n", 2),
    (import_rules.charts_only_draw, "reliability/charts/a.py", "from fleet.models import Part\n", 1),
    (import_rules.charts_only_draw, "reliability/charts/a.py", "from fleet.formats import number\n", 0),
    (import_rules.numbers_are_imported_late, "fleet/views/a.py", "import numpy as np\n", 1),
    (import_rules.numbers_are_imported_late, "fleet/views/a.py", "class A:\n    from scipy import stats\n", 2),
    (import_rules.numbers_are_imported_late, "reliability/stats/a.py", "import numpy\nfrom scipy import stats\n", 2),
    (import_rules.numbers_are_imported_late, "reliability/stats/a.py", "import scipy.optimize\n", 0),
    (import_rules.numbers_are_imported_late, "fleet/views/a.py", "def f():\n    import numpy\n", 0),
    (file_rules.files_are_short, "fleet/a.py", LONG, 401),
    (file_rules.files_are_short, "static/look/a.css", LONG, 401),
    (file_rules.files_are_short, "static/vendor/a.js", LONG, 0),
    (file_rules.files_are_short, "fleet/migrations/a.py", LONG, 0),
    (file_rules.folders_of_tests_are_packages, "tests/fleet/test_a.py", "", 1),
    (record_rules.bulk_writes_keep_history, "fleet/actions/a.py", "def f(rows):\n    rows.update(closed=True)\n", 2),
    (record_rules.bulk_writes_keep_history, "fleet/actions/a.py", "Part.objects.bulk_create(rows)\n", 1),
    (record_rules.bulk_writes_keep_history, "fleet/actions/a.py", "Part.objects.bulk_update(rows, ['a'])\n", 1),
    (record_rules.bulk_writes_keep_history, "fleet/actions/a.py", "seen.update({1: 2})\nsha.update(b'')\n", 0),
    (record_rules.bulk_writes_keep_history, "fleet/actions/a.py", "rows.update(n=1)  # no history: derived\n", 0),
    (record_rules.bulk_writes_keep_history, "fleet/transfer/a.py", "rows.update(closed=True)\n", 0),
    (record_rules.screens_use_the_gate, "fleet/views/a.py", "\nPart.objects.all()\n", 2),
    (record_rules.screens_use_the_gate, "reliability/forms/a.py", "Part._default_manager.all()\n", 1),
    (record_rules.screens_use_the_gate, "fleet/api/a.py", "get_object_or_404(Part, pk=1)\n", 1),
    (record_rules.screens_use_the_gate, "fleet/views/a.py", "get_object_or_404(parts_for(person), pk=1)\n", 0),
    (record_rules.screens_use_the_gate, "fleet/actions/a.py", "Part.objects.all()\n", 0),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<p>\n<b style="color: red">x</b>', 2),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<button onclick="go()">x</button>', 1),
    (page_rules.templates_obey_the_policy, "templates/a.html", "<p>\n<script>go()</script>", 2),
    (page_rules.templates_obey_the_policy, "templates/a.html", "<style>p {}</style>", 1),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<a href="javascript:go()">x</a>', 1),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<img src="//example.org/a.png">', 1),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<link rel="icon" href="https://example.org/a">', 1),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<button hx-on:click="go()">x</button>', 1),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<script src="{% static "a.js" %}" defer></script>', 0),
    (page_rules.templates_obey_the_policy, "templates/a.html", '<a href="https://example.org/">a source</a>', 0),
    (page_rules.drawings_obey_the_policy, "fleet/life_lines.py", "\nbar = '<rect style=\"fill: red\">'\n", 2),
    (page_rules.drawings_obey_the_policy, "fleet/life_lines.py", "bar = '<rect class=\"bar\">'\n", 0),
    (page_rules.pages_do_not_shout, "templates/a.html", "<p>Saved.</p>\n<p>Well done!</p>", 2),
    (page_rules.pages_do_not_shout, "templates/a.html", "<!doctype html>{% if a != b %}{{ c }}{% endif %}", 0),
    (word_rules.nothing_is_left_unfinished, "fleet/a.py", f"\n# {UNFINISHED} later\n", 2),
    (word_rules.no_path_of_one_machine, "README.md", "cd /ho" + "me/ann/halfnut\n", 1),
    (word_rules.no_path_of_one_machine, "fleet/a.py", "path = '/t" + "mp/book'\n", 1),
    (word_rules.no_path_of_one_machine, "fleet/a.py", "path = '/m/K-9'\n", 0),
    (word_rules.tests_test_something, "tests/test_a.py", "def test_a():\n    assert True\n", 2),
    (word_rules.tests_test_something, "tests/test_a.py", "import time\ntime.sleep(1)\n", 2),
    (word_rules.tests_test_something, "tests/test_a.py", "@pytest.mark.skipif(old)\ndef test_a(): ...\n", 1),
    (word_rules.tests_test_something, "tests/test_a.py", "pytest.skip('no scanner here')\n", 0),
]


def name_of_case(case: tuple[Rule, str, str, int]) -> str:
    rule, path, _, line = case
    return f"{rule.__name__}-{path}-{'finds' if line else 'silent'}"


@pytest.mark.parametrize("case", CASES, ids=name_of_case)
def test_a_made_up_project(case: tuple[Rule, str, str, int], tmp_path: Path) -> None:
    rule, path, text, line = case
    (tmp_path / "tests").mkdir()
    (tmp_path / "tests" / "__init__.py").touch()
    (tmp_path / path).parent.mkdir(parents=True, exist_ok=True)
    (tmp_path / path).write_text(text)
    found = list(rule(tmp_path))
    if not line:
        assert found == []
        return
    assert [finding.line for finding in found] == [line]
    assert str(found[0]).startswith(str(Path(path).parent.as_posix() if "__init__" in found[0].path else path))
    assert len(found[0].remedy) > 20


def test_every_rule_has_been_seen_to_fail() -> None:
    seen = {rule for rule, _, _, line in CASES if line}
    assert {rule.__name__ for rule in RULES} - {rule.__name__ for rule in seen} == {"copied_libraries_are_as_listed"}


def copied(root: Path, text: bytes, **entry: str) -> list[str]:
    folder = root / "static" / "vendor"
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "a.js").write_bytes(text)
    (folder / "manifest.json").write_text(json.dumps([{"file": "a.js", **entry}]))
    return [str(finding) for finding in file_rules.copied_libraries_are_as_listed(root)]


def test_a_copied_library_that_was_changed_is_found(tmp_path: Path) -> None:
    entry = {"name": "a", "version": "1.0", "licence": "MIT", "sha256": hashlib.sha256(b"one").hexdigest()}
    assert copied(tmp_path, b"one", **entry) == []
    assert "differs from its sha256" in copied(tmp_path, b"two", **entry)[0]
    assert "says no version" in copied(tmp_path, b"one", **(entry | {"version": ""}))[0]
    (tmp_path / "static" / "vendor" / "b.js").touch()
    assert "b.js:1: is not in" in copied(tmp_path, b"one", **entry)[0]


def test_a_copied_library_that_is_gone_is_found(tmp_path: Path) -> None:
    (tmp_path / "static" / "vendor").mkdir(parents=True)
    assert list(file_rules.copied_libraries_are_as_listed(tmp_path)) == []
    (tmp_path / "static" / "vendor" / "a.js").touch()
    assert "manifest.json:1: is missing" in str(next(iter(file_rules.copied_libraries_are_as_listed(tmp_path))))
    (tmp_path / "static" / "vendor" / "a.js").unlink()
    entry = {"file": "a.js", "name": "a", "version": "1", "licence": "MIT", "sha256": "0"}
    (tmp_path / "static" / "vendor" / "manifest.json").write_text(json.dumps([entry]))
    assert "which is not there" in str(next(iter(file_rules.copied_libraries_are_as_listed(tmp_path))))
