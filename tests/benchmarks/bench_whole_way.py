"""Do the program's own bands hold, from files to forecast? Fleets whose truth is known are imported, then forecast.

python -m tests.benchmarks.bench_whole_way [--fleets 60] [--story NAME ...] [--rows FOLDER] [--seed 7]

bench_calibration tries the statistics alone and much faster; here visits, rules, paces, designs and ages are learned
from the records. The book is a throwaway SQLite file.
"""

from __future__ import annotations

import argparse
import datetime as dt
import io
import json
import os
import shutil
import tempfile
import zlib
from pathlib import Path

import numpy as np

from tests.benchmarks.bench_calibration import TITLE, Row, lines, scored
from tests.benchmarks.calibration_stories import QUARTER, STORIES, Outcome, Story, Teller

WEEKS = (1, 7, 13)


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--fleets", type=int, default=60)
    parser.add_argument("--story", action="append", choices=list(STORIES))
    parser.add_argument("--rows", type=Path, metavar="FOLDER", help="keep each fleet's row there, and go on from them")
    parser.add_argument("--seed", type=int, default=7)
    chosen = parser.parse_args()
    with tempfile.TemporaryDirectory(prefix="halfnut-bench-") as folder:
        os.environ |= {"HALFNUT_DATA": folder, "DJANGO_SETTINGS_MODULE": "config.settings", "HALFNUT_TESTING": "1"}
        world = World(Path(folder))
        print(TITLE, flush=True)
        for name in chosen.story or STORIES:
            rows = rows_of(world, name, chosen.fleets, chosen.seed, chosen.rows)
            print("\n".join(lines(name, rows)), flush=True)


def rows_of(world: World, name: str, fleets: int, seed: int, folder: Path | None) -> list[Row]:
    """Rows of the first so many fleets of a story, kept ones and new ones."""
    path = None if folder is None else folder / f"{name.replace(' ', '_')}_{seed}.jsonl"
    rows: list[Row] = []
    if path is not None and path.exists():
        rows = [json.loads(line) for line in path.read_text().splitlines()][:fleets]
    for number in range(len(rows), fleets):
        rows.append(world.row(STORIES[name], np.random.default_rng([seed, zlib.crc32(name.encode()), number])))
        if path is not None:
            path.parent.mkdir(parents=True, exist_ok=True)
            with path.open("a") as target:
                target.write(json.dumps(rows[-1]) + "\n")
    return rows


class World:
    """A book that is made empty again for each fleet."""

    def __init__(self, folder: Path) -> None:
        import django

        django.setup()
        from django.conf import settings
        from django.core.management import call_command
        from django.db import connection

        self.files, self.empty = folder / "files", folder / "empty.sqlite3"
        self.book = Path(settings.DATABASES["default"]["NAME"])
        call_command("migrate", verbosity=0, interactive=False)
        connection.close()
        shutil.copy(self.book, self.empty)

    def row(self, story: Story, rng: np.random.Generator) -> Row:
        """Told, imported, forecast and scored."""
        from django.utils import timezone

        as_of = timezone.localdate()
        outcome = Teller(story, rng, as_of).write(self.files)
        while not story.keep(outcome.known):
            outcome = Teller(story, rng, as_of).write(self.files)
        self._bring_in()
        return self._scored(story, outcome, as_of, rng)

    def _bring_in(self) -> None:
        from django.core.cache import cache
        from django.core.management import call_command
        from django.db import connection

        connection.close()
        for old in self.book.parent.glob(f"{self.book.name}*"):
            old.unlink()
        shutil.copy(self.empty, self.book)
        cache.clear()
        call_command("import_records", str(self.files), stdout=io.StringIO())

    def _scored(self, story: Story, outcome: Outcome, as_of: dt.date, rng: np.random.Generator) -> Row:
        from fleet.models import Component
        from reliability.forecasts.learned import learned_from
        from reliability.forecasts.next_quarter import question_of, running_now, tallied
        from reliability.lifetimes_from_fleet import lives

        component = Component.objects.get(code="NUT")
        begin = as_of + dt.timedelta(days=1 + story.gap)
        question = question_of(component, begin=begin, days=int(QUARTER), as_of=as_of)
        found, running = lives(component, by="part", as_of=as_of), running_now(question)
        tally = tallied(question, running, learned_from(found, component, as_of, None))
        known = found.lifetimes
        rate = 0.0 if known is None else known.failures / max(known.exposure, 1e-9)
        used = dict.fromkeys(("S00", "NEW"), 0.0)
        for each in running.rows:
            if each.site in used:
                used[each.site] += QUARTER * each.count * each.a_day
        everywhere = QUARTER * sum(row.count * row.a_day for row in running.rows)
        row = {"all": scored(tally.total.failures, outcome.by_site.total(), rate * everywhere, rng)}
        for scope, site in (("old site", "S00"), ("new site", "NEW")):
            row[scope] = scored(tally.groups["site"][site].failures, outcome.by_site[site], rate * used[site], rng)
        for week in WEEKS:
            row[f"week {week}"] = scored(tally.weeks[week - 1], outcome.by_week[week - 1], rate * everywhere / 13, rng)
        for part in [f"N{number}" for number in range(len(story.longer))] if len(story.longer) > 1 else ():
            if part in tally.groups["part"]:
                share = sum(each.count for each in running.rows if each.part == part) / max(running.count, 1)
                mean = rate * everywhere * share
                row[f"part {part}"] = scored(tally.groups["part"][part].failures, outcome.by_part[part], mean, rng)
        return row


if __name__ == "__main__":
    main()
