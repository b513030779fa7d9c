"""Two plain rivals of the forecast, as people reckon without it: from the same records, known by the same day."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import datetime as dt

    from reliability.forecasts.what_happened import Happened
    from reliability.running_parts import RunningParts
    from reliability.stats.count_results import CountDistribution

NAMES = {"constant_rate": "constant rate", "last_quarter": "same as last quarter"}


def constant_rate(events: float, exposure: float, running: RunningParts, days: int) -> CountDistribution | None:
    """Events so far for each unit of the clock, times what the running parts will be used, with a Poisson band.

    The usual reckoning: it knows no wear, no age of the fleet and not how little is known. None without any exposure.
    """
    from reliability.stats.hits import poisson_count

    if exposure <= 0:
        return None
    use = sum(row.a_day * row.count for row in running.rows) * days
    return poisson_count(events / exposure * use)


def same_as_last_quarter(events: int, before: Happened, first_record: dt.date | None) -> CountDistribution | None:
    """The count of as many days before, as known then, with a Poisson band; None where records began within them."""
    from reliability.stats.hits import poisson_count

    if first_record is None or first_record > before.begin:
        return None
    return poisson_count(float(events))
