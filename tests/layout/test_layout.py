"""The project keeps its own rules."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from pathlib import Path

import pytest

from tests.layout import file_rules, import_rules, page_rules, record_rules, word_rules
from tests.layout.findings import Finding

ROOT = Path(__file__).resolve().parent.parent.parent
RULES = [
    *import_rules.RULES,
    *file_rules.RULES,
    *record_rules.RULES,
    *page_rules.RULES,
    *word_rules.RULES,
]


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: rule.__name__)
def test_the_rule_holds(rule: Callable[[Path], Iterable[Finding]]) -> None:
    findings = sorted(rule(ROOT))
    assert not findings, "\n" + "\n".join(str(finding) for finding in findings)
