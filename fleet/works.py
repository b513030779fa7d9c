"""The kinds of background work of the records; a worker looks for this module by its name."""

from fleet.transfer import works

__all__ = ["works"]
