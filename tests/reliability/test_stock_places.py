"""Where to keep spares, from plain values; and in words."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest

from reliability.forecasts import place_words
from reliability.forecasts.stock_places import PlacedPart, level_spread_of, levels, stock_places
from reliability.stats.count_results import CountDistribution
from reliability.stats.two_echelon import two_echelon_backorders

SHIP = {"K-1": 3.0, "K-2": 2.0}


def nuts(**fields) -> PlacedPart:
    given = {
        "part": "N3", "name": "drive nut", "unit_cost": 15.0, "supplier_days": 20,
        "use_a_day": {"K-1": 0.1, "K-2": 0.05},
    }  # fmt: skip
    return PlacedPart(**{**given, **fields})


def plain(sentence: str) -> str:
    return sentence.replace("\u00a0", " ")


def test_today_is_what_the_two_echelon_formula_says() -> None:
    found = stock_places([nuts(at_depot=2, at_sites={"K-2": 1})], SHIP, 0.0)
    told = two_echelon_backorders([0.1, 0.05], [0, 1], 2, depot_time=20, ship_time=[3.0, 2.0]).total
    assert found.now.mean == pytest.approx(told)
    assert found.now.lower == found.now.upper == found.now.mean
    assert found.curve == ()


def test_the_curve_falls_and_says_where_each_piece_goes() -> None:
    found = stock_places([nuts(), nuts(part="S1", name="screw", unit_cost=200.0)], SHIP, 500.0)
    waiting = [step.waiting.mean for step in found.curve]
    assert waiting == sorted(waiting, reverse=True)
    assert waiting[0] < found.now.mean
    placed: dict[tuple[str, str], int] = {}
    for step in found.curve:
        for place, pieces in step.changes:
            placed[step.part, place] = placed.get((step.part, place), 0) + pieces
        assert sum(pieces for _, pieces in step.changes) == step.pieces
    stock = [placed.get(("N3", site), 0) for site in ("K-1", "K-2")]
    told = two_echelon_backorders(
        [0.1, 0.05], stock, placed.get(("N3", "depot"), 0), depot_time=20, ship_time=[3.0, 2.0]
    ).total
    screws = [placed.get(("S1", site), 0) for site in ("K-1", "K-2")]
    told += two_echelon_backorders(
        [0.1, 0.05], screws, placed.get(("S1", "depot"), 0), depot_time=20, ship_time=[3.0, 2.0]
    ).total
    assert found.curve[-1].waiting.mean == pytest.approx(told)
    assert found.left == pytest.approx(500 - found.curve[-1].money)


def test_uncertain_use_widens_the_figures() -> None:
    found = stock_places([nuts(level_spread=0.4, at_depot=3)], SHIP, 100.0)
    assert found.now.lower < found.now.mean < found.now.upper
    both = stock_places([nuts(level_spread=0.4, at_depot=3), nuts(part="M", level_spread=0.4, at_depot=3)], SHIP, 0.0)
    # two parts uncertain on their own stray less together than twice one
    assert both.now.mean == pytest.approx(2 * found.now.mean)
    assert both.now.upper - both.now.mean == pytest.approx(math.sqrt(2) * (found.now.upper - found.now.mean))


def test_levels_have_mean_one_and_their_spread() -> None:
    assert levels(0.0).tolist() == [1.0]
    found = levels(0.3)
    assert found.mean() == pytest.approx(1.0)
    assert found.std() == pytest.approx(0.3, rel=0.06)
    gamma_poisson = np.random.default_rng(1).poisson(20 * np.random.default_rng(2).gamma(10, 0.1, 200_000))
    pmf = np.bincount(gamma_poisson) / gamma_poisson.size
    assert level_spread_of(CountDistribution(pmf)) == pytest.approx(math.sqrt(0.1), rel=0.03)
    assert level_spread_of(CountDistribution(np.array([1.0]))) == 0.0


def test_stock_in_the_wrong_place_is_seen() -> None:
    found = stock_places([nuts(at_sites={"K-2": 5}), nuts(part="OK", at_depot=3, at_sites={"K-1": 1})], SHIP, 0.0)
    assert found.moves[0].part == "N3"
    move = found.moves[0]
    assert move.after < move.before
    assert sum(pieces for _, pieces in move.changes) == 0
    assert dict(move.changes)["K-2"] < 0
    assert "without buying any" in place_words.move(move)


def test_a_site_without_a_store_keeps_none() -> None:
    found = stock_places([nuts()], SHIP, 300.0, stores={"K-2"})
    assert {place for step in found.curve for place, pieces in step.changes if pieces > 0} <= {"depot", "K-2"}
    assert found.curve[-1].waiting.mean < found.now.mean


def test_words_and_document() -> None:
    found = stock_places([nuts(at_sites={"K-2": 5}, level_spread=0.3)], SHIP, 60.0, depot="WEIR-DEPOT")
    told = [plain(sentence) for sentence in place_words.sentences(found, "EUR")]
    assert told[0].startswith("With the stock kept today ")
    assert "wait for a part at any time, on average." in told[0]
    assert told[1].startswith("60 EUR more in the right places bring it to ")
    assert "First comes 1 drive nut, kept at" in told[1]
    assert told[-1] == place_words.LONG_RUN
    nothing = stock_places([nuts(use_a_day={})], SHIP, 60.0)
    assert plain(place_words.bought(nothing, "EUR")) == "60 EUR buy nothing that would help."
    document = json.loads(json.dumps(found.document()))
    assert document["curve"][-1]["money"] == 60.0
    assert document["now"]["mean"] == pytest.approx(found.now.mean)
