"""An exclusion constraint that PostgreSQL enforces and other engines leave to the actions."""

from __future__ import annotations

from typing import Any

from django.db.models import BaseConstraint


class NoOverlap(BaseConstraint):
    """No two standing rows of the same owner may overlap in [start, end); zero-length stays are fine."""

    def __init__(self, name: str, *, same: list[str], start: str, end: str) -> None:
        super().__init__(name=name)
        self.same, self.start, self.end = same, start, end

    def deconstruct(self) -> tuple[str, tuple[Any, ...], dict[str, Any]]:
        return (
            f"{self.__class__.__module__}.{self.__class__.__name__}",
            (self.name,),
            {"same": self.same, "start": self.start, "end": self.end},
        )

    def _definition(self, model: Any, quote: Any) -> str:
        columns = {name: quote(model._meta.get_field(name).column) for name in [*self.same, self.start, self.end]}
        same = ", ".join(f"{columns[name]} WITH =" for name in self.same)
        stay = f"daterange({columns[self.start]}, {columns[self.end]}, '[)') WITH &&"
        return f"EXCLUDE USING gist ({same}, {stay}) WHERE ({quote('struck_out')} = '')"

    def constraint_sql(self, model: Any, schema_editor: Any) -> str | None:
        if schema_editor.connection.vendor != "postgresql":
            return None
        quote = schema_editor.quote_name
        return f"CONSTRAINT {quote(self.name)} {self._definition(model, quote)}"

    def create_sql(self, model: Any, schema_editor: Any) -> str | None:
        if schema_editor.connection.vendor != "postgresql":
            return None
        quote = schema_editor.quote_name
        return (
            f"ALTER TABLE {quote(model._meta.db_table)} ADD CONSTRAINT {quote(self.name)} "
            f"{self._definition(model, quote)}"
        )

    def remove_sql(self, model: Any, schema_editor: Any) -> str | None:
        if schema_editor.connection.vendor != "postgresql":
            return None
        quote = schema_editor.quote_name
        return f"ALTER TABLE {quote(model._meta.db_table)} DROP CONSTRAINT IF EXISTS {quote(self.name)}"

    def validate(self, model: Any, instance: Any, exclude: Any = None, using: str = "default") -> None:
        """The actions check overlaps under the module's lock, with words a crew understands."""

    def __eq__(self, other: object) -> bool:
        return isinstance(other, NoOverlap) and self.deconstruct() == other.deconstruct()

    __hash__ = object.__hash__
