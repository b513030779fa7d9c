"""Queues in balance: the closed answers that the bench simulation is held against.

They speak of the long run at a constant pace, never of the next weeks from today's queue; for that see bench_flow.
Notation: load a = arrival rate x mean service, in servers' worth of work. Rates and times in one unit.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reliability.stats.errors import InvalidArgument, UndefinedEstimate

FloatArray = NDArray[np.float64]

MOST_SERVERS = 100_000
MOST_MACHINES = 100_000


@dataclass(frozen=True)
class QueueFigures:
    """Long-run means. empty: chance that nothing is there; must_wait: share that finds no server free.

    waiting, present: mean number waiting, and in all; wait, stay: mean time waiting, and in all; utilisation: share of
    the servers' time in use.
    """

    utilisation: float
    empty: float
    must_wait: float
    waiting: float
    present: float
    wait: float
    stay: float


def erlang_b(load: float, servers: int) -> float:
    """Share of arrivals lost where none may wait (M/G/c/c), by 1/B(c) = 1 + c / a x 1/B(c - 1), B(0) = 1.

    Erlang 1917; Jagerman 1974, Bell System Technical Journal 53, 525 (recursion). Raises InvalidArgument.
    """
    _refuse_load(load)
    _refuse_whole(servers, "number of servers", 0, MOST_SERVERS)
    if load == 0:
        return 1.0 if servers == 0 else 0.0
    lost = 1.0
    for number in range(1, int(servers) + 1):
        lost = load * lost / (number + load * lost)
    return lost


def erlang_c(load: float, servers: int) -> float:
    """Share of arrivals that must wait (M/M/c): c B / (c - a (1 - B)).

    Erlang 1917. Raises InvalidArgument; UndefinedEstimate where the load is not below the servers.
    """
    lost = erlang_b(load, servers)
    _refuse_growing(load, servers)
    return servers * lost / (servers - load * (1.0 - lost))


def many_servers_queue(arrival_rate: float, mean_service: float, servers: int) -> QueueFigures:
    """M/M/c: Poisson arrivals, exponential service. Gross & Harris 1998, Fundamentals of Queueing Theory, ch. 2."""
    load = _load(arrival_rate, mean_service)
    must_wait = erlang_c(load, servers)
    waiting = must_wait * load / (servers - load)
    # where hardly anybody waits the number present is Poisson
    empty = math.exp(math.log(must_wait) - _log_tail(load, servers)) if must_wait > 0 else math.exp(-load)
    return _figures(arrival_rate, mean_service, servers, empty, must_wait, waiting)


def single_server_queue(arrival_rate: float, mean_service: float, service_deviation: float) -> QueueFigures:
    """M/G/1: waiting = rate^2 E(S^2) / (2 (1 - load)), whatever the distribution of service S.

    service_deviation: standard deviation of S, 0 where every job takes the same. Pollaczek 1930; Khinchine 1932.
    Raises InvalidArgument; UndefinedEstimate where the load is not below 1.
    """
    load = _load(arrival_rate, mean_service)
    if not (math.isfinite(service_deviation) and service_deviation >= 0):
        raise InvalidArgument(f"The spread of service is {service_deviation:g}; it must be finite and at least 0.")
    _refuse_growing(load, 1)
    second = mean_service**2 + service_deviation**2
    return _figures(arrival_rate, mean_service, 1, 1.0 - load, load, arrival_rate**2 * second / (2.0 * (1.0 - load)))


@dataclass(frozen=True, eq=False)
class FiniteSource:
    """probabilities: of 0, 1 ... machines being down, (machines + spares + 1,). present: mean number down (in repair or
    waiting for it); waiting: of those waiting; running: mean number at work; failure_rate: failures a unit of time;
    stay, wait: mean time down, and waiting for a repairer; idle: share of the repairers' time free; no_spare: share of
    time in which fewer machines run than should.
    """

    probabilities: FloatArray
    present: float
    waiting: float
    running: float
    failure_rate: float
    stay: float
    wait: float
    idle: float
    no_spare: float


def finite_source_queue(
    machines: int, servers: int, running_time: float, repair_time: float, *, spares: int = 0
) -> FiniteSource:
    """Machine repair: `machines` should run, each for an exponential running_time on average; spares take their places.

    Chances by balance: p(n+1) / p(n) = min(machines, machines + spares - n) / running_time x repair_time /
    min(n + 1, servers). Gross & Harris 1998, section 2.7. Raises InvalidArgument.
    """
    _refuse_whole(machines, "number of machines", 1, MOST_MACHINES)
    _refuse_whole(spares, "number of spares", 0, MOST_MACHINES)
    _refuse_whole(servers, "number of repairers", 1, MOST_SERVERS)
    for value, name in ((running_time, "mean running time"), (repair_time, "mean repair time")):
        if not (math.isfinite(value) and value > 0):
            raise InvalidArgument(f"The {name} is {value:g}; it must be finite and above 0.")
    down = np.arange(machines + spares + 1)
    running = np.minimum(machines, machines + spares - down)
    repairing = np.minimum(down, servers)
    logs = np.log(running[:-1] / running_time) - np.log(repairing[1:] / repair_time)
    height = np.concatenate([[0.0], np.cumsum(logs)])
    chances = np.exp(height - height.max())
    chances /= chances.sum()
    mean_running, mean_down = float(chances @ running), float(chances @ down)
    waiting = float(chances @ (down - repairing))
    rate = mean_running / running_time
    return FiniteSource(
        probabilities=chances,
        present=mean_down,
        waiting=waiting,
        running=mean_running,
        failure_rate=rate,
        stay=mean_down / rate,
        wait=waiting / rate,
        idle=float(chances @ (servers - repairing)) / servers,
        no_spare=float(chances[running < machines].sum()),
    )


def _figures(
    arrival_rate: float, mean_service: float, servers: int, empty: float, must_wait: float, waiting: float
) -> QueueFigures:
    load = arrival_rate * mean_service
    wait = waiting / arrival_rate if arrival_rate > 0 else 0.0
    return QueueFigures(
        utilisation=load / servers,
        empty=empty,
        must_wait=must_wait,
        waiting=waiting,
        present=waiting + load,
        wait=wait,
        stay=wait + mean_service,
    )


def _log_tail(load: float, servers: int) -> float:
    """log of a^c / c! x c / (c - a), which is must_wait / empty."""
    return servers * math.log(load) - math.lgamma(servers + 1.0) + math.log(servers / (servers - load))


def _load(arrival_rate: float, mean_service: float) -> float:
    for value, name in ((arrival_rate, "arrival rate"), (mean_service, "mean service")):
        if not (math.isfinite(value) and value >= 0):
            raise InvalidArgument(f"The {name} is {value:g}; it must be finite and at least 0.")
    return arrival_rate * mean_service


def _refuse_load(load: float) -> None:
    if not (math.isfinite(load) and load >= 0):
        raise InvalidArgument(f"The load is {load:g}; it must be finite and at least 0.")


def _refuse_growing(load: float, servers: int) -> None:
    if load >= servers:
        raise UndefinedEstimate(
            f"{load:.4g} servers' worth of work comes in and {servers} serve: the queue grows for ever. "
            "Add servers, or simulate the weeks you care about."
        )


def _refuse_whole(value: float, name: str, least: int, most: int) -> None:
    if not math.isfinite(value) or value != int(value) or not least <= value <= most:
        raise InvalidArgument(f"The {name} is {value:g}; it must be a whole number from {least} to {most:,}.")
