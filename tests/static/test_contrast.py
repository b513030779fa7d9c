"""Every pair of ink and paper that the style sheets use can be read, in the light and in the dark."""

from __future__ import annotations

from itertools import combinations

import pytest

from tests.static.colours import SIGHT, apart, blocks, contrast

LIGHT = ":root"
BY_DEVICE = ':root:not([data-theme="light"])'
BY_CHOICE = ':root[data-theme="dark"]'
THEMES = {"light": blocks()[LIGHT], "dark": blocks()[BY_DEVICE]}
PARTS = [f"p{place}" for place in range(1, 9)]

# WCAG 2.2, 1.4.3: 4.5 for text. 1.4.11: 3 for what must be seen to understand or use a part of the page.
TEXT = [
    *[(ink, paper) for ink in ("ink", "soft", "blue", "red", "amber") for paper in ("paper", "sheet")],
    *[("ink", "hair"), ("soft", "hair"), ("blue", "hair"), ("amber", "hair"), ("red", "hair")],
    *[("ink", "blue-wash"), ("soft", "blue-wash"), ("blue", "blue-wash")],
    *[("ink", "amber-wash"), ("amber", "amber-wash"), ("soft", "amber-wash"), ("blue", "amber-wash")],
    ("paper", "blue"),
]
SIGNS = [(sign, paper) for sign in ("edge", *PARTS) for paper in ("paper", "sheet")]


def test_contrast_agrees_with_published_ends() -> None:
    """Black on white is 21 and grey #767676 the lightest that passes on white (W3C, Understanding 1.4.3)."""
    assert contrast("#000000", "#ffffff") == pytest.approx(21)
    assert contrast("#767676", "#ffffff") == pytest.approx(4.54, abs=0.005)


def test_the_dark_set_is_the_same_by_device_and_by_choice() -> None:
    assert blocks()[BY_DEVICE] == blocks()[BY_CHOICE]
    assert set(blocks()[LIGHT]) == set(blocks()[BY_DEVICE])


@pytest.mark.parametrize("theme", THEMES)
@pytest.mark.parametrize(("ink", "paper"), TEXT)
def test_text_can_be_read(theme: str, ink: str, paper: str) -> None:
    tokens = THEMES[theme]
    assert contrast(tokens[ink], tokens[paper]) >= 4.5


@pytest.mark.parametrize("theme", THEMES)
@pytest.mark.parametrize(("sign", "paper"), SIGNS)
def test_signs_can_be_seen(theme: str, sign: str, paper: str) -> None:
    tokens = THEMES[theme]
    assert contrast(tokens[sign], tokens[paper]) >= 3


@pytest.mark.parametrize("theme", THEMES)
@pytest.mark.parametrize("sight", SIGHT)
def test_parts_differ_for_every_sight(theme: str, sight: str) -> None:
    """Colour helps everybody a little; dash and marker shape carry it where two colours come close."""
    tokens = THEMES[theme]
    closest = min((apart(tokens[a], tokens[b], sight), a, b) for a, b in combinations(PARTS, 2))
    assert closest[0] >= 0.035, closest


@pytest.mark.parametrize("theme", THEMES)
def test_no_part_looks_like_a_failure(theme: str) -> None:
    tokens = THEMES[theme]
    assert min(apart(tokens[part], tokens["red"], "usual") for part in PARTS) >= 0.08


def test_the_sights_change_what_is_seen() -> None:
    """Red and green of one lightness come together without green, as they should."""
    assert apart("#b3261e", "#5f6b12", "without green") < 0.5 * apart("#b3261e", "#5f6b12", "usual")
