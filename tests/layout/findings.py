"""What a layout rule reports, and the files that the rules look at."""

from __future__ import annotations

import ast
import os
from collections.abc import Iterator
from dataclasses import dataclass
from fnmatch import fnmatch
from pathlib import Path

PYTHON_FOLDERS = ("config", "fleet", "reliability", "scripts", "tests")
PASSED_OVER = {".git", ".venv", "__pycache__", "data", "migrations", "node_modules", "staticfiles", "vendor"}


@dataclass(frozen=True, order=True)
class Finding:
    """One breach of a rule: where it is, and what to do about it."""

    path: str
    line: int
    remedy: str

    def __str__(self) -> str:
        return f"{self.path}:{self.line}: {self.remedy}"


def files(root: Path, *patterns: str, under: tuple[str, ...] = ("",)) -> Iterator[Path]:
    """Files of the project by pattern, without what others wrote or a machine made."""
    for start in under:
        for folder, subfolders, names in os.walk(root / start):
            subfolders[:] = sorted(name for name in subfolders if name not in PASSED_OVER)
            for name in sorted(names):
                if any(fnmatch(name, pattern) for pattern in patterns):
                    yield Path(folder, name)


def python_files(root: Path, *folders: str) -> Iterator[tuple[str, ast.Module]]:
    """Python files below the folders (all of the project's if none is named), read as syntax trees."""
    for path in files(root, "*.py", under=folders or PYTHON_FOLDERS):
        yield name_of(root, path), ast.parse(path.read_text(encoding="utf-8"), filename=str(path))


def name_of(root: Path, path: Path) -> str:
    return path.relative_to(root).as_posix()


def line_of(text: str, position: int) -> int:
    return text.count("\n", 0, position) + 1


def imported_modules(tree: ast.AST, package: str = "") -> Iterator[tuple[str, int]]:
    """Full names of everything imported anywhere in the tree, relative imports resolved against `package`."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, node.lineno
        elif isinstance(node, ast.ImportFrom):
            module = node.module or ""
            if node.level:
                above = package.split(".")[: len(package.split(".")) - node.level + 1]
                module = ".".join([*above, module] if module else above)
            for alias in node.names:
                yield f"{module}.{alias.name}", node.lineno


def package_of(name: str) -> str:
    """The dotted package in which the file `fleet/models/site.py` stands: `fleet.models`."""
    return ".".join(Path(name).parent.parts)


def belongs_to(module: str, *packages: str) -> bool:
    return any(module == package or module.startswith(package + ".") for package in packages)


def imports_when_read(tree: ast.Module) -> Iterator[tuple[str, int]]:
    """Imports that run when the file is imported: those outside functions and outside `if TYPE_CHECKING`."""
    waiting: list[ast.AST] = list(tree.body)
    while waiting:
        node = waiting.pop()
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda):
            continue
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test):
            waiting.extend(node.orelse)
            continue
        if isinstance(node, ast.Import | ast.ImportFrom):
            yield from imported_modules(ast.Module(body=[node], type_ignores=[]))
        else:
            waiting.extend(ast.iter_child_nodes(node))
