"""The tokens of the style sheet as numbers: contrast, and how colours look to people who see fewer of them."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parents[2]
TOKENS = ROOT / "static" / "look" / "tokens.css"

# W3C, Web Content Accessibility Guidelines 2.2, definition of relative luminance.
LUMINANCE = np.array([0.2126, 0.7152, 0.0722])
# Machado, Oliveira and Fernandes (2009), IEEE Transactions on Visualization and Computer Graphics 15(6),
# table of matrices for severity 1.0, applied to linear RGB (values from memory).
SIGHT = {
    "usual": np.eye(3),
    "without red": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
    "without green": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
    "without blue": np.array(
        [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]]
    ),
}
# Ottosson (2020), "A perceptual color space for image processing": linear RGB to OKLab (values from memory).
TO_CONES = np.array(
    [
        [0.4122214708, 0.5363325363, 0.0514459929],
        [0.2119034982, 0.6806995451, 0.1073969566],
        [0.0883024619, 0.2817188376, 0.6299787005],
    ]
)
TO_LAB = np.array(
    [
        [0.2104542553, 0.7936177850, -0.0040720468],
        [1.9779984951, -2.4285922050, 0.4505937099],
        [0.0259040371, 0.7827717662, -0.8086757660],
    ]
)


def blocks() -> dict[str, dict[str, str]]:
    """The colour tokens by the selector that sets them."""
    text = re.sub(r"/\*.*?\*/", "", TOKENS.read_text(encoding="utf-8"), flags=re.DOTALL)
    found = {}
    for selector, body in re.findall(r"(:root[^{]*?)\s*\{([^{}]*)\}", text):
        tokens = dict(re.findall(r"--([\w-]+):\s*([^;]+);", body))
        if "paper" in tokens:
            found[selector] = {name: value for name, value in tokens.items() if value.startswith(("#", "rgb"))}
    return found


def linear(colour: str) -> np.ndarray:
    """Linear RGB, shape (3,), of a colour written as #rrggbb."""
    parts = np.array([int(colour[place : place + 2], 16) for place in (1, 3, 5)]) / 255
    return np.where(parts <= 0.04045, parts / 12.92, ((parts + 0.055) / 1.055) ** 2.4)


def contrast(one: str, other: str) -> float:
    """WCAG contrast ratio, from 1 to 21."""
    low, high = sorted(float(LUMINANCE @ linear(colour)) for colour in (one, other))
    return (high + 0.05) / (low + 0.05)


def apart(one: str, other: str, sight: str) -> float:
    """Distance in OKLab as seen with that sight; about 0.02 is just noticeable."""
    seen = [TO_LAB @ np.cbrt(TO_CONES @ np.clip(SIGHT[sight] @ linear(colour), 0, 1)) for colour in (one, other)]
    return float(np.linalg.norm(seen[0] - seen[1]))
