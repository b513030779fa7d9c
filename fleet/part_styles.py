"""Colour, dash and marker shape of a part, the same in life lines, charts and keys: never told by colour alone."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class PartStyle:
    """One of eight: `css` is the class of life lines, the rest are Plotly's words for the same look."""

    css: str
    dash: str
    symbol: str
    path: str  # the marker as an SVG path about 0,0

    @property
    def color(self) -> str:
        """Resolved by the chart script against the theme in force."""
        return f"var(--{self.css})"

    @property
    def wash(self) -> str:
        """The same colour, thin enough to lie under a curve as its band."""
        return f"var(--{self.css}-wash)"


PART_STYLES = (
    PartStyle("p1", "3px,2px", "circle", "M-4.5,0a4.5,4.5 0 1,0 9,0a4.5,4.5 0 1,0 -9,0z"),
    PartStyle("p2", "11px,3px", "square", "M-4,-4h8v8h-8z"),
    PartStyle("p3", "solid", "triangle-up", "M0,-5l5,9h-10z"),
    PartStyle("p4", "11px,3px,3px,3px", "diamond", "M0,-5.5l5.5,5.5l-5.5,5.5l-5.5,-5.5z"),
    PartStyle("p5", "5px,4px", "triangle-down", "M0,5l5,-9h-10z"),
    PartStyle("p6", "20px,4px", "hourglass", "M-4.5,-4.5h9l-9,9h9z"),
    PartStyle("p7", "11px,3px,3px,3px,3px,3px", "hexagon", "M-5,0l2.5,-4.4h5l2.5,4.4l-2.5,4.4h-5z"),
    PartStyle("p8", "2px,5px", "cross", "M-1.6,-5h3.2v3.4h3.4v3.2h-3.4v3.4h-3.2v-3.4h-3.4v-3.2h3.4z"),
)


def part_style(rank: int) -> PartStyle:
    """The style of a component's rank-th part, counted from 0 in order of revision; the ninth begins again."""
    return PART_STYLES[rank % len(PART_STYLES)]
