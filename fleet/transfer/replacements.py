"""What the rows of replacements.csv say together, and the redesigns that an import changes by them."""

from __future__ import annotations

from fleet.models import Redesign, RedesignChange
from fleet.transfer.columns import FileKind
from fleet.transfer.job import Job
from fleet.transfer.staging import fetch


def check_new_parts(kind: FileKind, job: Job) -> None:
    """A new redesign has a new part at least."""
    if any(other.name == "replacements" for other in job.kinds):
        named = "id NOT IN (SELECT redesign_id FROM stage_replacements WHERE redesign_id IS NOT NULL)"
    else:
        named = "1 = 1"
    for row, code in fetch(f"SELECT row, code FROM {kind.stage} WHERE id < 0 AND bad = 0 AND {named} ORDER BY row"):
        job.say(
            kind, row, "redesign", code, "has no new part yet. Say in replacements.csv what takes the place of what."
        )


def check_once_a_component(kind: FileKind, job: Job) -> None:
    """One new part for each component of a redesign, in the files and the book together."""
    component = {part.id: part.component for part in job.known.parts.values()}
    code = {part.id: name for name, part in job.known.parts.items()}
    there: dict[tuple[int, int], int] = {}
    for redesign, part, of in RedesignChange.objects.values_list(
        "redesign_id", "new_part_id", "new_part__component_id"
    ):
        there[redesign, component.get(part, of)] = part
    staged = f"SELECT row, redesign_id, new_part_id FROM {kind.stage} WHERE bad = 0 ORDER BY row"
    for row, redesign, part in fetch(staged):
        other = there.setdefault((redesign, component[part]), part)
        if other != part:
            job.say(
                kind,
                row,
                "part",
                code[part],
                f"is of the same component as {code[other]}, which this redesign has already. "
                "Make a redesign of each, and compare them on its page.",
            )


def raise_changed(kind: FileKind) -> None:
    """A redesign of the book whose parts were changed has another version: an open form is not saved over it."""
    changed = fetch(f"SELECT DISTINCT redesign_id FROM {kind.stage} WHERE redesign_id > 0 AND (id < 0 OR differs = 1)")
    for record in Redesign.objects.filter(pk__in=[redesign for (redesign,) in changed]):
        record.version += 1
        record.save(update_fields=["version"])
