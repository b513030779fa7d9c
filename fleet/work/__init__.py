from fleet.work.enqueue import GivenFile, enqueue
from fleet.work.errors import Cancelled, PutBack, Superseded, WorkFailed
from fleet.work.kinds import work_kind
from fleet.work.progress import Progress
from fleet.work.run import run_here

__all__ = [
    "Cancelled",
    "GivenFile",
    "Progress",
    "PutBack",
    "Superseded",
    "WorkFailed",
    "enqueue",
    "run_here",
    "work_kind",
]
