"""Which style a part has on every screen: its rank among the parts of its component, in order of revision."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable

from fleet.models import Part
from fleet.models.codes import natural_key


def part_ranks(parts: Iterable[Part]) -> dict[int, int]:
    """By primary key. Give all parts of a component, so that a part has one rank wherever it is drawn."""
    by_component: dict[int, list[Part]] = defaultdict(list)
    for part in parts:
        by_component[part.component_id].append(part)
    ranks: dict[int, int] = {}
    for some in by_component.values():
        some.sort(key=lambda part: (natural_key(part.revision), part.code_order, part.pk))
        ranks.update({part.pk: rank for rank, part in enumerate(some)})
    return ranks
