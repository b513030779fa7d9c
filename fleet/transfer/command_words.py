"""What the import command prints."""

from __future__ import annotations

from typing import Any

from fleet.formats import counted, number


def report_table(result: dict[str, Any], *, preview: bool) -> str:
    """One line a file."""
    head = ("file", "rows", "would be added" if preview else "added", "passed over", "updated")
    lines = [head]
    for each in result["files"]:
        added = number(each["added"]) + (f" and {number(each['made'])} made" if each.get("made") else "")
        lines.append((each["file"], number(each["rows"]), added, number(each["passed_over"]), number(each["updated"])))
    widths = [max(len(line[column]) for line in lines) for column in range(len(head))]
    return "\n".join(
        "  ".join(cell.ljust(width) if place == 0 else cell.rjust(width) for place, (cell, width) in enumerate(pairs))
        for pairs in (list(zip(line, widths, strict=True)) for line in lines)
    )


def error_lines(result: dict[str, Any]) -> list[str]:
    """Each error on a line, then how many there are in all."""
    lines = []
    for each in result["errors"]:
        place = ", ".join(
            part for part in (each["file"], f"row {each['row']}" if each["row"] else "", each["column"]) if part
        )
        value = f" “{each['value']}”" if each["value"] else ""
        lines.append(f"{place}{value}: {each['message']}")
    left_out = result["error_count"] - len(result["errors"])
    more = f" (the first {len(result['errors'])} are listed)" if left_out else ""
    return [*lines, f"{counted(result['error_count'], 'error')}{more}. Nothing was stored."]
