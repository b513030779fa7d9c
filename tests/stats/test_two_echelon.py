"""A depot and its sites: published values, simulation, and all splits tried one by one."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from reliability.stats.errors import InvalidArgument
from reliability.stats.stocking import expected_backorders
from reliability.stats.two_echelon import backorders_by_moments, two_echelon_backorders
from reliability.stats.two_echelon_money import StockedPart, best_split, marginal_analysis
from tests.stats.stock_reference import check

TWO_OUTLETS = {"depot_time": 14, "ship_time": 2}


@pytest.mark.parametrize(
    ("method", "name"), [("exact", "exact EBO/outlet s=0..3"), ("metric", "METRIC"), ("vari-metric", "VARI-METRIC")]
)
def test_two_outlets(method, name):
    # computed with scipy from the formulas of Graves 1985 and Sherbrooke 1986, see the entry
    entry = check("spares-two-echelon-exact")
    for label, values in entry["expected"][name].items():
        depot = int(label.split("=")[1])
        found = [two_echelon_backorders([0.1, 0.1], [s, s], depot, method=method, **TWO_OUTLETS) for s in range(4)]
        assert [each.backorders[0] for each in found] == pytest.approx(values, abs=entry["tolerance"])
        assert found[1].total == pytest.approx(2 * values[1], abs=2 * entry["tolerance"])


def test_five_bases_with_repair_of_their_own():
    # parameters from memory of Sherbrooke 2004, ch. 3; values computed
    entry = check("spares-sherbrooke-5-bases")
    expected, given = entry["expected"], entry["data"]
    found = [
        two_echelon_backorders(
            [given["demand_each_per_year"]] * 5,
            [1] * 5,
            depot,
            depot_time=given["depot_repair_yr"],
            ship_time=given["order_ship_yr"],
            repaired_on_site=given["base_repair_fraction"],
            site_repair_time=given["base_repair_yr"],
            method="metric",
        )
        for depot in range(4)
    ]
    assert found[0].depot_pipeline == pytest.approx(expected["depot_pipeline"])
    assert [each.pipeline[0] for each in found] == pytest.approx(expected["base_pipeline s0=0..3"], abs=1e-6)
    assert [each.backorders[0] for each in found] == pytest.approx(expected["EBO per base s=1, s0=0..3"], abs=1e-4)


def simulated(demand, site_stock, depot_stock, depot_time, ship_time, days, seed):
    """Each wish followed to its resupply: the depot's piece for wish k was freed by wish k - stock. Slow but plain."""
    rng = np.random.default_rng(seed)
    when = np.cumsum(rng.exponential(1 / sum(demand), int(days * sum(demand))))
    site = rng.choice(len(demand), when.size, p=np.array(demand) / sum(demand))
    freed = np.concatenate([np.full(depot_stock, -np.inf), when])[: when.size] + depot_time
    comes = np.maximum(when, freed) + ship_time
    moments = np.linspace(when[0] + 50, when[-1] - 50, 200_000)
    owed = []
    for number, stock in enumerate(site_stock):
        mine = site == number
        out = np.searchsorted(when[mine], moments) - np.searchsorted(np.sort(comes[mine]), moments)
        owed.append(np.maximum(out - stock, 0).mean())
    return np.array(owed)


def test_uneven_sites_against_a_simulation():
    demand, stock = [0.05, 0.2, 0.4], [1, 2, 4]
    seen = np.mean([simulated(demand, stock, 5, 12.0, 3.0, 400_000, seed) for seed in range(3)], axis=0)
    exact = two_echelon_backorders(demand, stock, 5, depot_time=12, ship_time=3, method="exact").backorders
    assert seen == pytest.approx(exact, rel=0.05)
    vari = two_echelon_backorders(demand, stock, 5, depot_time=12, ship_time=3).backorders
    assert vari == pytest.approx(exact, rel=0.12)
    plain = two_echelon_backorders(demand, stock, 5, depot_time=12, ship_time=3, method="metric").backorders
    assert (plain < exact).all()


def test_one_site_and_no_shipping_is_one_shelf():
    for stock in range(4):
        found = two_echelon_backorders([0.3], [stock], 0, depot_time=10, ship_time=0, method="exact")
        assert found.total == pytest.approx(float(expected_backorders(3.0, stock)))


def test_a_depot_with_plenty_leaves_only_the_shipping():
    for method in ("exact", "metric", "vari-metric"):
        found = two_echelon_backorders([0.5, 2.0], [1, 3], 200, depot_time=10, ship_time=[2, 1], method=method)
        assert found.backorders == pytest.approx(expected_backorders([1.0, 2.0], [1, 3]), rel=1e-9)


@given(st.floats(0.01, 30), st.floats(1.0, 8.0), st.integers(0, 60))
@settings(max_examples=80, deadline=None)
def test_backorders_by_moments_against_the_plain_sum(mean, ratio, stock):
    counts = np.arange(6000)
    variance = mean * ratio
    if ratio > 1.000001:
        size = mean**2 / (variance - mean)
        pmf = stats.nbinom.pmf(counts, size, mean / variance)
    else:
        pmf = stats.poisson.pmf(counts, mean)
    plain = float(pmf @ np.maximum(counts - stock, 0))
    assert float(backorders_by_moments(mean, variance, stock)) == pytest.approx(plain, rel=1e-5, abs=1e-10)


def test_nearly_poisson_moments_do_not_lose_figures():
    for excess in (1e-3, 1e-5, 1e-7, 1e-9, 0.0):
        found = float(backorders_by_moments(4.0, 4.0 * (1 + excess), 6))
        assert found == pytest.approx(0.195434, rel=2 * excess + 1e-5)


def test_nothing_wanted_nothing_owed():
    for method in ("exact", "metric", "vari-metric"):
        assert two_echelon_backorders([0, 0], [0, 0], 0, method=method, **TWO_OUTLETS).total == 0


@pytest.mark.parametrize(
    "given",
    [
        {"demand": []},
        {"demand": [-0.1, 0.1]},
        {"demand": [math.nan, 0.1]},
        {"demand": [math.inf, 0.1]},
        {"site_stock": [1]},
        {"site_stock": [1, -1]},
        {"site_stock": [1, 0.5]},
        {"depot_stock": -1},
        {"depot_stock": 1.5},
        {"depot_time": -1},
        {"ship_time": [1, 2, 3]},
        {"ship_time": math.inf},
        {"repaired_on_site": 1.5},
        {"method": "guess"},
        {"demand": [9000.0, 9000.0], "method": "exact"},
    ],
)
def test_impossible_worlds_are_refused(given):
    fields = {"demand": [0.1, 0.1], "site_stock": [1, 1], "depot_stock": 1, **TWO_OUTLETS, **given}
    with pytest.raises(InvalidArgument):
        two_echelon_backorders(fields.pop("demand"), fields.pop("site_stock"), fields.pop("depot_stock"), **fields)


# money


def nut(**fields) -> StockedPart:
    given = {"name": "NUT", "demand": [0.1, 0.02], "depot_time": 14, "ship_time": 2, "unit_cost": 40.0, **fields}
    return StockedPart(**given)


def least_owed(part: StockedPart, pieces: int) -> float:
    """All splits of so many pieces over depot and two sites, one by one."""
    splits = itertools.product(range(pieces + 1), repeat=3)
    return min(
        two_echelon_backorders(part.demand, [a, b], depot, depot_time=14, ship_time=2).total
        for depot, a, b in splits
        if depot + a + b == pieces
    )


def test_every_corner_is_the_best_of_all_splits():
    part = nut()
    curve = marginal_analysis([part], 6 * 40.0)
    pieces = 0
    for step in curve.steps:
        pieces += step.pieces
        assert step.plan.pieces == pieces
        assert step.backorders == pytest.approx(least_owed(part, pieces), abs=1e-9)
        assert step.money == 40.0 * pieces
    assert pieces >= 5
    assert curve.start_backorders == pytest.approx(least_owed(part, 0))


def test_the_best_split_of_a_number_that_is_no_corner():
    for pieces in range(7):
        plan = best_split(nut(), pieces)
        assert plan.pieces == pieces
        assert plan.backorders == pytest.approx(least_owed(nut(), pieces), abs=1e-9)
    assert best_split(nut(demand=[0.0, 0.0]), 5).pieces == 5
    for pieces in (-1, 0.5, 401):
        with pytest.raises(InvalidArgument, match="to be split"):
            best_split(nut(), pieces)


def test_two_parts_share_the_money_best_at_each_corner():
    dear = nut(name="SCREW", demand=[0.01, 0.03], unit_cost=100.0)
    cheap = nut(name="SEAL", demand=[0.02, 0.05], unit_cost=30.0)
    curve = marginal_analysis([dear, cheap], 400.0)
    owed = {part.name: [least_owed(part, n) for n in range(9)] for part in (dear, cheap)}
    for step in curve.steps:
        best = min(
            owed["SCREW"][a] + owed["SEAL"][b]
            for a in range(5)
            for b in range(9)
            if 100 * a + 30 * b <= step.money + 1e-9
        )
        assert step.backorders == pytest.approx(best, abs=1e-9)
    savings = [step.saving for step in curve.steps[:-2]]
    assert savings == sorted(savings, reverse=True)


def test_what_is_kept_stays_and_the_curve_begins_there():
    curve = marginal_analysis([nut(depot_stock=1, site_stock=[0, 2])], 200.0)
    now = two_echelon_backorders([0.1, 0.02], [0, 2], 1, depot_time=14, ship_time=2).total
    assert curve.start["NUT"].backorders == pytest.approx(now)
    assert curve.start["NUT"].site_stock == (0, 2)
    for step in curve.steps:
        assert step.plan.depot_stock >= 1
        assert step.plan.site_stock[1] >= 2
    assert curve.steps[-1].backorders < now


def test_uncertain_demand_shows_its_spread_and_owes_more_on_average():
    level = np.random.default_rng(1).gamma(6, 1 / 6, (25, 1))
    level /= level.mean()
    certain = marginal_analysis([nut(depot_stock=2, site_stock=[2, 1])], 0.0).start["NUT"]
    spread = marginal_analysis([nut(depot_stock=2, site_stock=[2, 1], demand=level * [[0.1, 0.02]])], 0.0).start["NUT"]
    assert certain.lower == certain.backorders == certain.upper
    assert spread.lower < certain.backorders < spread.backorders < spread.upper


def test_a_site_that_cannot_keep_any_is_served_by_the_depot():
    curve = marginal_analysis([nut(may_keep=[False, True])], 400.0)
    assert curve.steps[-1].plan.site_stock[0] == 0
    assert curve.steps[-1].plan.depot_stock > 0
    best = min(two_echelon_backorders([0.1, 0.02], [0, b], 10 - b, depot_time=14, ship_time=2).total for b in range(11))
    assert best_split(nut(may_keep=[False, True]), 10).backorders == pytest.approx(best)
    nowhere = best_split(nut(may_keep=False), 30)
    assert (nowhere.depot_stock, nowhere.site_stock) == (30, (0, 0))
    with pytest.raises(InvalidArgument, match="may_keep"):
        best_split(nut(may_keep=[True, True, False]), 3)


def test_many_sites_and_much_stock_stay_quick_and_right():
    rng = np.random.default_rng(1)
    use = rng.gamma(1.0, 0.03, 150)
    part = nut(demand=use, depot_time=30.0, ship_time=3.0, unit_cost=1.0)
    curve = marginal_analysis([part], 200.0)
    last = curve.steps[-1]
    told = two_echelon_backorders(use, last.plan.site_stock, last.plan.depot_stock, depot_time=30, ship_time=3)
    assert last.backorders == pytest.approx(told.total)
    # no single move makes it better
    stock = np.array(last.plan.site_stock)
    for site in rng.choice(150, 12, replace=False):
        more = stock.copy()
        more[site] += 1
        moved = two_echelon_backorders(use, more, last.plan.depot_stock - 1, depot_time=30, ship_time=3)
        assert moved.total >= told.total - 1e-9


def test_a_part_too_dear_is_left_and_others_go_on():
    curve = marginal_analysis([nut(name="SCREW", unit_cost=500.0, demand=[1.0, 1.0]), nut()], 120.0)
    assert {step.part for step in curve.steps} == {"NUT"}
    assert curve.left == pytest.approx(120.0 - sum(step.cost for step in curve.steps))
    assert curve.plans["SCREW"] == curve.start["SCREW"]


def test_it_stops_where_nothing_is_left_to_gain():
    curve = marginal_analysis([nut()], 1e9)
    assert 0 < curve.steps[-1].backorders < 2e-4
    assert curve.left > 0.9e9
    assert marginal_analysis([nut(demand=[0.0, 0.0])], 1e9).steps == ()
    assert marginal_analysis([], 10.0).steps == ()


@pytest.mark.parametrize(
    ("fields", "budget"),
    [
        ({"unit_cost": 0.0}, 10.0),
        ({"unit_cost": math.nan}, 10.0),
        ({"site_stock": [1]}, 10.0),
        ({"site_stock": [1, -1]}, 10.0),
        ({"depot_stock": 0.5}, 10.0),
        ({}, -1.0),
        ({}, math.inf),
    ],
)
def test_impossible_purchases_are_refused(fields, budget):
    with pytest.raises(InvalidArgument):
        marginal_analysis([nut(**fields)], budget)


def test_a_part_given_twice_is_refused():
    with pytest.raises(InvalidArgument, match="same name"):
        marginal_analysis([nut(), nut()], 10.0)
