from fleet.models.bench import BenchCapacity, BenchHours, BenchJob, Outcome, Stage
from fleet.models.book import Book, DataVersion
from fleet.models.clocks import ClockPoint, FittingClock
from fleet.models.component import Clock, Component, FailureMode
from fleet.models.entry_key import EntryKey
from fleet.models.fitting import FAILURE_REASONS, Fitting, FoundBy, RemovalReason
from fleet.models.life_set import LifeSet, SetLife
from fleet.models.looks_wrong import LooksWrong, RecordKind
from fleet.models.module import Module, ModuleState, Placement
from fleet.models.module_type import ModuleType, Position
from fleet.models.part import Part, PartState
from fleet.models.person import Person, Role
from fleet.models.reading import Reading, Restart
from fleet.models.redesign import Redesign, RedesignChange, RolloutStep
from fleet.models.site import Site, SiteKind
from fleet.models.stock_move import Condition, MoveKind, StockBalance, StockMove
from fleet.models.stop import Stop
from fleet.models.store import Store
from fleet.models.supply import SupplyLine, SupplyOrder
from fleet.models.visit import Finding, FoundKind, Left, Visit
from fleet.models.work import KeptFile, Work, WorkState

__all__ = [
    "FAILURE_REASONS",
    "BenchCapacity",
    "BenchHours",
    "BenchJob",
    "Book",
    "Clock",
    "ClockPoint",
    "Component",
    "Condition",
    "DataVersion",
    "EntryKey",
    "FailureMode",
    "Finding",
    "Fitting",
    "FittingClock",
    "FoundBy",
    "FoundKind",
    "KeptFile",
    "Left",
    "LifeSet",
    "LooksWrong",
    "Module",
    "ModuleState",
    "ModuleType",
    "MoveKind",
    "Outcome",
    "Part",
    "PartState",
    "Person",
    "Placement",
    "Position",
    "Reading",
    "RecordKind",
    "Redesign",
    "RedesignChange",
    "RemovalReason",
    "Restart",
    "Role",
    "RolloutStep",
    "SetLife",
    "Site",
    "SiteKind",
    "Stage",
    "StockBalance",
    "StockMove",
    "Stop",
    "Store",
    "SupplyLine",
    "SupplyOrder",
    "Visit",
    "Work",
    "WorkState",
]
