"""Numbers, days and intervals as people read them."""

from __future__ import annotations

import datetime as dt
import math
from decimal import Decimal

import pytest

from fleet import formats
from fleet.formats import FIXED


def plain(text: str) -> str:
    """The same text with ordinary spaces, so that the expectations can be read."""
    return text.replace(FIXED, " ")


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0, "0"),
        (61400, "61 400"),
        (1102700, "1 102 700"),
        (-4, "−4"),
        (0.6, "0.60"),
        (2.14, "2.14"),
        (12.34, "12.3"),
        (334.2, "334"),
        (147.0, "147"),
        (Decimal("6820.00"), "6 820"),
        (None, "not known"),
        (math.nan, "not known"),
        (math.inf, "no end"),
        (-0.001, "0.00"),
    ],
)
def test_number(value: formats.Number | None, text: str) -> None:
    assert plain(formats.number(value)) == text


def test_number_never_breaks_over_two_lines() -> None:
    assert " " not in formats.number(1102700)


def test_number_with_wanted_places() -> None:
    assert plain(formats.number(1234.567, 1)) == "1 234.6"
    assert plain(formats.number(3, 2)) == "3.00"


@pytest.mark.parametrize(
    ("share", "text"),
    [
        (0, "0 %"),
        (1, "100 %"),
        (0.22, "22 %"),
        (0.004, "under 1 %"),
        (0.997, "over 99 %"),
        (0.01, "1 %"),
        (None, "not known"),
    ],
)
def test_percent(share: float | None, text: str) -> None:
    """What is nearly never, or nearly always, is not written as never or always."""
    assert plain(formats.percent(share)) == text


def test_percent_with_wanted_places() -> None:
    assert plain(formats.percent(0.0004, 1)) == "under 0.1 %"
    assert plain(formats.percent(0.1234, 1)) == "12.3 %"


@pytest.mark.parametrize(
    ("value", "text"), [(61034, 61000), (70220, 70200), (999.6, 999.6), (12.34, 12.34), (0, 0), (-61034, -61000)]
)
def test_large_values_are_rounded_to_three_figures(value: float, text: float) -> None:
    assert formats.rounded(value) == text


@pytest.mark.parametrize(
    ("lower", "upper", "text"),
    [
        (14, 33, "14 to 33"),
        (14, math.inf, "over 14"),
        (None, 33, "under 33"),
        (-math.inf, 33, "under 33"),
        (None, None, ""),
        (math.nan, math.nan, ""),
    ],
)
def test_ends(lower: float | None, upper: float | None, text: str) -> None:
    assert formats.ends(lower, upper) == text


def test_ends_in_a_table() -> None:
    assert formats.ends(14, 33, dash=True) == "14–33"
    assert formats.interval("under 1 %", "3 %", dash=True) == "up to 3 %"
    assert formats.interval("under 1", "under 1") == "under 1"


def test_days() -> None:
    day = dt.date(2024, 1, 21)
    assert plain(formats.long_day(day)) == "21 January 2024"
    assert plain(formats.short_day(day, 2024)) == "21 Jan"
    assert plain(formats.short_day(day, 2026)) == "21 Jan 2024"
    assert formats.long_day(None) == formats.short_day(None) == "not known"


def test_moment() -> None:
    at = dt.datetime(2024, 1, 21, 14, 5, tzinfo=dt.UTC)
    assert plain(formats.moment(at)) == "21 January 2024, 14:05"


def test_counted() -> None:
    assert plain(formats.counted(1, "module")) == "1 module"
    assert plain(formats.counted(1204, "module")) == "1 204 modules"
    assert plain(formats.counted(2, "entry", "entries")) == "2 entries"
