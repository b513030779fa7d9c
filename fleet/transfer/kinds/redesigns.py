"""redesigns.csv, replacements.csv and rollout.csv: what replaces what, and the plan by which modules get it."""

from __future__ import annotations

from fleet.actions.plan_rollout import LATEST
from fleet.models import Redesign, RedesignChange, RolloutStep
from fleet.models.codes import natural_key
from fleet.transfer import cells
from fleet.transfer.columns import Column, FileKind
from fleet.transfer.known import UNCLEAR, Known
from fleet.transfer.row import Row


def finish(row: Row, known: Known) -> None:
    row["code_order"] = natural_key(row["code"] or "")
    row.not_too_far("starts_on")


def finish_replacement(row: Row, known: Known) -> None:
    """Old and new parts are of one component, and nothing replaces itself."""
    new = next((part for part in known.parts.values() if part.id == row["new_part_id"]), None)
    named = row.given.get("part", "").upper()
    codes = row.get("linked") or ()
    for code in codes:
        old = known.parts.get(code)
        if old is None:
            row.say(
                "replaces", f"names part {code}, which is neither in the files nor in the book. Add it to parts.csv."
            )
        elif code == named:
            row.say("replaces", f"names {code} itself. A part cannot replace itself; name the older ones.")
        elif new is not None and UNCLEAR not in (new.component, old.component) and new.component != old.component:
            row.say("replaces", f"names part {code}, which is of another component. Name parts of the same component.")
    row["linked"] = " ".join(codes)


def finish_step(row: Row, known: Known) -> None:
    """Without a place in the order a module keeps the one it has, or comes to the end of the plan."""
    if row["planned_on"] is not None and row["planned_on"] >= LATEST:
        row.say("planned_on", "is no day of a rollout. Check the year.")
    redesign, module = row["redesign_id"], row["module_id"]
    if redesign is None or module is None:
        return
    if row["order"] is None:
        row["order"] = known.steps.get((redesign, module), known.last_steps.get(redesign, 0) + 1)
    known.last_steps[redesign] = max(known.last_steps.get(redesign, 0), row["order"])


REDESIGNS = FileKind(
    name="redesigns",
    model=Redesign,
    noun="redesign",
    columns=(
        Column("redesign", "code", cells.code, required=True),
        Column("name", "name", cells.text_up_to(120), empty=""),
        Column("hope", "hope", cells.number(1.01, 100), empty=1.5),
        Column("starts_on", "starts_on", cells.day),
        Column("cost_a_module", "cost_a_module", cells.money),
        Column("visits_a_failure", "visits_a_failure", cells.number(0, 100), empty=1.0),
        Column("bench_hours_a_failure", "bench_hours_a_failure", cells.number(0, 1000), empty=0.0),
        Column("stop_days_a_failure", "stop_days_a_failure", cells.number(0, 365), empty=1.0),
        Column("note", "note", cells.text_up_to(2000), empty=""),
    ),
    key=("code",),
    key_columns=("redesign",),
    derived=("code_order",),
    finish=finish,
)

REPLACEMENTS = FileKind(
    name="replacements",
    model=RedesignChange,
    noun="replacement",
    columns=(
        Column("redesign", "redesign_id", cells.code, required=True, refers="redesign"),
        Column("part", "new_part_id", cells.code, required=True, refers="part"),
        Column("replaces", "linked", cells.codes, required=True, empty=()),
    ),
    key=("redesign_id", "new_part_id"),
    key_columns=("redesign", "part"),
    extra={"linked": "text"},
    finish=finish_replacement,
)

ROLLOUT = FileKind(
    name="rollout",
    model=RolloutStep,
    noun="module of the plan",
    columns=(
        Column("redesign", "redesign_id", cells.code, required=True, refers="redesign"),
        Column("module", "module_id", cells.code, required=True, refers="module"),
        Column("order", "order", cells.whole(0)),
        Column("planned_on", "planned_on", cells.day),
    ),
    key=("redesign_id", "module_id"),
    key_columns=("redesign", "module"),
    finish=finish_step,
)
