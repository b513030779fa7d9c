"""What a crew hands in with a visit: a counter, changes of parts, findings."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass

from fleet.models import FailureMode, Fitting, Part, Position


@dataclass(frozen=True)
class CounterEntry:
    """The face of a counter or meter; a new serial or `restarts` begins a new segment."""

    strokes: int | None = None
    hours: float | None = None
    counter: str = ""
    restarts: str = ""


@dataclass(frozen=True)
class PartChange:
    """What came out of a position and why, and what went in; no part: the position is left empty."""

    position: Position
    reason: str = ""  # empty only where nothing was fitted
    mode: FailureMode | None = None
    found_by: str = ""
    failed_on: dt.date | None = None
    last_good_on: dt.date | None = None
    part: Part | None = None
    serial: str = ""
    lot: str = ""
    age_at_fit: float = 0
    caused_by: Fitting | None = None
    caused_by_position: Position | None = None  # the cause among the changes of this same visit
    note: str = ""
    holds: int | None = None  # the fitting that its reader saw in the position, 0 for none; None: not said


@dataclass(frozen=True)
class FindingEntry:
    """What was seen or done at a position without changing the part."""

    position: Position
    finding: str
    mode: FailureMode | None = None
    note: str = ""
