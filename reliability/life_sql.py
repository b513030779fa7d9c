"""The rules for one life, as SQL: one row a fitting, grouped by the database before it becomes an array.

Plain arithmetic on ordinal day numbers, the same text on both engines. `life_rules.py` says the same in Python; a test
holds the two together.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

from reliability.life_rules import CLOSE, Reason

Query = tuple[str, list[Any]]


@dataclass(frozen=True)
class LifeQuestion:
    """What is asked of the records, in the database's own numbers; None means no restriction."""

    component: int
    clock: str
    own_clock: bool  # the clock asked for is the component's own, on which `age_at_fit` is counted
    as_of: int
    as_of_text: str
    by: str | None = None
    also: str | None = None  # a second label beside the group: mode, module or lot
    sites: tuple[int, ...] | None = None
    parts: tuple[int, ...] | None = None
    types: tuple[int, ...] | None = None
    modes: tuple[int, ...] | None = None
    with_rigs: bool = False
    worn_is_failure: bool = True
    lags: Mapping[int, int] = field(default_factory=dict)  # site -> days until its failures are known
    starts: Mapping[int, int] = field(default_factory=dict)  # site -> day from which lives there are observed at all
    quarter: str = "NULL"  # the quarter of f.fitted_on as year * 10 + quarter, in the engine's SQL
    quarter_parameters: tuple[Any, ...] = ()


GROUP_COLUMNS = {
    None: "CAST(NULL AS integer)",
    "part": "f.part_id",
    "site": "CAST(NULL AS integer)",
    "type": "m.type_id",
    "lot": "f.lot",
}
ALSO_COLUMNS = {None: "CAST(NULL AS integer)", "mode": "f.mode_id", "module": "f.module_id", "lot": "f.lot"}
SINGLE_COLUMNS = (
    *("id", "module_id", "position_id", "left_out", "state", "entry", "duration", "last_good"),
    *("site_id", "label", "measured", "fitted_day", "last_day"),
)


def grouped_lives(question: LifeQuestion) -> Query:
    """Rows (left_out, state, entry, duration, last_good, site, group, count, count not measured, also)."""
    text, parameters = _lives(question)
    return (
        f"{text} SELECT left_out, state, entry, duration, last_good, site_id, label, COUNT(*), "
        "SUM(CASE WHEN measured THEN 0 ELSE 1 END), also FROM told GROUP BY 1, 2, 3, 4, 5, 6, 7, 10",
        parameters,
    )


def single_lives(question: LifeQuestion) -> Query:
    """A row a fitting in the order of its position; the columns are those of `SINGLE_COLUMNS`."""
    text, parameters = _lives(question)
    return (
        f"{text} SELECT {', '.join(SINGLE_COLUMNS)} FROM told ORDER BY module_id, position_id, fitted_day, id",
        parameters,
    )


def lives_of_positions(question: LifeQuestion) -> Query:
    """A row a fitting: what the rules on columns (redesigns/life_columns.py) are held against."""
    text, parameters = _lives(question)
    return (
        f"{text} SELECT module_id, position_id, label, also, left_out, state, entry, duration, last_good, site_id, "
        "fitted_day, last_day FROM told",
        parameters,
    )


def left_out_fittings(question: LifeQuestion, reason: str) -> Query:
    """The fittings left out for one reason."""
    text, parameters = _lives(question)
    return f"{text} SELECT id FROM told WHERE left_out = %s", [*parameters, reason]


def _lives(question: LifeQuestion) -> Query:
    base, parameters = _base(question)
    begun = _begun(question) if question.starts else []
    if begun:
        base = base.replace("base AS", "every AS", 1)
    steps = [base, *begun, _placed(question), _judged(), *_cuts(question), _ages(question), _told(question)]
    return "WITH " + ",\n".join([_lags(question), *steps]), parameters


def _lags(question: LifeQuestion) -> str:
    pairs = ", ".join(f"({int(site)}, {int(lag)})" for site, lag in question.lags.items()) or "(-1, 0)"
    return f"lags(site_id, lag) AS (VALUES {pairs})"


def _in(column: str, keys: Iterable[int] | None) -> str:
    if keys is None:
        return ""
    return f" AND {column} IN ({', '.join(str(int(key)) for key in keys) or '-1'})"


def _base(question: LifeQuestion) -> Query:
    clock = question.clock
    label = question.quarter if question.by == "quarter" else GROUP_COLUMNS[question.by]
    measured = "TRUE" if clock == "days" else f"c.{clock}_measured"
    filters = _in("f.part_id", question.parts) + _in("m.type_id", question.types)
    text = f"""base AS MATERIALIZED (
        SELECT f.id, f.module_id, f.position_id, f.reason, f.mode_id, f.age_at_fit, f.removed_on, {label} AS label,
            {ALSO_COLUMNS[question.also]} AS also,
            c.fitted_day, c.end_day, c.records_day, c.last_good_entered, {measured} AS measured,
            c.{clock}_at_fit AS at_fit, c.{clock}_at_records AS at_records,
            c.{clock}_at_good AS at_good, c.{clock}_at_end AS at_end,
            CASE WHEN c.end_day IS NULL OR c.end_day > {question.as_of} THEN (
                SELECT stay.site_id FROM fleet_placement stay JOIN fleet_site place ON place.id = stay.site_id
                WHERE stay.module_id = f.module_id AND stay.struck_out = '' AND stay.from_on <= %s
                ORDER BY CASE WHEN place.kind = 'depot' THEN 1 ELSE 0 END, stay.from_on DESC, stay.id DESC LIMIT 1)
                ELSE c.site_id END AS site_id
        FROM fleet_part p
        JOIN fleet_fitting f ON f.part_id = p.id
        JOIN fleet_fittingclock c ON c.fitting_id = f.id
        JOIN fleet_module m ON m.id = f.module_id
        WHERE p.component_id = {question.component} AND f.struck_out = ''
            AND (c.fitted_day IS NULL OR c.fitted_day <= {question.as_of}){filters})"""
    first = question.quarter_parameters if question.by == "quarter" else ()
    return text, [*first, question.as_of_text]


def _begun(question: LifeQuestion) -> list[str]:
    """At sites with a start, observation begins there: a part that was already in enters at its age on that day."""
    clock = question.clock
    pairs = ", ".join(f"({int(site)}, {int(day)})" for site, day in question.starts.items())
    before = _last_knot("begun", "<= begun.day", column="id")
    after = (
        "(SELECT k.id FROM fleet_clockpoint k WHERE k.module_id = begun.module_id "
        "AND k.day > begun.day ORDER BY k.day LIMIT 1)"
    )
    later = "at_begun.day > COALESCE(every.records_day, at_begun.day - 1)"
    kept = (
        "id, module_id, position_id, reason, mode_id, age_at_fit, removed_on, label, also, fitted_day, end_day, "
        "last_good_entered, measured, at_fit, at_good, at_end, site_id"
    )
    return [
        f"starts(site_id, day) AS (VALUES {pairs})",
        "begun AS MATERIALIZED (SELECT DISTINCT every.module_id, starts.day FROM every "
        "JOIN starts ON starts.site_id = every.site_id WHERE every.fitted_day < starts.day)",
        f"""at_begun AS MATERIALIZED (
            SELECT begun.*, a.{clock} + (b.{clock} - a.{clock}) * (begun.day - a.day) / (b.day - a.day) AS count
            FROM begun LEFT JOIN fleet_clockpoint a ON a.id = {before}
            LEFT JOIN fleet_clockpoint b ON b.id = {after})""",
        f"""base AS MATERIALIZED (
            SELECT {", ".join(f"every.{name.strip()}" for name in kept.split(","))},
                CASE WHEN {later} THEN at_begun.day ELSE every.records_day END AS records_day,
                CASE WHEN {later} THEN at_begun.count ELSE every.at_records END AS at_records
            FROM every LEFT JOIN starts ON starts.site_id = every.site_id
            LEFT JOIN at_begun ON at_begun.module_id = every.module_id AND at_begun.day = starts.day
                AND every.fitted_day < starts.day)""",
    ]


def _placed(question: LifeQuestion) -> str:
    """`once`: the site reports every failure at once; `once_day`: the last day that counts there."""
    return f"""placed AS (
        SELECT base.*, site.kind, CASE WHEN site.reports_at_once THEN 1 ELSE 0 END AS once,
            {question.as_of} - COALESCE(lags.lag, 0) AS once_day,
            CASE WHEN removed_on > '{question.as_of_text}' THEN 1 ELSE 0 END AS removed_later
        FROM base LEFT JOIN fleet_site site ON site.id = base.site_id LEFT JOIN lags ON lags.site_id = base.site_id
        WHERE 1 = 1{_in("base.site_id", question.sites)})"""


def _judged() -> str:
    """`still`: the end lies beyond what counts, or may; it is decided where the module was last seen."""
    return """judged AS MATERIALIZED (
        SELECT placed.*, CASE WHEN end_day IS NULL THEN 1 WHEN once = 1 AND end_day > once_day THEN 1
            WHEN once = 0 AND removed_later = 1 THEN 1 ELSE 0 END AS still
        FROM placed)"""


def _last_knot(of: str, limit: str, condition: str = "", column: str = "day") -> str:
    return (
        f"(SELECT k.{column} FROM fleet_clockpoint k WHERE k.module_id = {of}.module_id AND k.day {limit}"
        f"{condition} ORDER BY k.day DESC LIMIT 1)"
    )


def _cuts(question: LifeQuestion) -> list[str]:
    """Until when, and to which count, a module's running parts are known to have been good."""
    clock = question.clock
    seen = _last_knot("cuts", f"< {question.as_of + 1}", " AND k.seen_working")
    if clock == "days":
        count_day = "cut_day"
    else:
        read = f" AND k.{clock}_read"
        within_day = _last_knot("cut_days", "< cut_days.cut_day + 1", read)
        until_then = _last_knot("cut_days", "<= cut_days.cut_day", read)
        count_day = f"COALESCE(CASE WHEN once = 1 THEN {within_day} ELSE {until_then} END, cut_day)"
    before = _last_knot("count_days", "<= count_days.count_day", column="id")
    after = (
        "(SELECT k.id FROM fleet_clockpoint k WHERE k.module_id = count_days.module_id "
        "AND k.day > count_days.count_day ORDER BY k.day LIMIT 1)"
    )
    return [
        "cuts AS (SELECT DISTINCT module_id, once, once_day FROM judged WHERE still = 1)",
        "cut_days AS MATERIALIZED ("
        f"SELECT cuts.*, CASE WHEN once = 1 THEN once_day ELSE {seen} END AS cut_day FROM cuts)",
        f"count_days AS MATERIALIZED (SELECT cut_days.*, {count_day} AS count_day FROM cut_days)",
        f"""at_cuts AS (
            SELECT count_days.*, a.{clock} + (b.{clock} - a.{clock})
                * (count_days.count_day - a.day) / (b.day - a.day) AS at_cut
            FROM count_days LEFT JOIN fleet_clockpoint a ON a.id = {before}
            LEFT JOIN fleet_clockpoint b ON b.id = {after})""",
    ]


def _ages(question: LifeQuestion) -> str:
    """Raw ages and what ended them, before anything is rounded or left out."""
    failures = ["'failed'", "'worn to limit'"] if question.worn_is_failure else ["'failed'"]
    acted = f" AND NOT (1 = 1{_in('COALESCE(mode_id, 0)', question.modes)})"
    other_mode = "" if question.modes is None else f"WHEN reason IN ({', '.join(failures)}){acted} THEN 'other mode' "
    running = "(still = 1 AND NOT (end_day IS NOT NULL AND judged.once = 0 AND end_day <= cut_day))"
    unseen = "(still = 1 AND cut_day IS NULL)"
    return f"""ages AS (
        SELECT kept.*, CASE WHEN ended = 0 THEN at_cut ELSE at_end END AS at_last,
            CASE WHEN ended = 0 THEN cut_day ELSE end_day END AS last_day,
            CASE WHEN ended = 0 THEN 'running' {other_mode}
                WHEN reason IN ({", ".join(failures)}) THEN 'failed'
                WHEN reason = 'worn to limit' THEN 'worn' WHEN reason = 'not known' THEN 'not known'
                ELSE 'withdrawn' END AS state
        FROM (SELECT judged.*, at_cuts.cut_day, at_cuts.at_cut,
                CASE WHEN {running} OR {unseen} THEN 0 ELSE 1 END AS ended
            FROM judged LEFT JOIN at_cuts ON judged.still = 1 AND at_cuts.module_id = judged.module_id
                AND at_cuts.once = judged.once AND at_cuts.once_day = judged.once_day) kept)"""


def _up(value: str, clock: str) -> str:
    return _whole(value, clock) if clock == "hours" else f"CEILING({value} - {CLOSE})"


def _down(value: str, clock: str) -> str:
    return _whole(value, clock) if clock == "hours" else f"FLOOR({value} + {CLOSE})"


def _whole(value: str, clock: str) -> str:
    """Hours are kept as read; a thousandth makes equal ones equal again after a subtraction."""
    return f"(FLOOR(({value}) * 1000 + 0.5) / 1000.0)"


def _told(question: LifeQuestion) -> str:
    """What becomes of each fitting: an entry, a duration and a last good age, or a reason to leave it out."""
    clock = question.clock
    begun = "CASE WHEN records_day IS NULL OR at_records < at_fit THEN at_fit ELSE at_records END"
    rounded = f"""(SELECT ages.*,
            {_down(f"age_at_fit + ({begun}) - at_fit", clock)} AS entry,
            CASE WHEN state = 'failed' THEN {_up("age_at_fit + at_last - at_fit", clock)}
                ELSE {_down("age_at_fit + at_last - at_fit", clock)} END AS whole_age,
            CASE WHEN state = 'failed' AND (last_good_entered OR once = 0)
                THEN {_down("age_at_fit + at_good - at_fit", clock)} END AS good_age
        FROM ages) rounded"""
    first_day = "state = 'failed' AND whole_age <= entry" if clock == "days" else "1 = 0"
    also = "CASE WHEN state = 'failed' THEN also END" if question.also == "mode" else "also"
    return f"""told AS (
        SELECT id, CASE {_reasons(question, first_day)} END AS left_out, state, entry, measured, site_id, label,
            {also} AS also, module_id, position_id, fitted_day, last_day,
            CASE WHEN {first_day} THEN entry + 1 ELSE whole_age END AS duration,
            CASE WHEN {first_day} THEN entry WHEN good_age >= whole_age THEN NULL
                WHEN good_age < entry THEN entry ELSE good_age END AS last_good
        FROM {rounded})"""


def _reasons(question: LifeQuestion, first_day: str) -> str:
    rigs = "" if question.with_rigs else f"WHEN kind = 'rig' THEN '{Reason.RIG.value}'"
    used = "" if question.own_clock else f"WHEN age_at_fit > 0 THEN '{Reason.USED.value}'"
    return f"""{rigs}
            WHEN fitted_day IS NULL THEN '{Reason.DAY_NOT_KNOWN.value}'
            WHEN last_day IS NULL THEN '{Reason.NOT_SEEN.value}'
            WHEN fitted_day > last_day THEN '{Reason.TOO_LATE.value}' {used}
            WHEN at_fit IS NULL OR at_last IS NULL THEN '{Reason.NO_CLOCK.value}'
            WHEN records_day IS NOT NULL AND at_records IS NULL THEN '{Reason.NO_CLOCK.value}'
            WHEN records_day >= last_day THEN '{Reason.BEFORE_RECORDS.value}'
            WHEN {first_day} THEN NULL
            WHEN whole_age <= entry THEN '{Reason.NO_AGE.value}'"""
