"""Words that have no place in the project, and tests that test nothing."""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

from tests.layout.findings import Finding, files, name_of, python_files
from tests.layout.record_rules import called_name, calls

TEXTS = ("*.py", "*.html", "*.css", "*.js", "*.md", "*.toml", "*.in", "*.txt", "*.csv", "*.sh", "Makefile")
# Put together here, so that this file does not hold what it looks for.
UNFINISHED = re.compile(r"\b(?:" + "|".join(["TO" + "DO", "FIX" + "ME", "X" + "XX", "HA" + "CK"]) + r")\b")
HOMES = ["root", "home", "opt", "wor" + "k/main", "wor" + "k/shared"]
THIS_MACHINE = re.compile(r"(?<![\w.<])/(?:" + "|".join(HOMES) + r")/[\w.]")
TEMPORARY = re.compile(r"(?<![\w.])/t" + r"mp/[\w.]")
SOUND_SKIPS = {"skip", "skipif", "xfail"}


def nothing_is_left_unfinished(root: Path) -> Iterator[Finding]:
    yield from lines_with(root, UNFINISHED, "finish it now, or describe the limit in plain words")


def no_path_of_one_machine(root: Path) -> Iterator[Finding]:
    yield from lines_with(root, THIS_MACHINE, "a path of one machine; use a path inside the project or a setting")
    yield from lines_with(root, TEMPORARY, "a fixed temporary path; use tempfile or pytest's tmp_path")


def lines_with(root: Path, pattern: re.Pattern[str], remedy: str) -> Iterator[Finding]:
    for path in files(root, *TEXTS):
        for number, line in enumerate(path.read_text(encoding="utf-8").splitlines(), start=1):
            match = pattern.search(line)
            if match:
                yield Finding(name_of(root, path), number, f"“{match.group()}”: {remedy}")


def tests_test_something(root: Path) -> Iterator[Finding]:
    for name, tree in python_files(root, "tests"):
        for node in ast.walk(tree):
            if isinstance(node, ast.Assert) and isinstance(node.test, ast.Constant):
                yield Finding(name, node.lineno, "asserts a constant, which proves nothing; assert what the code gives")
        for call in calls(tree):
            if called_name(call) == "sleep":
                yield Finding(name, call.lineno, "sleeps; wait for the event itself, or move the clock by time-machine")
            if called_name(call) in SOUND_SKIPS and not gives_reason(call):
                yield Finding(name, call.lineno, "is skipped without a word; give the reason, it is printed")


def gives_reason(call: ast.Call) -> bool:
    positional = bool(call.args) and called_name(call) == "skip"
    return positional or any(keyword.arg == "reason" for keyword in call.keywords)


RULES = [nothing_is_left_unfinished, no_path_of_one_machine, tests_test_something]
