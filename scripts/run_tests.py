"""Everything that is checked, one part after the other, with the counts at the end.

Exit status 0: all passed. 1: something failed. 2: something is missing that a person has to install.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import signal
import subprocess
import sys
import tempfile
import time
import xml.etree.ElementTree as ElementTree
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import test_tools
import throwaway_postgresql

ROOT = Path(__file__).resolve().parent.parent
BIN = Path(sys.executable).parent
PYTHON = sys.executable
TYPED = ["config", "fleet/actions", "fleet/work", "reliability/charts", "scripts"]
STATISTICS = "reliability/stats"  # typed as well, but for these
NOT_YET_TYPED = {
    "count_groups", "count_lattice", "count_masses", "count_positions", "count_simulation", "count_thinning", "counts",
    "posterior", "posterior_likelihood", "posterior_lognormal",
}  # fmt: skip
AT_ONCE = "2"
# Not even read where only tests of the database or of the browser are wanted: reading them takes seconds.
WITHOUT_DATABASE = ("layout", "scripts", "stats")
NOTHING_TO_RUN = 5  # pytest's status when no test was chosen


@dataclass(frozen=True)
class Outcome:
    """What one part came to."""

    part: str
    passed: int
    failed: int
    skipped: int
    seconds: float

    def line(self) -> str:
        counts = f"{self.passed:5d} passed, {self.failed:3d} failed, {self.skipped:3d} skipped"
        return f"{self.part:<28} {counts}  {self.seconds:6.1f} s"


def main() -> int:
    parser = argparse.ArgumentParser(description="Check everything; the counts come last.")
    parser.add_argument("--lint", action="store_true", help="only lint, format, types, templates and layout")
    options = parser.parse_args()
    signal.signal(signal.SIGTERM, lambda number, frame: sys.exit(128 + number))
    if not options.lint:
        missing = test_tools.install_what_is_missing()
        if missing:
            print(missing, file=sys.stderr)
            return 2
    outcomes = [*lint_parts()]
    with tempfile.TemporaryDirectory(prefix="halfnut-counts-") as folder:
        reports = Path(folder)
        outcomes.append(run_pytest("layout rules", ["tests/layout"], reports))
        if not options.lint:
            try:
                outcomes += test_parts(reports)
            except throwaway_postgresql.NoServer as reason:
                print(reason, file=sys.stderr)
                outcomes.append(Outcome("PostgreSQL", 0, 1, 0, 0.0))
    return tell(outcomes)


def typed_statistics() -> list[str]:
    files = (ROOT / STATISTICS).glob("*.py")
    return sorted(str(path.relative_to(ROOT)) for path in files if path.stem not in NOT_YET_TYPED)


def lint_parts() -> Iterator[Outcome]:
    templates = [name for name in ("templates", "fleet/templates", "reliability/templates") if (ROOT / name).is_dir()]
    yield run_check("ruff: lint", [str(BIN / "ruff"), "check", "."])
    yield run_check("ruff: format", [str(BIN / "ruff"), "format", "--check", "."])
    yield run_check("djlint: templates", [str(BIN / "djlint"), *templates, "--lint", "--quiet"])
    yield run_check("mypy: types", [str(BIN / "mypy"), "--follow-imports=silent", *TYPED, *typed_statistics()])
    demo = {"HALFNUT_DEMO": "1"}
    yield run_check("Django: system check", [PYTHON, "manage.py", "check", "--fail-level", "WARNING"], demo)
    yield run_check("Django: migrations", [PYTHON, "manage.py", "makemigrations", "--check", "--dry-run"], demo)


def test_parts(reports: Path) -> Iterator[Outcome]:
    """SQLite first; PostgreSQL then takes what touches the database, and what only it can show; the browser last.

    What touches no database, all of tests/stats among it, answers the same beside either engine: once is enough.
    """
    beside = ["-n", AT_ONCE]
    some = ["tests", *(f"--ignore=tests/{name}" for name in WITHOUT_DATABASE)]
    yield run_pytest(
        "tests on SQLite",
        ["tests", "--ignore=tests/layout", "-m", "not browser and not postgres", *beside],
        reports,
    )
    with throwaway_postgresql.running() as address:
        yield run_pytest(
            "tests on PostgreSQL",
            [*some, "-m", "database and not browser", *beside],
            reports,
            {"HALFNUT_DATABASE_URL": address},
        )
    yield run_pytest("browser tests in Chromium", [*some, "-m", "browser", *beside], reports)


def run_check(part: str, command: Sequence[str], extra: dict[str, str] | None = None) -> Outcome:
    """A linter counts as one check: it passes or it fails."""
    announce(part)
    began = time.monotonic()
    good = subprocess.run(command, cwd=ROOT, env=environment(extra), stdin=subprocess.DEVNULL).returncode == 0
    return Outcome(part, int(good), int(not good), 0, time.monotonic() - began)


def run_pytest(part: str, arguments: Sequence[str], reports: Path, extra: dict[str, str] | None = None) -> Outcome:
    """Run tests and read the counts from pytest's own report."""
    announce(part)
    began = time.monotonic()
    report = reports / f"{part.replace(' ', '-')}.xml"
    command = [PYTHON, "-m", "pytest", "-q", f"--junitxml={report}", *arguments]
    status = subprocess.run(command, cwd=ROOT, env=environment(extra), stdin=subprocess.DEVNULL).returncode
    passed, failed, skipped = counts(report)
    if status not in (0, NOTHING_TO_RUN) and not failed:
        failed = 1  # it did not get as far as running a test
    if status == NOTHING_TO_RUN:
        print(f"No test was found for this part: {part}.")
        failed = 1
    return Outcome(part, passed, failed, skipped, time.monotonic() - began)


def counts(report: Path) -> tuple[int, int, int]:
    """Passed, failed and skipped of one JUnit report."""
    passed = failed = skipped = 0
    with contextlib.suppress(FileNotFoundError, ElementTree.ParseError):
        for suite in ElementTree.parse(report).getroot().iter("testsuite"):
            bad = int(suite.get("failures", 0)) + int(suite.get("errors", 0))
            passed += int(suite.get("tests", 0)) - bad - int(suite.get("skipped", 0))
            failed += bad
            skipped += int(suite.get("skipped", 0))
    return passed, failed, skipped


def environment(extra: dict[str, str] | None) -> dict[str, str]:
    """The caller's own book and settings stay out of it."""
    clean = {name: value for name, value in os.environ.items() if not name.startswith("HALFNUT_")}
    return {**clean, "PYTHONUNBUFFERED": "1", "OPENBLAS_NUM_THREADS": "1", **(extra or {})}


def announce(part: str) -> None:
    print(f"\n=== {part}", flush=True)


def tell(outcomes: Sequence[Outcome]) -> int:
    print("\n=== counts")
    for outcome in outcomes:
        print(outcome.line())
    passed = sum(outcome.passed for outcome in outcomes)
    failed = sum(outcome.failed for outcome in outcomes)
    skipped = sum(outcome.skipped for outcome in outcomes)
    print(f"\n{passed} passed, {failed} failed, {skipped} skipped", flush=True)
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
