"""The counts at the end of `make test` are pytest's own, and a part that ran nothing is a failure."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent.parent
REPORT = '<testsuites><testsuite errors="1" failures="2" skipped="3" tests="10"></testsuite></testsuites>'
PRELUDE = "import sys; sys.path.insert(0, 'scripts'); import run_tests; from pathlib import Path; "


def told(code: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-c", PRELUDE + code, *arguments], cwd=ROOT, capture_output=True, text=True, timeout=60
    )


def test_the_counts_are_read_from_the_report(tmp_path: Path) -> None:
    (tmp_path / "report.xml").write_text(REPORT)
    done = told("print(run_tests.counts(Path(sys.argv[1])))", str(tmp_path / "report.xml"))
    assert done.stdout.strip() == "(4, 3, 3)"


def test_the_last_line_is_the_sum_and_a_failure_shows_in_the_status() -> None:
    parts = "[run_tests.Outcome('one', 5, 0, 1, 2.0), run_tests.Outcome('two', 7, {failed}, 0, 1.0)]"
    good = told(f"sys.exit(run_tests.tell({parts.format(failed=0)}))")
    assert good.stdout.splitlines()[-1] == "12 passed, 0 failed, 1 skipped"
    assert good.returncode == 0
    bad = told(f"sys.exit(run_tests.tell({parts.format(failed=2)}))")
    assert bad.stdout.splitlines()[-1] == "12 passed, 2 failed, 1 skipped"
    assert bad.returncode == 1


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("def test_a(): pass\n", "1 0 0"),
        ("def test_a(): assert []\n", "0 1 0"),
        ("import no_such_module\n", "0 1 0"),
        ("", "0 1 0"),
    ],
)
def test_what_one_part_came_to(tmp_path: Path, text: str, expected: str) -> None:
    (tmp_path / "test_made_up.py").write_text(text)
    code = (
        "outcome = run_tests.run_pytest('a part', ['-c', '/dev/null', '-p', 'no:django', '-p', 'no:cacheprovider', "
        "sys.argv[1]], Path(sys.argv[1])); print(outcome.passed, outcome.failed, outcome.skipped)"
    )
    assert told(code, str(tmp_path)).stdout.splitlines()[-1] == expected
