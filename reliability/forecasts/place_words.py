"""Where to keep spares, in the sentences a planner reads."""

from __future__ import annotations

from fleet.formats import counted, number
from reliability.forecasts.stock_places import Better, Purchase, StockPlaces, Waiting

LONG_RUN = (
    "These are averages over the long run at today's pace of use, with one piece ordered for each that is used. "
    "They plan stock; the order list says what the coming weeks need."
)


def sentences(found: StockPlaces, currency: str) -> list[str]:
    """What stands still now, what money would buy, what moving would do."""
    told = [now(found), bought(found, currency), *(move(each) for each in found.moves[:3]), LONG_RUN]
    return [sentence for sentence in told if sentence]


def now(found: StockPlaces) -> str:
    return f"With the stock kept today {modules(found.now)} wait for a part at any time, on average."


def bought(found: StockPlaces, currency: str) -> str:
    """What the whole budget does, and the first thing to buy with it."""
    if not found.curve:
        return f"{number(found.budget, 0)} {currency} buy nothing that would help."
    first, last = found.curve[0], found.curve[-1]
    return (
        f"{number(last.money, 0)} {currency} more in the right places bring it to {modules(last.waiting)}. "
        f"First comes {purchase(first)}, for {number(first.cost, 0)} {currency}."
    )


def purchase(step: Purchase) -> str:
    """`1 lead screw for K-3`; where others move with it, that is said."""
    to = [f"{number(pieces)} to {place}" if step.pieces > 1 else place for place, pieces in step.changes if pieces > 0]
    away = [f"{number(-pieces)} from {place}" for place, pieces in step.changes if pieces < 0]
    told = f"{counted(step.pieces, step.name)}, kept at {' and '.join(to)}" if to else counted(step.pieces, step.name)
    return f"{told} ({' and '.join(away)} moved there)" if away else told


def move(better: Better) -> str:
    """What the same pieces would do elsewhere."""
    to = " and ".join(f"{number(pieces)} to {place}" for place, pieces in better.changes if pieces > 0)
    away = " and ".join(f"{number(-pieces)} from {place}" for place, pieces in better.changes if pieces < 0)
    return (
        f"{better.part}: moving {away}, {to}, would bring the modules that wait for it from {_about(better.before)} "
        f"to {_about(better.after)}, without buying any."
    )


def modules(waiting: Waiting) -> str:
    """`1.2 modules (80 of 100 cases: 0.8 to 1.7)`"""
    low, high = _about(waiting.lower), _about(waiting.upper)
    spread = "" if low == high else f" (80 of 100 cases: {low} to {high})"
    return f"{_about(waiting.mean)} modules{spread}"


def _about(value: float) -> str:
    return number(value, 0 if value >= 20 else 1 if value >= 1 else 2)
