"""What people call a position: by its component, and by its code where the type has several of a component."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable

from fleet.models import Position


def position_names(positions: Iterable[Position]) -> dict[int, str]:
    """`drive nut`, but `carriage roller ROLL-2`. The positions are those of one type, with their components."""
    several = list(positions)
    count = Counter(position.component_id for position in several)
    return {
        position.pk: position.component.title
        if count[position.component_id] == 1
        else f"{position.component.title} {position.code}"
        for position in several
    }
