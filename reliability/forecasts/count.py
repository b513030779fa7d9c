"""The count of one component's question: everything in one pass from the same draws, exactly where that is possible.

What feeds back on itself (retrofits at a pace) or needs three designs in one stretch is simulated instead.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from reliability.forecasts.horizon import WEEK
from reliability.forecasts.learned import Learned
from reliability.forecasts.positions import Positions
from reliability.forecasts.question import Question
from reliability.forecasts.season import edges_of, in_season, season_of
from reliability.forecasts.what_if import NotCountedYet

if TYPE_CHECKING:
    from reliability.stats.count_results import CountForecast, Counts
    from reliability.stats.count_simulation import SimulatedCounts

FEW_FAILURES = 20
DRAWS = 400  # of each life; those that are counted in full speak for the others
COUNTED_OF_FEW, COUNTED = 200, 48
LABELS = ("site", "type", "part", "needed")
SIMULATED = 600_000  # draws times positions
FEWEST_SIMULATED, MOST_SIMULATED = 200, 2000
MOST_POSITIONS, SAMPLE_OF_MANY = 20_000, 6_000  # in a simulation; of more a sample stands for all


def is_simulated(question: Question) -> bool:
    """Whether the exact count does not cover what is assumed."""
    assumed = question.what_if
    return assumed.retrofit_a_week is not None or 0 < question.switch_day < question.span


def count(question: Question, learned: Learned, positions: Positions) -> CountForecast:
    """Failures, parts used and planned ones: in total, by week, and by site, type, part and what goes in."""
    import numpy as np

    from reliability.stats.counts import forecast_counts

    if is_simulated(question):
        from reliability.forecasts.simulated import simulated_forecast

        size = float(positions.weights.sum())
        share = 1.0 if size <= MOST_POSITIONS else question.share_for(size, SAMPLE_OF_MANY)
        some = singles(positions, share)
        found = simulated_forecast(question, simulate(question.of_share(share), learned, some), some, share)
        return in_season(found, season_of(question, learned.duty)) if learned.duty.season else found
    windows, stretch = edges_of(question)
    labels = [positions.column(name) for name in LABELS]
    found = forecast_counts(
        designs_of(learned),
        positions.ages,
        positions.horizons,
        weights=positions.weights,
        groups=labels[0],
        also_groups=labels[1:],
        windows=windows,
        stretch=stretch,
        parts_by_window=False,
        taken_share=learned.taken_share,
        draws=DRAWS,
        counted_draws=COUNTED_OF_FEW if learned.failures < FEW_FAILURES else COUNTED,
        rng=np.random.default_rng(question.seed("")),
        **settings_of(question, learned, positions),
    )
    return in_season(found, season_of(question, learned.duty)) if learned.duty.season else found


def totals(question: Question, learned: Learned, positions: Positions) -> Counts:
    """The totals alone, exactly."""
    import numpy as np

    from reliability.forecasts.season import scaled_counts
    from reliability.stats.counts import forecast_counts

    gap, span = question.gap, question.span
    found = forecast_counts(
        designs_of(learned),
        positions.ages,
        positions.horizons,
        weights=positions.weights,
        windows=[0, gap, span] if gap else [0, span],
        stretch=(1, 2) if gap else (0, 1),
        parts_by_window=False,
        taken_share=learned.taken_share,
        draws=DRAWS,
        counted_draws=COUNTED_OF_FEW if learned.failures < FEW_FAILURES else COUNTED,
        rng=np.random.default_rng(question.seed("")),
        **settings_of(question, learned, positions),
    )
    return scaled_counts(found, season_of(question, learned.duty).whole)


def designs_of(learned: Learned) -> dict[str, Any]:
    """Draws of every design, in an order that no assumption changes: a what-if and its base case share them."""
    return {label: design.life for label, design in sorted(learned.designs.items())}


def settings_of(question: Question, learned: Learned, positions: Positions) -> dict[str, Any]:
    """What both engines are told alike."""
    import numpy as np

    assumed = question.what_if.superseding
    fitted = [learned.label(place.needed) for place in positions.places]
    removed = [learned.design(place.part) for place in positions.places]
    upgrading = positions.column("upgrading")
    rates = [each.removals + each.upgrades * yes for each, yes in zip(removed, upgrading, strict=True)]
    settings: dict[str, Any] = {
        "sites": positions.column("site"),
        "designs": [learned.label(place.part) for place in positions.places],
        "next_designs": fitted,
        "other_removals": np.array(rates),
        "replace_at": np.array(positions.column("rule")),
        "visits": (positions.clock("every"), positions.clock("next")),
        "down_until": positions.clock("down"),
        "join_at": positions.clock("joins"),
        "leave_at": positions.clock("leaves"),
        "oldest": np.array(positions.column("oldest")),
        "duty_spread": learned.duty.spread,
        "refit_delay": 0.5 if question.component.clock == "days" else 0.0,
    }
    if assumed is not None and 0 < question.switch_day < question.span:
        settings["later_designs"] = [learned.label(assumed)] * len(positions)
        settings["switch_at"] = np.array([place.pace * question.switch_day for place in positions.places])
    return settings


def simulate(
    question: Question,
    learned: Learned,
    positions: Positions,
    *,
    draws: int | None = None,
    most_retrofits: float = math.inf,
) -> SimulatedCounts:
    """The same question by plain simulation; the same seed gives every position the same luck in every what-if."""
    import numpy as np

    from reliability.stats.count_simulation import Retrofit, simulate_counts

    single = singles(positions)
    if len(single) > MOST_POSITIONS:
        raise NotCountedYet(
            f"{len(single)} parts are more than can be simulated ({MOST_POSITIONS}). Ask for fewer sites."
        )
    settings = settings_of(question, learned, single)
    assumed = question.what_if
    retrofit = None
    if assumed.retrofit_a_week is not None:
        begin = question.switch_day / question.span
        if begin < 1.0:
            step = WEEK / question.span
            retrofit = Retrofit(begin, assumed.retrofit_a_week, step, most_retrofits)
        settings.setdefault("later_designs", [learned.label(assumed.superseding or "")] * len(single))
        settings.setdefault("switch_at", 0.0)
    windows, _ = edges_of(question)
    draws = draws or int(np.clip(SIMULATED / max(len(single), 1), FEWEST_SIMULATED, MOST_SIMULATED))
    return simulate_counts(
        designs_of(learned),
        single.ages,
        single.horizons,
        windows=windows,
        stretch=(question.gap / question.span, 1.0),
        draws=draws,
        rng=np.random.default_rng(question.seed("simulated")),
        retrofit=retrofit,
        taken_share=learned.taken_share,
        **settings,
    )


def singles(positions: Positions, share: float = 1.0) -> Positions:
    """A line a position, or this share of them, evenly spread over their order; fractions are rounded so that their
    running sum stays right.

    In the order of site, type, part and age, which hardly depends on what is assumed: luck follows the line.
    """
    import numpy as np

    keys = [
        (place.site, place.type, place.part, age) for place, age in zip(positions.places, positions.ages, strict=True)
    ]
    order = np.array(sorted(range(len(keys)), key=keys.__getitem__), dtype=int)
    counts = np.diff(np.rint(np.cumsum(positions.weights[order]) * share), prepend=0.0).astype(int)
    line = np.repeat(order, counts)
    places: Sequence[Any] = [positions.places[number] for number in line]
    return Positions(positions.ages[line], positions.horizons[line], np.ones(line.size), list(places))
