"""How long the whole evidence on a redesign takes with a million lives, section by section.

Run `python -m tests.benchmarks.bench_redesign_scale [--lives 1000000 10000] [--clock strokes] [--visited 0.3]`. It
fills a throwaway PostgreSQL, or with `--sqlite` a throwaway file. Printed are seconds of this process, of the
database's own process, and by the clock on the wall; beside them, from the same run, the plainest peers: reading the
same rows into tuples, and lifelines' log-rank test on the same arrays. Nothing is kept between two answers.
"""

from __future__ import annotations

import argparse
import cProfile
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import dataclass
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))
TICKS = os.sysconf("SC_CLK_TCK")
# the functions whose time is told apart, by their module in reliability.redesigns
SECTIONS = {
    "document": (
        "position_records all_history at_the_same_time comparability sides_with_past _posterior looks_of verdict_of "
        "_curves ahead_of evidence_of _with_past _at_like_duty single_modes fitting_faults few_failures_of _records "
        "_old_shape"
    ),
    "evidence": "log_rank_tests restricted_mean_of ratio_of",
}


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])  # type: ignore[union-attr]
    parser.add_argument("--lives", type=int, nargs="+", default=[1_000_000, 10_000])
    parser.add_argument("--clock", choices=["days", "strokes"], default="days")
    parser.add_argument("--visited", type=float, default=0.0, help="share of the sites that do not report at once")
    parser.add_argument("--sqlite", action="store_true")
    parser.add_argument("--rounds", type=int, default=2)
    parser.add_argument("--profile", help="a file for the statistics of cProfile")
    parser.add_argument("--filled", action="store_true", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if "HALFNUT_DATABASE_URL" in os.environ:
        measure(options)
        return
    for lives in options.lives:
        again = [*(arg for arg in sys.argv[1:] if arg.startswith("--") and arg != "--lives"), "--lives", str(lives)]
        apart(options, [sys.executable, "-m", "tests.benchmarks.bench_redesign_scale", *again])


def apart(options: argparse.Namespace, command: list[str]) -> None:
    """A process and a book of its own for each size."""
    from scripts.throwaway_postgresql import running

    values = {"--clock": options.clock, "--visited": options.visited, "--rounds": options.rounds}
    values |= {"--profile": options.profile} if options.profile else {}
    flags = [part for part in command if part not in values]
    for name, value in values.items():
        flags += [name, str(value)]
    with tempfile.TemporaryDirectory(prefix="halfnut-bench-") as folder, ExitStack() as stack:
        url = "" if options.sqlite else stack.enter_context(running())
        subprocess.run(flags, env={**os.environ, "HALFNUT_DATA": folder, "HALFNUT_DATABASE_URL": url}, check=True)


def measure(options: argparse.Namespace) -> None:
    os.environ.update(HALFNUT_TESTING="1", DJANGO_SETTINGS_MODULE="config.settings")
    import django

    django.setup()
    from django.core.management import call_command

    from tests.benchmarks.redesign_fleet import fill, lived

    (wanted,) = options.lives
    if not options.filled:
        call_command("migrate", verbosity=0, interactive=False)
        began = time.monotonic()
        fleet = lived(wanted)
        fill(fleet, options.clock, options.visited)
        print(
            f"{len(fleet.position):,} lives at {fleet.sites} sites, in {options.clock}, written in "
            f"{time.monotonic() - began:.0f} s; load of the machine {os.getloadavg()[0]:.1f}",
            flush=True,
        )
    watch = Watch()
    one_core()
    answer(watch, options)
    peers(watch)


def one_core() -> None:
    """The database is not to share the work out over the cores that others may need."""
    from django.db import connection

    if connection.vendor == "postgresql":
        with connection.cursor() as cursor:
            cursor.execute("SET max_parallel_workers_per_gather = 0")


def answer(watch: Watch, options: argparse.Namespace) -> None:
    from reliability.redesigns.document import redesign_document
    from reliability.redesigns.question import question_for
    from tests.benchmarks.redesign_fleet import AS_OF

    question = question_for("N2", as_of=AS_OF, hope=1.3)
    for number in range(options.rounds):
        watch.clear()
        unwatch = watch.sections()
        profile = cProfile.Profile() if options.profile and number == options.rounds - 1 else None
        if profile:
            profile.enable()
        with watch.over("whole document"):
            document = redesign_document(question)
        if profile:
            profile.disable()
            profile.dump_stats(options.profile)
        unwatch()
    for line in watch.lines():
        print(line)
    verdict = document["verdict"]
    print(f"{verdict['phrase']}, z {verdict['z']:.2f} against {verdict['boundary']:.2f}, {len(document['path'])} looks")


@dataclass
class Span:
    process: float
    database: float
    wall: float


class Watch:
    """Seconds by section: those inside another are told with it and by themselves."""

    def __init__(self) -> None:
        from django.db import connection

        self.spent: dict[str, Span] = {}
        self.depth: dict[str, int] = {}
        self.open = 0
        self.server: int | None = None
        if connection.vendor == "postgresql":
            with connection.cursor() as cursor:
                cursor.execute("SELECT pg_backend_pid()")
                self.server = cursor.fetchone()[0]

    def clear(self) -> None:
        self.spent.clear()

    def now(self) -> Span:
        return Span(time.process_time(), self._database(), time.perf_counter())

    def _database(self) -> float:
        if self.server is None:
            return 0.0
        fields = Path(f"/proc/{self.server}/stat").read_text().rsplit(")", 1)[1].split()
        return (int(fields[11]) + int(fields[12])) / TICKS

    def over(self, name: str) -> Any:
        return _Over(self, name)

    def sections(self) -> Callable[[], None]:
        """Puts a watch around each function of SECTIONS; returns what takes them off again."""
        import importlib

        undo: list[tuple[Any, str, Any]] = []
        for place, names in SECTIONS.items():
            module = importlib.import_module(f"reliability.redesigns.{place}")
            for name in names.split():
                if hasattr(module, name):
                    plain = getattr(module, name)
                    undo.append((module, name, plain))
                    setattr(module, name, self._around(name.strip("_"), plain))
        return lambda: [setattr(*each) for each in undo] and None

    def _around(self, name: str, call: Callable[..., Any]) -> Callable[..., Any]:
        def watched(*arguments: Any, **named: Any) -> Any:
            with self.over(name):
                return call(*arguments, **named)

        return watched

    def lines(self) -> list[str]:
        head = f"{'seconds':<34}{'program':>9}{'database':>10}{'both':>8}{'wall':>8}"
        return [head] + [
            f"{'  ' * self.depth[name] + name:<34}{span.process:9.2f}{span.database:10.2f}"
            f"{span.process + span.database:8.2f}{span.wall:8.2f}"
            for name, span in self.spent.items()
        ]


class _Over:
    def __init__(self, watch: Watch, name: str) -> None:
        self.watch, self.name = watch, name

    def __enter__(self) -> None:
        watch = self.watch
        watch.depth[self.name] = watch.open
        watch.spent.setdefault(self.name, Span(0.0, 0.0, 0.0))
        watch.open += 1
        self.began = watch.now()

    def __exit__(self, *failure: object) -> None:
        self.watch.open -= 1
        now, spent = self.watch.now(), self.watch.spent[self.name]
        for part in ("process", "database", "wall"):
            setattr(spent, part, getattr(spent, part) + getattr(now, part) - getattr(self.began, part))


def peers(watch: Watch) -> None:
    """What else the same rows could be used for in the same run."""
    from django.db import connection

    from reliability.redesigns.compared import AFTER, all_history
    from reliability.redesigns.question import question_for
    from tests.benchmarks.redesign_fleet import AS_OF

    watch.clear()
    with watch.over("peer: the rows into tuples"), connection.cursor() as cursor:
        cursor.execute(
            "SELECT f.module_id, f.position_id, f.part_id, f.mode_id, f.reason, c.site_id, c.fitted_day, c.end_day, "
            "c.days_at_fit, c.days_at_end FROM fleet_fitting f JOIN fleet_fittingclock c ON c.fitting_id = f.id"
        )
        cursor.fetchall()
    question = question_for("N2", as_of=AS_OF)
    lives = all_history(question.component, question.new, question.old, as_of=AS_OF).lifetimes
    assert lives is not None
    new = lives.groups == AFTER
    before, after = lives.subset(~new), lives.subset(new)
    from lifelines.statistics import logrank_test

    with watch.over("peer: lifelines' log-rank, once"):
        logrank_test(before.durations, after.durations, before.observed, after.observed)
    for line in watch.lines()[1:]:
        print(line)


if __name__ == "__main__":
    main()
