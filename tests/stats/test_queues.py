"""Queues in balance: published values, plain sums, extremes."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reliability.stats.errors import InvalidArgument, UndefinedEstimate
from reliability.stats.queues import (
    erlang_b,
    erlang_c,
    finite_source_queue,
    many_servers_queue,
    single_server_queue,
)
from tests.stats.stock_reference import check


def test_three_doctors():
    # values from memory of Gross & Harris, the eye-clinic example
    entry = check("q-mm3-clinic")
    expected = entry["expected"]
    found = many_servers_queue(6.0, 20 / 60, 3)
    assert found.empty == pytest.approx(expected["p0"])
    assert found.must_wait == pytest.approx(expected["ErlangC"])
    assert found.waiting == pytest.approx(expected["Lq"])
    assert found.present == pytest.approx(expected["L"])
    assert found.wait == pytest.approx(expected["Wq_h"])
    assert 60 * found.stay == pytest.approx(expected["W_min"], abs=entry["tolerance"]["W_min"])


def test_erlangs_tables():
    # traffic tables from memory; Erlang C computed
    entry = check("q-erlang")
    expected, tolerance = entry["expected"], entry["tolerance"]
    assert erlang_c(8, 10) == pytest.approx(expected["ErlangC(a=8,c=10)"], abs=1e-8)
    assert many_servers_queue(8.0, 1.0, 10).wait == pytest.approx(expected["Wq*mu(a=8,c=10)"], abs=1e-8)
    for load, servers in ((12.03, 20), (4.46, 10), (2.22, 5)):
        assert erlang_b(load, servers) == pytest.approx(expected[f"ErlangB({load:g},{servers})"], abs=tolerance)


def test_car_wash_with_constant_service():
    # values from memory of Taha's M/G/1 example
    entry = check("q-md1-carwash")
    expected = entry["expected"]
    found = single_server_queue(4.0, 10 / 60, 0.0)
    told = {"Ls": found.present, "Lq": found.waiting, "Ws_h": found.stay, "Wq_h": found.wait}
    assert told == {name: pytest.approx(value, abs=entry["tolerance"]) for name, value in expected.items()}


def test_five_robots_two_repairers():
    # values from memory of Gross & Harris, the robots example
    entry = check("q-finite-robots")
    found = finite_source_queue(5, 2, 30.0, 3.0)
    told = {
        "p0": found.probabilities[0],
        "L": found.present,
        "running": found.running,
        "W_h": found.stay,
        "repairer_idle": found.idle,
    }
    for name, value in entry["expected"].items():
        assert told[name] == pytest.approx(value, abs=entry["tolerance"][name])


@given(st.floats(0.01, 30), st.integers(0, 40))
@settings(max_examples=60, deadline=None)
def test_erlang_b_against_the_plain_sum(load, servers):
    terms = [load**n / math.factorial(n) for n in range(servers + 1)]
    assert erlang_b(load, servers) == pytest.approx(terms[-1] / sum(terms), rel=1e-9)


@given(st.floats(0.01, 0.99), st.integers(1, 30))
@settings(max_examples=60, deadline=None)
def test_many_servers_against_the_plain_sum(share, servers):
    load = share * servers
    terms = [1.0]
    for n in range(1, 6000):
        terms.append(terms[-1] * load / min(n, servers))
    chances = np.array(terms) / sum(terms)
    found = many_servers_queue(load, 1.0, servers)
    counts = np.arange(chances.size)
    assert found.empty == pytest.approx(chances[0], rel=1e-6)
    assert found.must_wait == pytest.approx(chances[servers:].sum(), rel=1e-6)
    assert found.present == pytest.approx(float(chances @ counts), rel=1e-5)


def test_one_server_with_exponential_service_is_both():
    one, many = single_server_queue(0.7, 1.0, 1.0), many_servers_queue(0.7, 1.0, 1)
    assert one.waiting == pytest.approx(many.waiting)
    assert one.stay == pytest.approx(1 / 0.3)
    assert one.empty == pytest.approx(many.empty)


def test_machine_repair_against_solving_the_balance():
    machines, servers, spares, fails, mends = 6, 2, 3, 1 / 10, 1 / 4
    size = machines + spares + 1
    flow = np.zeros((size, size))
    for n in range(size - 1):
        flow[n, n + 1] = min(machines, machines + spares - n) * fails
        flow[n + 1, n] = min(n + 1, servers) * mends
    flow -= np.diag(flow.sum(axis=1))
    chances = np.linalg.lstsq(np.vstack([flow.T, np.ones(size)]), np.append(np.zeros(size), 1.0), rcond=None)[0]
    found = finite_source_queue(machines, servers, 10.0, 4.0, spares=spares)
    assert found.probabilities == pytest.approx(chances)
    assert found.no_spare == pytest.approx(chances[spares + 1 :].sum())
    assert found.failure_rate * found.stay == pytest.approx(found.present)


def test_extremes():
    assert erlang_b(0, 0) == 1
    assert erlang_b(0, 3) == 0
    assert erlang_b(1e6, 1) == pytest.approx(1 - 1e-6, rel=1e-9)
    assert 0 < erlang_b(900, 1000) < 1e-3
    assert erlang_c(99_999.0, 100_000) == pytest.approx(1.0, abs=0.01)
    assert many_servers_queue(0.0, 1.0, 2).stay == 1.0
    # 1 000 servers at half load: nobody waits, and no number overflows
    calm = many_servers_queue(500.0, 1.0, 1000)
    assert calm.must_wait < 1e-60
    assert calm.present == pytest.approx(500)
    assert many_servers_queue(100.0, 1.0, 3000).empty == pytest.approx(math.exp(-100))
    assert finite_source_queue(10_000, 1, 1e-6, 1e6).running == pytest.approx(0, abs=1e-9)


@pytest.mark.parametrize(("load", "servers"), [(3.0, 3), (5.0, 2), (0.5, 0)])
def test_a_queue_that_grows_for_ever_is_refused(load, servers):
    with pytest.raises(UndefinedEstimate, match="grows for ever"):
        erlang_c(load, servers)


def test_a_single_server_asked_too_much_is_refused():
    with pytest.raises(UndefinedEstimate):
        single_server_queue(1.0, 1.0, 0.0)


@pytest.mark.parametrize(
    "ask",
    [
        lambda: erlang_b(-1, 2),
        lambda: erlang_b(math.nan, 2),
        lambda: erlang_b(1, -1),
        lambda: erlang_b(1, 1.5),
        lambda: many_servers_queue(-1, 1, 1),
        lambda: many_servers_queue(1, math.inf, 1),
        lambda: single_server_queue(0.1, 1, -1),
        lambda: finite_source_queue(0, 1, 1, 1),
        lambda: finite_source_queue(5, 0, 1, 1),
        lambda: finite_source_queue(5, 1, 0, 1),
        lambda: finite_source_queue(5, 1, 1, math.nan),
        lambda: finite_source_queue(5, 1, 1, 1, spares=-1),
    ],
)
def test_impossible_queues_are_refused(ask):
    with pytest.raises(InvalidArgument):
        ask()
