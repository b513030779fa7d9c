"""What modules' clocks said on given days, and when they were last seen or read: one query for many modules."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

from django.db import connection

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Numbers = NDArray[np.int64]
    Floats = NDArray[np.float64]


def last_knot(modules: Numbers, days: Floats, which: str, *, before: bool = False) -> Floats:
    """The day of each module's last knot with the flag up to the day (or before it); NaN where there is none."""
    sign = "<" if before else "<="
    text = (
        f"(SELECT k.day FROM fleet_clockpoint k WHERE k.module_id = asked.module_id AND k.day {sign} asked.day "
        f"AND k.{which} ORDER BY k.day DESC LIMIT 1)"
    )
    return _asked(modules, days, [text])[0]


def counts_on(modules: Numbers, days: Floats, clock: str) -> Floats:
    """The count of each module's clock on the day, on a straight line between two knots; NaN where it is not known."""
    import numpy as np

    wanted = [
        f"(SELECT k.{column} FROM fleet_clockpoint k WHERE k.module_id = asked.module_id AND k.day {limit} LIMIT 1)"
        for limit in ("<= asked.day ORDER BY k.day DESC", "> asked.day ORDER BY k.day")
        for column in ("day", clock)
    ]
    first_day, first, next_day, then = _asked(modules, days, wanted)
    with np.errstate(invalid="ignore"):
        return first + (then - first) * (days - first_day) / (next_day - first_day)


def _asked(modules: Numbers, days: Floats, chosen: list[str]) -> list[Floats]:
    """Each chosen column in the order asked; NaN for empty."""
    import numpy as np

    if not modules.size:
        return [np.zeros(0)] * len(chosen)
    if connection.vendor == "postgresql":
        asked = "unnest(%s::bigint[], %s::float8[]) WITH ORDINALITY AS asked(module_id, day, place)"
        # as text: making an array of each number by itself takes as long as the query
        parameters: list[Any] = ["{" + ",".join(map(str, column.tolist())) + "}" for column in (modules, days)]
    else:
        asked = (
            "(SELECT JSON_EXTRACT(value, '$[0]') AS module_id, JSON_EXTRACT(value, '$[1]') AS day, key AS place "
            "FROM JSON_EACH(%s)) asked"
        )
        parameters = [json.dumps(list(zip(modules.tolist(), days.tolist(), strict=True)))]
    with connection.cursor() as cursor:
        cursor.execute(f"SELECT {', '.join(chosen)} FROM {asked} ORDER BY asked.place", parameters)
        rows = cursor.fetchall()
    return [np.array(column, dtype=np.float64) for column in zip(*rows, strict=True)]
