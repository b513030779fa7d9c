"""How a records file is described: its columns, what each is stored as, and how its rows are told apart."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any

from django.db import models

from fleet.transfer.cells import Parse

if TYPE_CHECKING:
    from fleet.transfer.known import Known
    from fleet.transfer.row import Row


@dataclass(frozen=True)
class Column:
    """One column of a file. `to` is the staged column that it fills; `refers` names the kind of record it points to."""

    name: str
    to: str
    parse: Parse
    required: bool = False
    empty: Any = None  # what an empty cell, or a missing column, is stored as
    refers: str = ""
    fixed: str = ""  # why an update may not change it once the record is used; empty: it may

    @property
    def compared_as(self) -> str:
        """The staged column that holds what the cell means: `mode_code` is looked up and becomes `mode_id`."""
        return f"{self.to.removesuffix('_code')}_id" if self.to.endswith("_code") else self.to


@dataclass(frozen=True)
class FileKind:
    """One sort of file."""

    name: str
    model: type[models.Model]
    columns: tuple[Column, ...]
    key: tuple[str, ...]  # staged columns by which a row is the same record
    finish: Callable[[Row, Known], None]
    key_columns: tuple[str, ...] = ()  # the columns that messages about a repeated key name
    derived: tuple[str, ...] = ()  # staged columns that `finish` fills
    extra: dict[str, str] = field(default_factory=dict)  # staged columns that are not stored, with their SQL type
    noun: str = ""

    @property
    def file(self) -> str:
        return f"{self.name}.csv"

    @property
    def stage(self) -> str:
        return f"stage_{self.name}"

    @property
    def table(self) -> str:
        return self.model._meta.db_table

    @cached_property
    def staged(self) -> list[str]:
        """Staged columns in their order: those of the model first."""
        attributes = {each.attname for each in self.model._meta.concrete_fields}
        names = dict.fromkeys([column.to for column in self.columns] + list(self.derived))
        return [name for name in names if name in attributes] + list(self.extra)

    @cached_property
    def stored(self) -> list[str]:
        return [name for name in self.staged if name not in self.extra]

    @cached_property
    def days_and_money(self) -> list[int]:
        """Places among the staged columns whose values the engines take as text."""
        sorts = ("DateField", "DecimalField")
        return [at for at, name in enumerate(self.stored) if self.field_of(name).get_internal_type() in sorts]

    def column_of(self, staged: str) -> str:
        """The file's column behind a staged one."""
        return next((column.name for column in self.columns if column.compared_as == staged), staged)

    def field_of(self, staged: str) -> models.Field:
        return next(each for each in self.model._meta.concrete_fields if each.attname == staged)
