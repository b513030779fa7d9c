"""The demo's redesigns: a nut with a wiper lip on its way through the fleet, and a seal of another lip."""

from __future__ import annotations

import datetime as dt

from fleet.actions.plan_rollout import plan_rollout
from fleet.actions.save_redesign import PartReplaced, save_redesign
from fleet.demo.places import PLACES
from fleet.models import Fitting, Module, Part, Placement, Redesign

FIRST_PACE, NEXT_PACE = 6, 5  # modules a week


def add_redesigns(until: dt.date) -> None:
    """Through the actions, as a manager would enter them."""
    nut = save_redesign(
        by=None,
        code="WIPER-LIP",
        name="Drive nut with wiper lip",
        hope=1.5,
        cost_a_module=55,
        visits_a_failure=1,
        bench_hours_a_failure=0.4,
        stop_days_a_failure=1.5,
        note="Sand worked its way into the thread. The lip is meant to keep it out.",
        changes=[replaced("DN-3", "DN-2")],
    )
    began = first_fitted("DN-3") or until
    plan(nut, [place.code for place in PLACES if place.rollout == "plan"], began, FIRST_PACE)
    plan(nut, [place.code for place in PLACES if place.rollout == ""], until + dt.timedelta(days=14), NEXT_PACE)
    save_redesign(
        by=None,
        code="SEAL-LIP",
        name="Shaft seal, second lip",
        hope=1.3,
        cost_a_module=80,
        visits_a_failure=1,
        bench_hours_a_failure=3,
        stop_days_a_failure=2,
        changes=[replaced("SS-2", "SS-1")],
    )


def replaced(new: str, *old: str) -> PartReplaced:
    return PartReplaced(Part.objects.get(code=new), list(Part.objects.filter(code__in=old)))


def first_fitted(part: str) -> dt.date | None:
    return (
        Fitting.objects.standing()
        .filter(part__code=part)
        .order_by("fitted_on")
        .values_list("fitted_on", flat=True)
        .first()
    )


def plan(redesign: Redesign, sites: list[str], first_on: dt.date, pace: int) -> None:
    """The modules that stand at these field sites, site by site."""
    for site in sites:
        here = Placement.objects.current().filter(site__code=site, site__kind="field").values("module")
        modules = list(Module.objects.filter(pk__in=here, scrapped_on=None).order_by("code_order"))
        if modules:
            plan_rollout(by=None, redesign=redesign, modules=modules, first_on=first_on, modules_a_week=pace)
            first_on += dt.timedelta(days=7 * (len(modules) // pace + 1))
