"""How records may be written and fetched."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

from tests.layout.findings import Finding, python_files

# The one helper, the bulk path with its own history, and what is only derived and made again at will.
MAY_WRITE_IN_BULK = ("fleet/history.py", "fleet/transfer/", "fleet/actions/rebuild_clocks.py")
BULK_WRITES = {"bulk_create", "bulk_update"}
BULK_REMEDY = "leaves no history; save the record, or use the helper in fleet/history.py"
# A line may say, beside the call, why no history is lost: `# no history: derived`.
EXCUSE = "# no history:"
MANAGERS = {"objects", "_default_manager", "_base_manager"}
SHORTCUTS = {"get_object_or_404", "get_list_or_404"}
BEHIND_THE_GATE = tuple(f"{app}/{folder}" for app in ("fleet", "reliability") for folder in ("views", "forms", "api"))


def bulk_writes_keep_history(root: Path) -> Iterator[Finding]:
    for name, tree in python_files(root, "fleet"):
        if name.startswith(MAY_WRITE_IN_BULK):
            continue
        lines = (root / name).read_text(encoding="utf-8").splitlines()
        for call in calls(tree):
            if isinstance(call.func, ast.Attribute) and is_bulk_write(call.func.attr, call):
                stretch = lines[max(0, call.lineno - 2) : call.end_lineno]
                if not any(EXCUSE in line for line in stretch):
                    yield Finding(name, call.func.end_lineno or call.lineno, f".{call.func.attr}() {BULK_REMEDY}")


def is_bulk_write(method: str, call: ast.Call) -> bool:
    """`update` of a queryset takes names only; a dictionary's or a checksum's takes a value."""
    if method in BULK_WRITES:
        return True
    return method == "update" and bool(call.keywords) and not call.args


def screens_use_the_gate(root: Path) -> Iterator[Finding]:
    """Views, forms and API reach records only through the querysets that ask for the person."""
    for name, tree in python_files(root, *BEHIND_THE_GATE):
        for node in ast.walk(tree):
            if isinstance(node, ast.Attribute) and node.attr in MANAGERS:
                yield Finding(name, node.lineno, f".{node.attr} passes the rights by; fetch through the person's gate")
        for call in calls(tree):
            if called_name(call) in SHORTCUTS and names_a_model(call.args):
                remedy = f"{ast.unparse(call)} passes the rights by; give it the person's queryset"
                yield Finding(name, call.lineno, remedy)


def calls(tree: ast.AST) -> Iterator[ast.Call]:
    return (node for node in ast.walk(tree) if isinstance(node, ast.Call))


def names_a_model(arguments: list[ast.expr]) -> bool:
    return bool(arguments) and isinstance(arguments[0], ast.Name) and arguments[0].id[:1].isupper()


def called_name(call: ast.Call) -> str:
    if isinstance(call.func, ast.Name):
        return call.func.id
    return call.func.attr if isinstance(call.func, ast.Attribute) else ""


RULES = [bulk_writes_keep_history, screens_use_the_gate]
