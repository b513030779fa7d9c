"""What may import what."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from tests.layout.findings import (
    Finding,
    belongs_to,
    imported_modules,
    imports_when_read,
    package_of,
    python_files,
)

NUMERICAL = ("numpy", "scipy", "pandas", "lifelines", "plotly", "matplotlib")
SLOW_TO_IMPORT = ("scipy.stats", "lifelines", "pandas")
COMPUTING = ("scipy", "lifelines", "pandas", "django.db")
LOOKS = ("fleet.formats", "fleet.part_styles")  # how numbers are written and designs told apart, on every screen alike
WITHOUT_ROWS = ("fleet.models.codes.natural_key",)  # the order of codes, no record
# Screens, commands and forecasts may need records; what they know about lives comes from lifetimes_from_fleet.
MAY_READ_RECORDS = (
    "reliability/lifetimes_from_fleet.py",
    "reliability/life_question.py",  # turns the names of a question into records
    "reliability/lives_of_set.py",  # imported lives, which have no records behind them
    "reliability/histories_from_fleet.py",  # the order of failures in a position, and the duty of modules
    "reliability/running_parts.py",  # what runs now and how hard, for the forecast: ages, no lives
    "reliability/kept.py",  # asks for the version of the data, never for rows
    "reliability/views/",
    "reliability/forms/",
    "reliability/api/",
    "reliability/forecasts/",
    "reliability/redesigns/",
    "reliability/management/",
    "reliability/models",
    "reliability/migrations/",
)


def fleet_knows_no_reliability(root: Path) -> Iterator[Finding]:
    for name, tree in python_files(root, "fleet"):
        for module, line in imported_modules(tree, package_of(name)):
            if belongs_to(module, "reliability"):
                yield Finding(
                    name, line, f"imports {module}; records never import estimates: move this code into reliability/"
                )


def stats_stand_alone(root: Path) -> Iterator[Finding]:
    """Estimators know no Django, no records, no files, no clock and no chance but what they are given."""
    outside = ("django", "fleet", "config", "tests", "os", "io", "pathlib", "time", "datetime", "random", "plotly")
    for name, tree in python_files(root, "reliability/stats"):
        for module, line in imported_modules(tree, package_of(name)):
            if belongs_to(module, *outside):
                yield Finding(name, line, f"imports {module}; an estimator gets arrays and numbers as arguments")
            elif belongs_to(module, "reliability") and not belongs_to(module, "reliability.stats"):
                yield Finding(name, line, f"imports {module}; stats may import only stats: pass the values in")


def only_one_file_makes_life_data(root: Path) -> Iterator[Finding]:
    for name, tree in python_files(root, "reliability"):
        if name.startswith(MAY_READ_RECORDS):
            continue
        for module, line in imported_modules(tree, package_of(name)):
            if belongs_to(module, "fleet.models") and not belongs_to(module, *WITHOUT_ROWS):
                yield Finding(name, line, f"imports {module}; take the rows from reliability/lifetimes_from_fleet.py")


def charts_only_draw(root: Path) -> Iterator[Finding]:
    for name, tree in python_files(root, "reliability/charts"):
        for module, line in imported_modules(tree, package_of(name)):
            if belongs_to(module, *COMPUTING) or (belongs_to(module, "fleet") and not belongs_to(module, *LOOKS)):
                yield Finding(name, line, f"imports {module}; a chart draws a finished result: compute it in stats/")


def numbers_are_imported_late(root: Path) -> Iterator[Finding]:
    """They take seconds to read: at the top of a file only in stats/, and there only the quick ones."""
    for name, tree in python_files(root, "config", "fleet", "reliability"):
        in_stats = name.startswith("reliability/stats/")
        unwanted = SLOW_TO_IMPORT if in_stats else NUMERICAL
        # Charts and forecasts are themselves imported late, by the page that needs them.
        if name.startswith(("reliability/charts/", "reliability/forecasts/", "reliability/redesigns/")):
            unwanted = SLOW_TO_IMPORT
        for module, line in imports_when_read(tree):
            if belongs_to(module, *unwanted):
                yield Finding(name, line, f"imports {module} when the file is read; import it inside the function")


RULES = [
    fleet_knows_no_reliability,
    stats_stand_alone,
    only_one_file_makes_life_data,
    charts_only_draw,
    numbers_are_imported_late,
]
