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
from dataclasses import dataclass
from typing import Any

from django.db import connection, models
from django.db.models import Count, DurationField, ExpressionWrapper, F, Sum
from django.db.models.expressions import RawSQL
from django.db.models.functions import Coalesce
from django.utils import timezone

from fleet.models import (
    FAILURE_REASONS,
    Component,
    FailureMode,
    Fitting,
    LifeSet,
    ModuleType,
    Part,
    SetLife,
    Site,
    SiteKind,
    Visit,
)
from fleet.models.codes import natural_key
from reliability.fleet_lives import (
    NO_PLACE,
    FleetLives,
    LeftOut,
    LifeRow,
    arrays_of,
    counted_reasons,
    with_not_known_failed,
)
from reliability.life_errors import NothingNamed, NotYet
from reliability.life_rules import Reason, Rules
from reliability.life_sql import LifeQuestion, grouped_lives, left_out_fittings
from reliability.life_warnings import many_not_known, warnings_for
from reliability.lives_as_known import Known, Places, rows_as_known

CLOCKS = ("days", "hours", "strokes")
GROUPINGS = ("part", "site", "type", "lot", "quarter")
LAG_QUANTILE = 0.95
EARLIEST_ZONE = dt.timedelta(hours=14)  # where a day begins first


@dataclass(frozen=True)
class _Asked:
    """The choices of a question, with names turned into records."""

    component: Component
    clock: str
    by: str | None
    as_of: dt.date
    known_on: dt.date | None
    sites: tuple[int, ...] | None
    parts: tuple[int, ...] | None
    types: tuple[int, ...] | None
    modes: tuple[int, ...] | None
    mode_codes: tuple[str, ...]
    with_rigs: bool
    worn_is_failure: bool


def lives(
    component: Component | str,
    *,
    clock: str | None = None,
    by: str | None = None,
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
    reached the book later. `life_set` takes an imported set instead of the fleet's own records.
    """
    found = _component(component)
    asked = _Asked(
        component=found,
        clock=_one_of(clock or found.clock, CLOCKS, "clock"),
        by=None if by is None else _one_of(by, GROUPINGS, "grouping"),
        as_of=_come(as_of or timezone.localdate()),
        known_on=known_on,
        sites=_keys(Site, sites, "site"),
        parts=_keys(Part, parts, "part", component=found),
        types=_keys(ModuleType, types, "module type"),
        modes=_keys(FailureMode, modes, "failure mode", component=found),
        mode_codes=tuple(_code(mode) for mode in modes or ()),
        with_rigs=with_rigs,
        worn_is_failure=worn_is_failure,
    )
    if life_set is not None:
        return _lives_of_set(asked, life_set)
    lags = reporting_lags(asked.as_of, known_on)
    rows, left_out = _rows(asked, lags)
    return _answer(asked, rows, [*left_out, *_struck_out(asked)])


def component_codes() -> list[str]:
    return list(Component.objects.values_list("code", flat=True))


def reporting_lags(as_of: dt.date, known_on: dt.date | None = None) -> dict[int, int]:
    """For each site that reports at once: days within which 95 % of its failures were known; of its visits if none."""
    once = Site.objects.filter(reports_at_once=True).values_list("pk", flat=True)
    known = Coalesce("removed_known_on", "removed_visit__known_on", "removed_on")
    failures = (
        Fitting.objects.standing()
        .filter(reason__in=FAILURE_REASONS, removed_on__lte=as_of, clock__site__in=once)
        .annotate(place=F("clock__site_id"), known=known, happened=Coalesce("failed_on", "removed_on"))
    )
    lags = _late_by(failures, known_on)
    without = [site for site in once if site not in lags]
    if without:
        visits = (
            Visit.objects.standing()
            .filter(happened_on__lte=as_of, site__in=without)
            .annotate(place=F("site_id"), known=F("known_on"), happened=F("happened_on"))
        )
        lags.update(_late_by(visits, known_on))
    return {site: lags.get(site, 0) for site in once}


def _late_by(records: Any, known_on: dt.date | None) -> dict[int, int]:
    """For each place the quantile of the days from `happened` to `known`; the database subtracts the dates."""
    if known_on is not None:
        records = records.filter(known__lte=known_on)
    late = ExpressionWrapper(F("known") - F("happened"), output_field=DurationField())
    counts: dict[int, list[tuple[int, int]]] = defaultdict(list)
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


def _rows(asked: _Asked, lags: Mapping[int, int]) -> tuple[list[LifeRow], list[LeftOut]]:
    if asked.known_on is not None and asked.known_on < timezone.localdate():
        return _rows_as_known(asked, lags, asked.known_on)
    question = _question(asked, lags)
    with connection.cursor() as cursor:
        cursor.execute(*grouped_lives(question))
        rows = [LifeRow(*row) for row in cursor.fetchall()]
    left_out = [
        LeftOut(reason, count, Fitting.objects.filter(pk__in=RawSQL(*left_out_fittings(question, reason))))
        for reason, count in counted_reasons(rows).items()
    ]
    return rows, left_out


def _question(asked: _Asked, lags: Mapping[int, int]) -> LifeQuestion:
    year, year_parameters = connection.ops.date_extract_sql("year", "f.fitted_on", ())
    quarter, quarter_parameters = connection.ops.date_extract_sql("quarter", "f.fitted_on", ())
    return LifeQuestion(
        component=asked.component.pk,
        clock=asked.clock,
        own_clock=asked.clock == asked.component.clock,
        as_of=asked.as_of.toordinal(),
        as_of_text=asked.as_of.isoformat(),
        by=asked.by,
        sites=asked.sites,
        parts=asked.parts,
        types=asked.types,
        modes=asked.modes,
        with_rigs=asked.with_rigs,
        worn_is_failure=asked.worn_is_failure,
        lags=lags,
        quarter=f"({year}) * 10 + ({quarter})",
        quarter_parameters=(*year_parameters, *quarter_parameters),
    )


def _rows_as_known(asked: _Asked, lags: Mapping[int, int], known_on: dt.date) -> tuple[list[LifeRow], list[LeftOut]]:
    rules = Rules(
        clock=asked.clock,
        own_clock=asked.clock == asked.component.clock,
        as_of=asked.as_of.toordinal(),
        modes=asked.modes,
        with_rigs=asked.with_rigs,
        worn_is_failure=asked.worn_is_failure,
    )
    rigs = frozenset(Site.objects.filter(kind=SiteKind.RIG).values_list("pk", flat=True))
    only_sites = None if asked.sites is None else frozenset(asked.sites)
    rows, keys = rows_as_known(_known_fittings(asked), rules, Places(lags, rigs), known_on, only_sites)
    left_out = [
        LeftOut(reason, count, Fitting.objects.filter(pk__in=keys[reason]))
        for reason, count in counted_reasons(rows).items()
    ]
    return rows, left_out


def _known_fittings(asked: _Asked) -> dict[int, Known]:
    known: dict[int, Known] = {}
    columns = ("pk", "module_id", "reason", "mode_id", "age_at_fit", "part_id", "module__type_id", "lot", "fitted_on")
    for pk, module, reason, mode, age, part, module_type, lot, fitted_on in (
        _fittings(asked).standing().values_list(*columns)
    ):
        labels = {"part": part, "type": module_type, "lot": lot, "quarter": _quarter(fitted_on)}
        known[pk] = Known(module, reason, mode, age, labels.get(asked.by or ""))
    return known


def _quarter(day: dt.date | None) -> int | None:
    return None if day is None else day.year * 10 + (day.month + 2) // 3


def _fittings(asked: _Asked) -> Any:
    fittings = Fitting.objects.filter(part__component=asked.component)
    if asked.parts is not None:
        fittings = fittings.filter(part__in=asked.parts)
    if asked.types is not None:
        fittings = fittings.filter(module__type__in=asked.types)
    return fittings


def _struck_out(asked: _Asked) -> list[LeftOut]:
    struck = _fittings(asked).exclude(struck_out="")
    count = struck.count()
    return [LeftOut(Reason.STRUCK_OUT.value, count, struck)] if count else []


def _answer(asked: _Asked, rows: list[LifeRow], left_out: list[LeftOut]) -> FleetLives:
    site_codes, unanswered = _site_names()
    if asked.by == "site":
        rows = [row._replace(group=row.site) for row in rows]
    lifetimes, states = arrays_of(rows, site_codes, _group_names(asked, rows, site_codes))
    without_mode = 0
    if asked.modes is not None:
        without_mode = _fittings(asked).standing().filter(reason__in=FAILURE_REASONS, mode=None).count()
    warned = warnings_for(
        rows,
        clock=asked.clock,
        modes=asked.mode_codes,
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
        left_out=left_out,
        warnings=warned,
        modes=asked.mode_codes,
        if_not_known_failed=with_not_known_failed(lifetimes, states) if many_not_known(rows) else None,
        component_name=asked.component.title,
        groups=_in_order(lifetimes),
    )


def _in_order(lifetimes: Any) -> tuple[str, ...]:
    """The labels of the groups, K-9 before K-10."""
    if lifetimes is None:
        return ()
    return tuple(sorted((str(label) for label in lifetimes.group_labels), key=natural_key))


def _site_names() -> tuple[dict[Any, str], dict[Any, str]]:
    """Codes of all sites; names of those of which nobody said whether failures are reported at once."""
    codes: dict[Any, str] = {}
    unanswered: dict[Any, str] = {None: ""}
    for pk, code, name, at_once in Site.objects.values_list("pk", "code", "name", "reports_at_once"):
        codes[pk] = code
        if at_once is None:
            unanswered[pk] = name or code
    return codes, unanswered


def _group_names(asked: _Asked, rows: Iterable[LifeRow], site_codes: dict[Any, str]) -> dict[Any, str]:
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


def _lives_of_set(asked: _Asked, code: str) -> FleetLives:
    """An imported set: lives without histories, on the clock they were imported with."""
    (key,) = _keys(LifeSet, [code], "set") or ()
    chosen = SetLife.objects.filter(set=key, component=asked.component)
    if asked.parts is not None:
        chosen = chosen.filter(part__in=asked.parts)
    if asked.sites is not None:
        chosen = chosen.filter(site__in=Site.objects.filter(pk__in=asked.sites).values("code"))
    rows: list[LifeRow] = []
    grouping = {"part": "part_id", "site": "site"}.get(asked.by or "")
    columns = ["clock", "entry_age", "age", "last_good_age", "observed", "site", "part_id"]
    for clock, entry, age, good, observed, site, part, count in chosen.values_list(*columns).annotate(n=Sum("count")):
        reason = None
        if clock != asked.clock:
            reason = Reason.OTHER_CLOCK.value
        elif age <= entry:
            reason = Reason.NO_AGE.value
        good = None if good is None or not observed or good >= age else max(good, entry)
        label = {"part_id": part, "site": site}.get(grouping) if grouping else None
        state = "failed" if observed else "withdrawn"
        rows.append(LifeRow(reason, state, entry, age, good, site, label, count))
    sites = {row.site: row.site or NO_PLACE for row in rows}
    names: dict[Any, str] = {None: ""}
    if grouping == "part_id":
        names = dict(Part.objects.filter(component=asked.component).values_list("pk", "code"))
    elif grouping == "site":
        names = sites
    lifetimes, states = arrays_of(rows, sites, names)
    left_out = [LeftOut(reason, count) for reason, count in counted_reasons(rows).items()]
    return FleetLives(
        component=asked.component.code,
        clock=asked.clock,
        as_of=asked.as_of,
        by=asked.by,
        lifetimes=lifetimes,
        states=states,
        left_out=left_out,
        component_name=asked.component.title,
        groups=_in_order(lifetimes),
    )


def _component(component: Component | str) -> Component:
    if isinstance(component, Component):
        return component
    found = Component.objects.filter(code=component).first()
    if found is None:
        raise NothingNamed("component", component, Component.objects.values_list("code", flat=True))
    return found


def _keys(model: type[models.Model], chosen: Sequence[Any] | None, noun: str, **limits: Any) -> tuple[int, ...] | None:
    """Primary keys of records named by code or given as records; None: no restriction."""
    if chosen is None:
        return None
    known = dict(model._default_manager.filter(**limits).values_list("code", "pk"))
    codes = [_code(item) for item in chosen]
    for code in codes:
        if code not in known:
            raise NothingNamed(noun, code, known)
    return tuple(known[code] for code in codes)


def _come(day: dt.date) -> dt.date:
    if day > (timezone.now() + EARLIEST_ZONE).date():
        raise NotYet(day)
    return day


def _code(item: Any) -> str:
    return str(getattr(item, "code", item)).strip().upper()


def _one_of(value: str, choices: Sequence[str], noun: str) -> str:
    if value not in choices:
        raise NothingNamed(noun, value, choices)
    return value
