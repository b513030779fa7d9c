"""Past forecasts as bands with what happened as a mark on each: the document of `reliability.forecasts.backtest`."""

from __future__ import annotations

import datetime as dt
from typing import Any

Figure = dict[str, Any]
BANDS = [("0.95", "fan-95", 0.62), ("0.8", "fan-80", 0.62), ("0.5", "fan-50", 0.62)]  # widest below


def backtest_figure(summed: dict[str, Any], title: str) -> Figure:
    """One column a quarter: bands of 50, 80 and 95 in 100, the expected count as a line, the actual one as a mark."""
    rows = summed["quarters"]
    names = [quarter_name(row["from"]) for row in rows]
    data: list[dict[str, Any]] = [
        band_bars(names, rows, band, wash, width)
        for band, wash, width in BANDS
        if all(band in row["bands"] for row in rows)
    ]
    data.append(
        {
            "type": "scatter",
            "mode": "markers",
            "name": "expected",
            "x": names,
            "y": [row["hoped"] for row in rows],
            "marker": {"symbol": "line-ew-open", "size": 18, "color": "var(--blue)", "line": {"width": 2.2}},
            "hovertemplate": "%{x}: %{y:.1f} expected<extra></extra>",
        }
    )
    data.append(
        {
            "type": "scatter",
            "mode": "markers",
            "name": "happened",
            "x": names,
            "y": [row["actual"] for row in rows],
            "marker": {"symbol": "x", "size": 10, "color": "var(--red)"},
            "hovertemplate": "%{x}: %{y} happened<extra></extra>",
        }
    )
    layout = {
        "xaxis": {
            "type": "category",
            "tickvals": names,
            "ticktext": [short_name(row["from"]) for row in rows],
            "tickangle": 0,
        },
        "yaxis": {"title": f"{title} in 13 weeks", "rangemode": "tozero"},
        "barmode": "overlay",
        "showlegend": True,
    }
    return {"data": data, "layout": layout}


def band_bars(names: list[str], rows: list[dict[str, Any]], band: str, wash: str, width: float) -> dict[str, Any]:
    """Floating bars; a band of one value still shows as a thin line."""
    lows = [row["bands"][band][0] - 0.5 for row in rows]
    highs = [row["bands"][band][1] + 0.5 for row in rows]
    return {
        "type": "bar",
        "name": f"{100 * float(band):.0f} in 100",
        "x": names,
        "base": [max(0.0, low) for low in lows],
        "y": [high - max(0.0, low) for low, high in zip(lows, highs, strict=True)],
        "width": width,
        "marker": {"color": f"var(--{wash})", "line": {"width": 0}},
        "customdata": [row["bands"][band] for row in rows],
        "hovertemplate": "%{x}: %{customdata[0]} to %{customdata[1]}<extra>"
        + f"{100 * float(band):.0f} in 100</extra>",
    }


def quarter_name(begin: str) -> str:
    """`Jan–Mar 2026` from the quarter's first Monday."""
    day = dt.date.fromisoformat(begin)
    first = (day.month - 1) // 3 * 3 + 1
    month = [dt.date(day.year, first + step, 1).strftime("%b") for step in (0, 2)]
    return f"{month[0]}–{month[1]} {day.year}"


def short_name(begin: str) -> str:
    """Two lines that fit below a column on a phone."""
    day = dt.date.fromisoformat(begin)
    return f"Q{(day.month + 2) // 3}<br>’{day.year % 100:02d}"
