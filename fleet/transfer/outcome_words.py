"""What came of a preview, an import or an export, in one sentence."""

from __future__ import annotations

from typing import Any

from fleet.formats import counted

REMEDY = "Nothing was stored: put them right in the files, then choose them again."


def changes(result: dict[str, Any]) -> int:
    return sum(each["added"] + each["updated"] for each in result.get("files", []))


def outcome_sentence(kind: str, result: dict[str, Any], *, done: bool = True) -> str:
    """Empty where there is nothing to say yet."""
    if result.get("error_count"):
        return f"{counted(result['error_count'], 'error')}. {REMEDY}"
    if not done or not result:
        return ""
    files = result.get("files", [])
    if kind == "export_records":
        return f"{counted(sum(each['rows'] for each in files), 'row')} in {counted(len(files), 'file')}."
    added, updated = (sum(each[key] for each in files) for key in ("added", "updated"))
    made = sum(each.get("made", 0) for each in files)
    if not added and not updated:
        return "Everything in these files is in the book already."
    verb = "would be " if kind == "preview_records" else "were "
    parts = [f"{counted(added, 'record')} {verb}added"]
    if made:
        parts.append(f"{counted(made, 'visit')} {verb}made for the changes of parts")
    if updated:
        parts.append(f"{counted(updated, 'record')} {verb}changed")
    return ", ".join(parts) + "."
