"""Sizes and places of files, and the libraries that are copied into the project."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterator
from pathlib import Path

from tests.layout.findings import Finding, files, name_of

LONGEST = 400
MANIFEST = "static/vendor/manifest.json"
MANIFEST_WORDS = ("name", "version", "licence", "sha256")


def files_are_short(root: Path) -> Iterator[Finding]:
    for path in files(root, "*.py", "*.css", "*.js", "*.html", "*.sh"):
        lines = path.read_text(encoding="utf-8").count("\n")
        if lines > LONGEST:
            remedy = f"has {lines} lines; split it by noun or verb into files of at most {LONGEST}"
            yield Finding(name_of(root, path), LONGEST + 1, remedy)


def folders_of_tests_are_packages(root: Path) -> Iterator[Finding]:
    """Without `__init__.py` two test files of one name hide each other."""
    for folder in sorted({path.parent for path in files(root, "*.py", under=("tests",))}):
        while folder != root:
            if not (folder / "__init__.py").exists():
                yield Finding(name_of(root, folder / "__init__.py"), 1, "is missing; add it, empty")
            folder = folder.parent


def copied_libraries_are_as_listed(root: Path) -> Iterator[Finding]:
    """Every file under static/vendor/ is in the manifest with its true checksum, and the other way round."""
    manifest = root / MANIFEST
    folder = manifest.parent
    present = {name_of(folder, path) for path in folder.rglob("*") if path.is_file() and path != manifest}
    if not manifest.exists():
        if present:
            yield Finding(MANIFEST, 1, "is missing; list every copied file with " + ", ".join(MANIFEST_WORDS))
        return
    listed = listed_files(json.loads(manifest.read_text(encoding="utf-8")))
    for name, entry in sorted(listed.items()):
        for word in MANIFEST_WORDS:
            if not entry.get(word):
                yield Finding(MANIFEST, 1, f"says no {word} for {name}; add it")
        if name not in present:
            yield Finding(MANIFEST, 1, f"lists {name}, which is not there; take it out or copy the file in")
        elif entry.get("sha256") != hashlib.sha256((folder / name).read_bytes()).hexdigest():
            yield Finding(f"static/vendor/{name}", 1, "differs from its sha256 in the manifest; copy it again")
    for name in sorted(present - set(listed)):
        if Path(name).stem.upper() not in {"LICENSE", "LICENCE", "OFL"}:
            yield Finding(f"static/vendor/{name}", 1, f"is not in {MANIFEST}; add it with its version and licence")


def listed_files(manifest: list[dict[str, str]]) -> dict[str, dict[str, str]]:
    """The manifest is a list with one entry a file; `file` is the path below static/vendor/."""
    return {entry["file"]: entry for entry in manifest}


RULES = [files_are_short, folders_of_tests_are_packages, copied_libraries_are_as_listed]
