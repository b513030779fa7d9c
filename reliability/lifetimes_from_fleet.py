"""From fleet rows to life data: the only file that does so. The rules are written out in `life_sql.py`.

A site that reports every failure at once counts up to the as-of day minus its reporting lag; anywhere else a running
part counts up to the last time its module was seen. A site of which nobody said which it is counts as the latter: a
failure nobody reported yet must not be taken for a part in good order. Records struck out count as never made, also
in what was known on an earlier day.
"""

from __future__ import annotations

import datetime as dt
import math
from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from types import MappingProxyType
from typing import Any

from django.db import connection
from django.db.models import Count, DurationField, ExpressionWrapper, F
from django.db.models.expressions import RawSQL
from django.db.models.functions import Coalesce
from django.utils import timezone

from fleet.models import FAILURE_REASONS, Component, FailureMode, Fitting, ModuleType, Part, Site, SiteKind, Visit
from reliability.fleet_lives import (
    NO_PLACE,
    FleetLives,
    LeftOut,
    LifeRow,
    arrays_of,
    counted_reasons,
    in_order,
    with_not_known_failed,
)
from reliability.life_question import Asked, asked_of, life_question, titles_of_modes
from reliability.life_rules import Reason, Rules
from reliability.life_sql import grouped_lives, left_out_fittings
from reliability.life_warnings import many_not_known, warnings_for
from reliability.lives_as_known import Known, Places, rows_as_known
from reliability.lives_of_set import lives_of_set

LAG_QUANTILE = 0.95


def lives(
    component: Component | str,
    *,
    clock: str | None = None,
    by: str | None = None,
    also: str | None = None,
    sites: Sequence[Any] | None = None,
    parts: Sequence[Any] | None = None,
    types: Sequence[Any] | None = None,
    modes: Sequence[Any] | None = None,
    as_of: dt.date | None = None,
    known_on: dt.date | None = None,
    with_rigs: bool = False,
    worn_is_failure: bool = True,
    life_set: str | None = None,
) -> FleetLives:
    """The lives of a component's parts; names are codes or records.

    Modes other than the chosen ones count as removals in good order. `known_on` in the past leaves out whatever
    reached the book later. `life_set` takes an imported set instead of the fleet's own records. `also` labels each
    row a second time, by mode (of failures), module or lot.
    """
    asked = asked_of(
        component,
        clock=clock,
        by=by,
        also=also,
        sites=sites,
        parts=parts,
        types=types,
        modes=modes,
        as_of=as_of,
        known_on=known_on,
        with_rigs=with_rigs,
        worn_is_failure=worn_is_failure,
    )
    if life_set is not None:
        return lives_of_set(asked, life_set)
    lags = reporting_lags(asked.as_of, known_on)
    rows, left_out = _rows(asked, lags)
    return _answer(asked, rows, [*left_out, *_struck_out(asked)])


def component_codes() -> list[str]:
    return list(Component.objects.values_list("code", flat=True))


def reporting_lags(
    as_of: dt.date,
    known_on: dt.date | None = None,
    *,
    counted: Mapping[int, Mapping[int, int]] | None = None,
    without_parts: Sequence[int] = (),
) -> dict[int, int]:
    """For each site that reports at once: days within which 95 % of its failures were known; of its visits if none.

    counted: by site how many failures became known how many days late, of parts that somebody has read already
    (`without_parts`): a million need not be read twice.
    """
    once = Site.objects.filter(reports_at_once=True).values_list("pk", flat=True)
    known = Coalesce("removed_known_on", "removed_visit__known_on", "removed_on")
    failures = (
        Fitting.objects.standing()
        .filter(reason__in=FAILURE_REASONS, removed_on__lte=as_of, clock__site__in=once)
        .exclude(part__in=without_parts)
        .annotate(place=F("clock__site_id"), known=known, happened=Coalesce("failed_on", "removed_on"))
    )
    lags = _late_by(failures, known_on, counted or {})
    without = [site for site in once if site not in lags]
    if without:
        visits = (
            Visit.objects.standing()
            .filter(happened_on__lte=as_of, site__in=without)
            .annotate(place=F("site_id"), known=F("known_on"), happened=F("happened_on"))
        )
        lags.update(_late_by(visits, known_on))
    return {site: lags.get(site, 0) for site in once}


def _late_by(
    records: Any, known_on: dt.date | None, counted: Mapping[int, Mapping[int, int]] = MappingProxyType({})
) -> dict[int, int]:
    """For each place the quantile of the days from `happened` to `known`; the database subtracts the dates."""
    if known_on is not None:
        records = records.filter(known__lte=known_on)
    late = ExpressionWrapper(F("known") - F("happened"), output_field=DurationField())
    counts = defaultdict(list, {place: list(late.items()) for place, late in counted.items()})
    for place, lag, count in records.annotate(late=late).values_list("place", "late").annotate(n=Count("pk")):
        counts[place].append((max(0, lag.days), count))
    return {place: _quantile(pairs, LAG_QUANTILE) for place, pairs in counts.items()}


def _quantile(pairs: list[tuple[int, int]], share: float) -> int:
    """The smallest value that at least this share does not exceed."""
    needed = math.ceil(share * sum(count for _, count in pairs) - 1e-9)
    reached = 0
    for value, count in sorted(pairs):
        reached += count
        if reached >= needed:
            return value
    return 0


def _rows(asked: Asked, lags: Mapping[int, int]) -> tuple[list[LifeRow], list[LeftOut]]:
    if asked.known_on is not None and asked.known_on < timezone.localdate():
        return _rows_as_known(asked, lags, asked.known_on)
    question = life_question(asked, dict(lags))
    with connection.cursor() as cursor:
        cursor.execute(*grouped_lives(question))
        rows = [LifeRow(*row) for row in cursor.fetchall()]
    left_out = [
        LeftOut(reason, count, Fitting.objects.filter(pk__in=RawSQL(*left_out_fittings(question, reason))))
        for reason, count in counted_reasons(rows).items()
    ]
    return rows, left_out


def _rows_as_known(asked: Asked, lags: Mapping[int, int], known_on: dt.date) -> tuple[list[LifeRow], list[LeftOut]]:
    rules = Rules(
        clock=asked.clock,
        own_clock=asked.clock == asked.component.clock,
        as_of=asked.as_of.toordinal(),
        modes=asked.modes,
        with_rigs=asked.with_rigs,
        worn_is_failure=asked.worn_is_failure,
        also=asked.also,
    )
    rigs = frozenset(Site.objects.filter(kind=SiteKind.RIG).values_list("pk", flat=True))
    only_sites = None if asked.sites is None else frozenset(asked.sites)
    rows, keys = rows_as_known(_known_fittings(asked), rules, Places(lags, rigs), known_on, only_sites)
    left_out = [
        LeftOut(reason, count, Fitting.objects.filter(pk__in=keys[reason]))
        for reason, count in counted_reasons(rows).items()
    ]
    return rows, left_out


def _known_fittings(asked: Asked) -> dict[int, Known]:
    known: dict[int, Known] = {}
    columns = ("pk", "module_id", "reason", "mode_id", "age_at_fit", "part_id", "module__type_id", "lot", "fitted_on")
    for pk, module, reason, mode, age, part, module_type, lot, fitted_on in (
        _fittings(asked).standing().values_list(*columns)
    ):
        labels = {"part": part, "type": module_type, "lot": lot, "quarter": _quarter(fitted_on)}
        also = {"mode": mode, "module": module, "lot": lot}.get(asked.also or "")
        known[pk] = Known(module, reason, mode, age, labels.get(asked.by or ""), also)
    return known


def _quarter(day: dt.date | None) -> int | None:
    return None if day is None else day.year * 10 + (day.month + 2) // 3


def _fittings(asked: Asked) -> Any:
    fittings = Fitting.objects.filter(part__component=asked.component)
    if asked.parts is not None:
        fittings = fittings.filter(part__in=asked.parts)
    if asked.types is not None:
        fittings = fittings.filter(module__type__in=asked.types)
    return fittings


def _struck_out(asked: Asked) -> list[LeftOut]:
    struck = _fittings(asked).exclude(struck_out="")
    count = struck.count()
    return [LeftOut(Reason.STRUCK_OUT.value, count, struck)] if count else []


def _answer(asked: Asked, rows: list[LifeRow], left_out: list[LeftOut]) -> FleetLives:
    site_codes, unanswered = _site_names()
    if asked.by == "site":
        rows = [row._replace(group=row.site) for row in rows]
    lifetimes, states, also = arrays_of(
        rows, site_codes, _group_names(asked, rows, site_codes), _also_names(asked, rows)
    )
    without_mode = 0
    if asked.modes is not None:
        without_mode = _fittings(asked).standing().filter(reason__in=FAILURE_REASONS, mode=None).count()
    titles = titles_of_modes(asked.component) if asked.mode_codes else {}
    mode_names = {code: titles[code] for code in asked.mode_codes}
    warned = warnings_for(
        rows,
        clock=asked.clock,
        modes=[mode_names[code] for code in asked.mode_codes],
        unanswered=unanswered,
        failures_without_mode=without_mode,
        same_clock=asked.clock == asked.component.clock,
    )
    return FleetLives(
        component=asked.component.code,
        clock=asked.clock,
        as_of=asked.as_of,
        by=asked.by,
        lifetimes=lifetimes,
        states=states,
        also=also,
        left_out=left_out,
        warnings=warned,
        modes=asked.mode_codes,
        mode_names=mode_names,
        not_measured=sum(row.not_measured for row in rows if row.left_out is None),
        if_not_known_failed=with_not_known_failed(lifetimes, states) if many_not_known(rows) else None,
        component_name=asked.component.title,
        groups=in_order(lifetimes),
    )


def _site_names() -> tuple[dict[Any, str], dict[Any, str]]:
    """Codes of all sites; names of those of which nobody said whether failures are reported at once."""
    codes: dict[Any, str] = {}
    unanswered: dict[Any, str] = {None: ""}
    for pk, code, name, at_once in Site.objects.values_list("pk", "code", "name", "reports_at_once"):
        codes[pk] = code
        if at_once is None:
            unanswered[pk] = name or code
    return codes, unanswered


def _group_names(asked: Asked, rows: Iterable[LifeRow], site_codes: dict[Any, str]) -> dict[Any, str]:
    used = {row.group for row in rows}
    if asked.by == "part":
        return dict(Part.objects.filter(component=asked.component).values_list("pk", "code"))
    if asked.by == "site":
        return {**site_codes, None: NO_PLACE}
    if asked.by == "type":
        return dict(ModuleType.objects.values_list("pk", "code"))
    if asked.by == "lot":
        return {lot: lot or "no lot" for lot in used}
    if asked.by == "quarter":
        return {quarter: f"{int(quarter) // 10}-Q{int(quarter) % 10}" for quarter in used if quarter}
    return dict.fromkeys(used, "")


def _also_names(asked: Asked, rows: Iterable[LifeRow]) -> dict[Any, str]:
    """The second labels; without one the database's own number stands for itself."""
    if asked.also == "mode":
        named = {mode.pk: mode.code for mode in FailureMode.objects.filter(component=asked.component)}
        return {**named, None: ""}
    return {row.also: "" if row.also is None else str(row.also) for row in rows}
