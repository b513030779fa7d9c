"""A module's life lines as one SVG: a strip a position, a bar a fitting, the counter beneath. No records here.

Days are ordinal day numbers, as in the clocks. The drawing holds no colours: classes of the style sheet give
them, so that it follows light, dark and paper.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from itertools import pairwise

from django.utils.html import escape
from django.utils.safestring import SafeString, mark_safe

from fleet.formats import MONTHS, number
from fleet.part_styles import part_style

FAILED, WITHDRAWN, RUNNING, CUT = "failed", "withdrawn", "running", "cut"
ROOM_FOR_MARK = 26  # a bar shorter than this shows no marker: both its ends would be hidden
MOST_COUNTER_POINTS = 240


@dataclass(frozen=True)
class Bar:
    """One fitting, or what of it may be seen. `words` tells the whole of it to who points at it or reads it aloud."""

    start: float
    end: float
    rank: int
    ending: str  # failed, withdrawn, running, or cut where the drawing ends before the stay
    code: str
    words: str
    open_start: bool = False  # nobody knows since when, or it began out of sight
    failed_at: float | None = None  # where that was before it came out


@dataclass(frozen=True)
class Strip:
    name: str
    bars: list[Bar]


@dataclass(frozen=True)
class Shade:
    """A stretch in which the parts did not age: a stop, or a stay at a depot."""

    kind: str  # stop or away
    start: float
    end: float
    words: str


@dataclass(frozen=True)
class LifeHistory:
    tag: str
    first: float
    last: float
    strips: list[Strip]
    shades: list[Shade] = field(default_factory=list)
    visits: list[tuple[float, str]] = field(default_factory=list)
    counter: list[list[tuple[float, float]]] = field(default_factory=list)  # stretches of (day, value)
    counter_words: str = "strokes"

    def since(self, day: float) -> LifeHistory:
        """The same without what lies before a day."""
        if day <= self.first:
            return self
        strips = [Strip(strip.name, [cut(bar, day) for bar in strip.bars if bar.end > day]) for strip in self.strips]
        return replace(
            self,
            first=day,
            strips=strips,
            shades=[replace(shade, start=max(shade.start, day)) for shade in self.shades if shade.end > day],
            visits=[visit for visit in self.visits if visit[0] >= day],
            counter=[[point for point in stretch if point[0] >= day] for stretch in self.counter],
        )


def cut(bar: Bar, day: float) -> Bar:
    return bar if bar.start >= day else replace(bar, start=day, open_start=True)


@dataclass(frozen=True)
class Layout:
    """Measures in the drawing's own units, which are pixels at its natural size."""

    css: str
    width: float
    left: float
    right: float
    pitch: float
    top: float
    names_above: bool
    quarters_up_to: float  # years of span that still carry labels of quarters
    quarter_lines_up_to: float
    counter_height: float


WIDE = Layout("lifelines", 1080, 150, 60, 40, 26, False, 4.5, 8, 64)
NARROW = Layout("lifelines-narrow", 358, 4, 44, 46, 30, True, 1.2, 3.5, 54)


def life_lines(history: LifeHistory, layout: Layout = WIDE) -> SafeString:
    """The whole drawing; every text in it is escaped here."""
    drawing = Drawing(history, layout)
    return mark_safe("".join(drawing.parts()))


class Drawing:
    def __init__(self, history: LifeHistory, layout: Layout) -> None:
        self.history, self.layout = history, layout
        longest = max((len(strip.name) for strip in history.strips), default=0)
        self.left = layout.left if layout.names_above else min(230.0, max(90.0, 8.0 * longest + 18))
        self.right = layout.width - layout.right
        self.span = max(history.last - history.first, 1.0)
        self.strips_end = layout.top + layout.pitch * len(history.strips) - layout.pitch / 2 + 8
        self.visits_y = self.strips_end + (22 if layout.names_above else 12)
        self.counter_top = self.visits_y + (30 if layout.names_above else 18)
        has_counter = any(len(stretch) > 1 for stretch in history.counter)
        self.axis_y = self.counter_top + layout.counter_height if has_counter else self.visits_y + 12
        self.has_counter = has_counter
        self.height = self.axis_y + 20

    def x(self, day: float) -> float:
        inside = min(max(day, self.history.first), self.history.last)
        return self.left + (inside - self.history.first) / self.span * (self.right - self.left)

    @property
    def ends(self) -> tuple[float, float]:
        return self.history.first, self.history.last

    def y(self, strip: int) -> float:
        return self.layout.top + self.layout.pitch * strip

    def parts(self) -> Iterator[str]:
        label = f"Life lines of module {self.history.tag}: {len(self.history.strips)} positions, {self.years()}"
        yield (
            f'<svg class="{self.layout.css}" viewBox="0 0 {self.layout.width:g} {self.height:.0f}" '
            f'width="{self.layout.width:g}" height="{self.height:.0f}" role="img" aria-label="{escape(label)}">'
        )
        yield from self.shades()
        yield from self.time_axis()
        for index, strip in enumerate(self.history.strips):
            yield from self.strip(strip, self.y(index))
        yield from self.visits()
        if self.has_counter:
            yield from self.counter()
        yield "</svg>"

    def years(self) -> str:
        first, last = (dt.date.fromordinal(int(day)) for day in (self.history.first, self.history.last))
        return f"from {MONTHS[first.month - 1]} {first.year} to {MONTHS[last.month - 1]} {last.year}"

    def shades(self) -> Iterator[str]:
        top = 4.0
        for shade in sorted(self.history.shades, key=lambda shade: shade.kind):
            start, end = self.x(shade.start), self.x(shade.end)
            width = max(end - start, 2.0)
            yield (
                f'<rect class="{shade.kind}" x="{start:.1f}" y="{top:.1f}" width="{width:.1f}" '
                f'height="{self.strips_end - top:.1f}"><title>{escape(shade.words)}</title></rect>'
            )

    def time_axis(self) -> Iterator[str]:
        years = self.span / 365.25
        taken = -100.0
        begin = dt.date.fromordinal(int(self.history.first))
        first_year = next((self.x(tick.day) for tick in ticks(*self.ends) if tick.kind == "yr"), self.layout.width)
        if first_year - self.left > 44:
            yield f'<text class="ax" x="{self.left + 3:.1f}" y="{self.axis_y + 14:.1f}">{begin.year}</text>'
            taken = self.left + 6
        for tick in ticks(*self.ends):
            if tick.kind == "qt" and years > self.layout.quarter_lines_up_to:
                continue
            if tick.kind == "mo" and years > 0.45:
                continue
            x = self.x(tick.day)
            css = "yr" if tick.kind == "yr" else "qt"
            yield f'<line class="{css}" x1="{x:.1f}" x2="{x:.1f}" y1="4" y2="{self.axis_y:.1f}"/>'
            named = tick.kind == "yr" or years <= self.layout.quarters_up_to
            room = 34 if tick.kind == "yr" else 30
            if named and x - taken >= room and x <= self.layout.width - room:
                yield f'<text class="ax" x="{x + 3:.1f}" y="{self.axis_y + 14:.1f}">{tick.words}</text>'
                taken = x

    def strip(self, strip: Strip, y: float) -> Iterator[str]:
        if self.layout.names_above:
            where = f'x="{self.left:.1f}" y="{y - 12:.1f}"'
        else:
            where = f'x="{self.left - 14:.1f}" y="{y + 5:.1f}" text-anchor="end"'
        yield f'<text class="pos" {where}>{escape(strip.name)}</text>'
        yield f'<line class="rail" x1="{self.left:.1f}" x2="{self.right:.1f}" y1="{y:.1f}" y2="{y:.1f}"/>'
        for bar in strip.bars:
            yield from self.bar(bar, y)
        for bar in strip.bars:
            yield from self.ending(bar, y)

    def bar(self, bar: Bar, y: float) -> Iterator[str]:
        style = part_style(bar.rank)
        start, end = self.x(bar.start), self.x(bar.end)
        failed = self.x(bar.failed_at) if bar.failed_at is not None else end
        gap = 0.8 if end - start > 4 else 0.0
        yield f"<g><title>{escape(bar.words)}</title>"
        begin = start + (0.0 if bar.open_start else gap)
        stop = max(failed - gap, begin + 0.6)
        yield f'<line class="fit {style.css}" x1="{begin:.1f}" x2="{stop:.1f}" y1="{y:.1f}" y2="{y:.1f}"/>'
        if end - failed > 1.5:
            yield f'<line class="fit thin {style.css}" x1="{failed:.1f}" x2="{end:.1f}" y1="{y:.1f}" y2="{y:.1f}"/>'
        if bar.open_start:
            yield f'<path class="open-start" d="M{start + 5:.1f},{y - 7:.1f}l-5,7l5,7"/>'
        if failed - start >= ROOM_FOR_MARK:
            middle = (start + failed) / 2
            yield f'<path class="mark {style.css}" transform="translate({middle:.1f},{y:.1f})" d="{style.path}"/>'
        yield "</g>"

    def ending(self, bar: Bar, y: float) -> Iterator[str]:
        style = part_style(bar.rank)
        end = self.x(bar.end)
        if bar.ending == FAILED:
            at = self.x(bar.failed_at) if bar.failed_at is not None else end
            yield (
                f'<g class="fail" transform="translate({at:.1f},{y:.1f})"><line x1="-5" y1="-5" x2="5" y2="5"/>'
                '<line x1="5" y1="-5" x2="-5" y2="5"/></g>'
            )
        elif bar.ending == WITHDRAWN:
            yield f'<circle class="wd" cx="{end:.1f}" cy="{y:.1f}" r="4.5"/>'
        elif bar.ending == RUNNING:
            yield f'<path class="run {style.css}" d="M{end:.1f},{y - 6:.1f}l10,6l-10,6z"/>'
            yield f'<text class="code" x="{end + 13:.1f}" y="{y + 4.5:.1f}">{escape(bar.code[:8])}</text>'

    def visits(self) -> Iterator[str]:
        if not self.history.visits:
            return
        y = self.visits_y
        yield self.side_label("visits", y)
        for day, words in self.history.visits:
            x = self.x(day)
            line = f'<line class="visit" x1="{x:.1f}" x2="{x:.1f}" y1="{y - 5:.1f}" y2="{y + 5:.1f}">'
            yield f"{line}<title>{escape(words)}</title></line>"

    def side_label(self, words: str, y: float) -> str:
        if self.layout.names_above:
            return f'<text class="ax" x="{self.left:.1f}" y="{y - 9:.1f}">{escape(words)}</text>'
        return f'<text class="ax" x="{self.left - 14:.1f}" y="{y + 4:.1f}" text-anchor="end">{escape(words)}</text>'

    def counter(self) -> Iterator[str]:
        """On an axis of its own from nought to the highest value seen."""
        most = max(value for stretch in self.history.counter for _, value in stretch) or 1.0
        foot, height = self.axis_y - 4, self.layout.counter_height - 14
        yield f'<line class="rail" x1="{self.left:.1f}" x2="{self.right:.1f}" y1="{foot:.1f}" y2="{foot:.1f}"/>'
        yield self.side_label(
            self.history.counter_words, self.counter_top + 14 if self.layout.names_above else foot - 8
        )
        for stretch in self.history.counter:
            if len(stretch) > 1:
                points = " ".join(
                    f"{self.x(day):.1f},{foot - value / most * height:.1f}" for day, value in thinned(stretch)
                )
                yield f'<polyline class="counter" points="{points}"/>'
        last_day, last = self.history.counter[-1][-1] if self.history.counter[-1] else (self.history.last, most)
        y = foot - last / most * height
        if self.layout.names_above:
            where = f'x="{self.layout.width - 2:g}" y="{y - 8:.1f}" text-anchor="end"'
        else:
            where = f'x="{self.x(last_day) + 4:.1f}" y="{y + 4:.1f}"'
        yield f'<text class="code" {where}>{escape(short(last))}</text>'


@dataclass(frozen=True)
class Tick:
    day: float
    kind: str  # yr, qt, mo
    words: str


def ticks(first: float, last: float) -> Iterator[Tick]:
    """Firsts of months within the span; a year's first carries the year, a quarter's its number."""
    day = dt.date.fromordinal(int(first)).replace(day=1)
    if day.toordinal() < first:
        day = next_month(day)
    while day.toordinal() <= last:
        if day.month == 1:
            yield Tick(day.toordinal(), "yr", str(day.year))
        elif day.month in (4, 7, 10):
            yield Tick(day.toordinal(), "qt", f"Q{day.month // 3 + 1}")
        else:
            yield Tick(day.toordinal(), "mo", MONTHS[day.month - 1][:3])
        day = next_month(day)


def next_month(day: dt.date) -> dt.date:
    return day.replace(year=day.year + 1, month=1) if day.month == 12 else day.replace(month=day.month + 1)


def thinned(points: list[tuple[float, float]]) -> Iterable[tuple[float, float]]:
    """At most so many points that no eye misses one; flat and steep stretches keep their ends."""
    kept = [points[0]]
    least = (points[-1][0] - points[0][0]) / MOST_COUNTER_POINTS
    for before, point in pairwise(points):
        if point[0] - kept[-1][0] >= least:
            if before is not kept[-1] and before[0] > kept[-1][0] + least / 2:
                kept.append(before)
            kept.append(point)
    if kept[-1] is not points[-1]:
        kept.append(points[-1])
    return kept


def short(value: float) -> str:
    """1 102 700 as 1.10 M where room is short."""
    return f"{value / 1e6:.2f} M" if value >= 1e6 else number(round(value))
