"""Published data and values for the tests, read from tests/reference."""

from __future__ import annotations

import csv
import json
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

from reliability.stats.lifetimes import Lifetimes

FOLDER = Path(__file__).resolve().parent.parent / "reference"


@cache
def rows(name: str) -> tuple[dict[str, str], ...]:
    """The lines of a reference file."""
    with (FOLDER / f"{name}.csv").open(newline="", encoding="utf-8") as file:
        return tuple(csv.DictReader(file))


@cache
def check(identifier: str) -> dict[str, Any]:
    """One entry of estimator_checks.json."""
    with (FOLDER / "estimator_checks.json").open(encoding="utf-8") as file:
        return next(entry for entry in json.load(file)["entries"] if entry["id"] == identifier)


def column(lines: Any, name: str) -> np.ndarray:
    return np.array([float(line[name]) for line in lines])


def aml_maintained() -> Lifetimes:
    lines = [line for line in rows("aml") if line["x"] == "Maintained"]
    return Lifetimes(column(lines, "time"), column(lines, "status"))


def nist_units() -> Lifetimes:
    lines = rows("nist_8413_weibull")
    return Lifetimes(column(lines, "hours"), column(lines, "event"))


def shock_absorbers(mode: str | None = None) -> Lifetimes:
    lines = rows("shock_absorber")
    failed = column(lines, "event")
    if mode is not None:
        failed = np.array([float(line["mode"] == mode) for line in lines])
    return Lifetimes(column(lines, "km"), failed)


def bearing_cages() -> Lifetimes:
    lines = rows("bearing_cage")
    return Lifetimes(column(lines, "hours"), column(lines, "event"), weights=column(lines, "count"))


def turnbull_1974() -> Lifetimes:
    lines = [line for line in rows("turnbull1974") if float(line["n"]) > 0]
    status = column(lines, "status")
    last_good = np.where(status == 2, 0.0, np.nan)
    return Lifetimes(column(lines, "time"), status > 0, last_good=last_good, weights=column(lines, "n"))


def heat_exchanger(plant: str) -> Lifetimes:
    lines = [line for line in rows("heat_exchanger_intervals") if line["plant"] == plant]
    failed = np.array([line["right"] != "" for line in lines])
    ends = np.array([float(line["right"] or line["left"]) for line in lines])
    return Lifetimes(ends, failed, last_good=column(lines, "left"), weights=column(lines, "count"))


def turbine_wheels() -> Lifetimes:
    """Inspected once: found failed is (0, hours], found good is withdrawn at the hours."""
    lines = rows("turbine_wheel")
    hours, inspected, failed = (column(lines, name) for name in ("hours", "inspected", "failed"))
    ages = np.concatenate([hours, hours])
    counts = np.concatenate([failed, inspected - failed])
    found = np.repeat([True, False], hours.size)
    kept = counts > 0
    return Lifetimes(ages[kept], found[kept], last_good=np.zeros(int(kept.sum())), weights=counts[kept])


def channing(gender: str) -> Lifetimes:
    lines = [
        line
        for line in rows("km_channing")
        if line["gender"] == gender and float(line["ageentry"]) < float(line["age"])
    ]
    return Lifetimes(column(lines, "age"), column(lines, "death"), entries=column(lines, "ageentry"))
