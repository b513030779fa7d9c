"""The demo's catalogue: brush carriages that keep water-intake screens clear. Everything here is invented."""

from __future__ import annotations

from dataclasses import dataclass

Row = dict[str, object]


@dataclass(frozen=True)
class Design:
    """A part and how long it lives here: Weibull on its component's clock, in clean water."""

    part: str
    shape: float
    scale: float
    sand: float = 1.0  # life in sandy water as a share of that in clean water


CAUTIONS = (
    "Isolate the drive and lock it out before you open the guard. The lead screw is under tension: release it "
    "by the sheet, never by the nut. Water may be deep, cold or fast: wear a life jacket and never work alone "
    "at an open intake; chambers are confined spaces. The brush motor starts without warning when power comes "
    "back. Taking a carriage out may break the intake's operating permit: ask the site first. The site's own "
    "rules and local codes come first; electrical work is for licensed persons."
)

COMPONENTS: list[Row] = [
    {"component": "NUT", "name": "drive nut", "clock": "strokes"},
    {"component": "SCREW", "name": "lead screw", "clock": "strokes"},
    {"component": "LOWBRG", "name": "lower bearing", "clock": "days"},
    {"component": "UPBRG", "name": "upper bearing", "clock": "days"},
    {"component": "SEAL", "name": "shaft seal", "clock": "days"},
    {"component": "ROLLER", "name": "carriage roller", "clock": "strokes"},
    {"component": "COUPL", "name": "coupling", "clock": "days"},
]

# component, mode, name, mechanism, cause, goes to bench, share of failures
MODES: list[tuple[str, str, str, str, str, bool, float]] = [
    ("NUT", "WORN", "thread worn out", "wear", "sand and strokes", False, 0.78),
    ("NUT", "STRIPPED", "thread stripped", "overload", "jammed brush", False, 0.17),
    ("NUT", "FITTED-WRONG", "fitted wrongly", "misalignment", "fitting fault", False, 0.0),
    ("NUT", "CRACKED", "flange cracked", "fatigue", "loose bolts", False, 0.05),
    ("SCREW", "WORN", "thread worn out", "wear", "sand and strokes", False, 0.8),
    ("SCREW", "BOWED", "screw bowed", "bending", "debris under the brush", True, 0.0),
    ("SCREW", "CORRODED", "pitted by corrosion", "corrosion", "salt water", False, 0.2),
    ("LOWBRG", "SEIZED", "bearing seized", "wear", "water past the seal", True, 0.7),
    ("LOWBRG", "LOOSE", "play beyond limit", "wear", "sand", True, 0.3),
    ("UPBRG", "SEIZED", "bearing seized", "wear", "not known", True, 1.0),
    ("SEAL", "INGRESS", "water ingress", "leakage", "lip worn", True, 0.8),
    ("SEAL", "HARDENED", "lip hardened", "ageing", "heat", True, 0.2),
    ("ROLLER", "FLAT", "flat worn", "wear", "strokes", False, 0.75),
    ("ROLLER", "SPLIT", "tyre split", "fatigue", "overload", False, 0.25),
    ("COUPL", "CRACKED", "spider cracked", "brittle fracture", "cold", False, 1.0),
]

TYPES: list[Row] = [
    {"type": "BC20", "name": "brush carriage, 2 m", "cautions": CAUTIONS},
    {"type": "BC36", "name": "brush carriage, 3.6 m", "cautions": CAUTIONS},
]

POSITIONS: list[tuple[str, str]] = [
    ("NUT", "NUT"),
    ("SCREW", "SCREW"),
    ("LOWER", "LOWBRG"),
    ("UPPER", "UPBRG"),
    ("SEAL", "SEAL"),
    ("ROLL-1", "ROLLER"),
    ("ROLL-2", "ROLLER"),
    ("ROLL-3", "ROLLER"),
    ("COUPLING", "COUPL"),
]

DESIGNS: dict[str, Design] = {
    "DN-1": Design("DN-1", 2.1, 52_000, sand=0.45),
    "DN-2": Design("DN-2", 2.4, 66_000, sand=0.5),
    "DN-3": Design("DN-3", 2.5, 92_000, sand=0.78),
    "LS-1": Design("LS-1", 2.8, 380_000, sand=0.7),
    "LS-2": Design("LS-2", 3.0, 520_000, sand=0.75),
    "LB-1": Design("LB-1", 1.7, 2_600, sand=0.8),
    "UB-1": Design("UB-1", 2.0, 1e9),
    "SS-1": Design("SS-1", 1.9, 640),
    "SS-2": Design("SS-2", 2.0, 900),
    "CR-1": Design("CR-1", 2.4, 340_000, sand=0.85),
    "CP-1": Design("CP-1", 1.8, 3_400),
}
BAD_LOT, BAD_LOT_SHARE_OF_LIFE = "S-2407", 0.22


def part(code: str, component: str, name: str, cost: float, lead: int, pack: int, **more: object) -> Row:
    row: Row = {
        "part": code,
        "component": component,
        "revision": code[-1],
        "name": name,
        "state": "current",
        "supplier": "Pebblebrook Works",
        "unit_cost": cost,
        "lead_time_days": lead,
        "pack": pack,
        "minimum": pack,
    }
    return row | more


PARTS: list[Row] = [
    part("DN-1", "NUT", "drive nut, cast", 31.5, 28, 5, state="ended", minimum=0),
    part("DN-2", "NUT", "drive nut, long thread", 38.0, 28, 5, supersedes="DN-1", minimum=20),
    part("DN-3", "NUT", "drive nut with wiper lip", 44.0, 35, 5, supersedes="DN-2", minimum=40),
    part("LS-1", "SCREW", "lead screw", 212.0, 56, 1, state="ended", minimum=0),
    part("LS-2", "SCREW", "lead screw, hardened", 248.0, 56, 1, supersedes="LS-1", minimum=8),
    part("LB-1", "LOWBRG", "lower thrust bearing", 64.0, 42, 2, supplier="Quill & Anvil", minimum=10),
    part("UB-1", "UPBRG", "upper bearing", 41.0, 42, 2, supplier="Quill & Anvil", minimum=2),
    part("SS-1", "SEAL", "shaft seal", 17.5, 21, 10, supplier="Tidewrack Seals", state="ended", minimum=0),
    part(
        "SS-2",
        "SEAL",
        "shaft seal, double lip",
        22.0,
        21,
        10,
        supplier="Tidewrack Seals",
        supersedes="SS-1",
        minimum=20,
    ),
    part("CR-1", "ROLLER", "carriage roller", 12.8, 14, 10, minimum=40),
    part("CP-1", "COUPL", "jaw coupling", 27.0, 14, 2, supplier="Quill & Anvil", minimum=8),
]


def rows() -> dict[str, list[Row]]:
    """The catalogue as records files."""
    return {
        "components": COMPONENTS,
        "modes": [
            {
                "component": component,
                "mode": mode,
                "name": name,
                "mechanism": mechanism,
                "cause": cause,
                "goes_to_bench": "yes" if bench else "no",
            }
            for component, mode, name, mechanism, cause, bench, _ in MODES
        ],
        "types": TYPES,
        "positions": [
            {"type": kind, "position": position, "component": component, "order": order}
            for kind in ("BC20", "BC36")
            for order, (position, component) in enumerate(POSITIONS, start=1)
            if not (kind == "BC20" and position == "ROLL-3")
        ],
        "parts": PARTS,
    }
