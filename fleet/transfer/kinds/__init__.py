from fleet.transfer.kinds.bench import BENCH, CAPACITY, HOURS
from fleet.transfer.kinds.components import COMPONENTS, MODES
from fleet.transfer.kinds.findings import FINDINGS
from fleet.transfer.kinds.fittings import FITTINGS
from fleet.transfer.kinds.lives import LIVES
from fleet.transfer.kinds.modules import MODULES, PLACEMENTS
from fleet.transfer.kinds.moves import MOVES
from fleet.transfer.kinds.parts import PARTS
from fleet.transfer.kinds.people import PEOPLE
from fleet.transfer.kinds.readings import READINGS
from fleet.transfer.kinds.redesigns import REDESIGNS, REPLACEMENTS, ROLLOUT
from fleet.transfer.kinds.sites import SITES
from fleet.transfer.kinds.stops import STOPS
from fleet.transfer.kinds.stores import STORES
from fleet.transfer.kinds.supply import SUPPLY
from fleet.transfer.kinds.types import POSITIONS, TYPES
from fleet.transfer.kinds.visits import VISITS

# In the order in which they refer to each other.
ALL_KINDS = [
    SITES, PEOPLE, COMPONENTS, MODES, TYPES, POSITIONS, PARTS, REDESIGNS, REPLACEMENTS, STORES, SUPPLY,
    CAPACITY, MODULES, ROLLOUT, PLACEMENTS, BENCH, HOURS, VISITS, FITTINGS, FINDINGS, STOPS, READINGS, MOVES, LIVES,
]  # fmt: skip
BY_NAME = {kind.name: kind for kind in ALL_KINDS}

__all__ = ["ALL_KINDS", "BY_NAME", "FITTINGS", "LIVES", "PLACEMENTS", "VISITS"]
