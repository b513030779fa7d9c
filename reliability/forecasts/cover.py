"""How long what lies in one store lasts there, from the use at its site."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from fleet.models import SiteKind, StockBalance, Store
from reliability.forecasts.coming_use import ComingUse
from reliability.forecasts.order_list import cover_weeks
from reliability.stats.stocking_paths import daily_paths, running_out

WEEKS_AHEAD = 52


@dataclass(frozen=True)
class Cover:
    """a_week: expected use here; weeks: how long it lasts, middle and 80 of 100 cases, None beyond what is seen."""

    part: str
    name: str
    on_hand: int
    known: bool
    a_week: float = 0.0
    weeks: tuple[float | None, float | None, float | None] = (None, None, None)


def store_cover(store: Store, uses: Mapping[str, ComingUse]) -> list[Cover]:
    """Every part that lies in a store at a site; a depot's is told as if it served all sites alone."""
    depot = store.site is not None and store.site.kind == SiteKind.DEPOT
    site = "" if store.site is None else store.site.code
    held: dict[tuple[str, str, str], int] = {}
    rows = StockBalance.objects.filter(store=store).exclude(on_hand=0).order_by("part__code_order")
    for part, name, component, pieces in rows.values_list(
        "part__code", "part__name", "part__component__code", "on_hand"
    ):
        held[part, name, component] = held.get((part, name, component), 0) + pieces
    return [
        part_cover(part, name, pieces, uses.get(component), None if depot else site)
        for (part, name, component), pieces in held.items()
    ]


def part_cover(part: str, name: str, on_hand: int, use: ComingUse | None, site: str | None) -> Cover:
    """site: None for all of them together."""
    if use is None or not use.known:
        return Cover(part, name, on_hand, known=False)
    weekly = use.draws()[part]
    mean = float(weekly.sum(axis=1).mean())
    rng = np.random.default_rng([use.seed, *f"{part} {site}".encode()])
    if site is not None:
        share = use.use_at_sites(part).get(site, 0.0) / mean if mean else 0.0
        # each piece is used here with the site's share of the part's use
        weekly = rng.binomial(weekly, min(share, 1.0))
    paths = daily_paths(weekly, rng).reaching(WEEKS_AHEAD * 7, rng)
    return Cover(
        part, name, on_hand, known=True, a_week=float(weekly.mean()), weeks=cover_weeks(running_out(paths, on_hand))
    )
