"""Do the bands hold? PIT and CRPS of the forecast on fleets whose truth is known, beside constant rate x fleet x
Poisson.

python -m tests.benchmarks.bench_calibration [--fleets 600] [--case NAME ...] [--further] [--weeks] [--rows FOLDER]

Each fleet has a seed of its own: a run that was stopped goes on where its rows end, and more fleets only add to it.
"""

from __future__ import annotations

import argparse
import json
import sys
import time
import zlib
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path

import numpy as np
from scipy.special import gammaln

from reliability.stats.count_results import CountDistribution
from reliability.stats.counts import CountForecast, forecast_counts
from reliability.stats.kept_draws import KeptDraws
from reliability.stats.life_posterior import life_posterior
from reliability.stats.scoring import crps, randomised_pit
from tests.benchmarks.calibration_cases import CASES, FURTHER
from tests.benchmarks.calibration_fleets import NEW_SITE, Case, Fleet, make_fleet

SCOPES = ("all", "old site", NEW_SITE)
WEEKS = (1, 7, 13)
# as reliability/forecasts/count.py has them
DRAWS, FEW_FAILURES, COUNTED_OF_FEW, COUNTED = 400, 20, 200, 48
Row = dict[str, list[float]]  # by scope: PIT, CRPS, CRPS of the rival, median, actual, width of the 80 % band


def forecast(case: Case, fleet: Fleet, rng: np.random.Generator, *, weeks: bool = False) -> CountForecast:
    """The forecast as the program makes it: early failures looked for, site spread, removals by their rate, and its
    numbers of draws.
    """
    posterior = life_posterior(fleet.records, site_spread=True, rounded_up_to=1.0)
    unplanned = 0.0 if np.isfinite(case.replace_at) else fleet.removals / fleet.observed_time
    return forecast_counts(
        KeptDraws.of(posterior, DRAWS, rng),
        fleet.ages,
        fleet.horizons,
        sites=fleet.sites,
        groups=fleet.sites,
        draws=DRAWS,
        counted_draws=COUNTED_OF_FEW if fleet.records.failures < FEW_FAILURES else COUNTED,
        rng=rng,
        other_removals=unplanned,
        visits=fleet.visits,
        replace_at=case.replace_at if np.isfinite(case.replace_at) else None,
        duty_spread=case.duty_spread,
        refit_delay=0.5,
        windows=np.arange(0.0, case.horizon + 1.0, 7.0) if weeks else None,
    )


def poisson(mean: float) -> np.ndarray:
    """Probabilities of a Poisson count."""
    counts = np.arange(int(mean + 12 * np.sqrt(mean) + 20))
    if mean == 0:
        return (counts == 0).astype(float)
    pmf = np.exp(counts * np.log(mean) - mean - gammaln(counts + 1))
    return pmf / pmf.sum()


def one(case: Case, rng: np.random.Generator, *, weeks: bool) -> Row:
    """Scores of one fleet."""
    fleet = make_fleet(case, rng)
    found = forecast(case, fleet, rng, weeks=weeks)
    rate = fleet.records.failures / fleet.records.exposure
    old, new = fleet.sites == fleet.old_site, fleet.sites == NEW_SITE
    expected = {"all": fleet.horizons.sum(), "old site": fleet.horizons[old].sum(), NEW_SITE: fleet.horizons[new].sum()}
    counts = {
        "all": found.failures,
        "old site": found.by_group[fleet.old_site].failures,
        NEW_SITE: found.by_group[NEW_SITE].failures,
    }
    row = {scope: scored(counts[scope], fleet.outcomes[scope], rate * float(expected[scope]), rng) for scope in SCOPES}
    for week in WEEKS if weeks else ():
        mean = rate * float(expected["all"]) * 7.0 / case.horizon
        row[f"week {week}"] = scored(found.by_window[week - 1].failures, int(fleet.by_week[week - 1]), mean, rng)
    return row


def scored(found: CountDistribution, outcome: int, rival: float, rng: np.random.Generator) -> list[float]:
    """A row's figures of one count; rival: the mean that a constant rate expects."""
    low, high = found.interval(0.8)
    return [
        float(randomised_pit(found.pmf, outcome, rng)),
        float(crps(found.pmf, outcome)),
        float(crps(poisson(rival), outcome)),
        float(found.quantile(0.5)),
        float(outcome),
        float(high - low),
    ]


def rows_of(name: str, fleets: int, seed: int, folder: Path | None, *, weeks: bool) -> Iterator[Row]:
    """Rows of the first so many fleets of a case, those that lie in the folder and those still to be run."""
    case = (CASES | FURTHER)[name]
    known: list[Row] = []
    path = None if folder is None else folder / f"{name.replace(' ', '_')}{'_weeks' if weeks else ''}_{seed}.jsonl"
    if path is not None:
        path.parent.mkdir(parents=True, exist_ok=True)
        known = [json.loads(line) for line in path.read_text().splitlines()] if path.exists() else []
    for number in range(fleets):
        if number < len(known):
            yield known[number]
            continue
        row = one(case, np.random.default_rng([seed, zlib.crc32(name.encode()), number]), weeks=weeks)
        if path is not None:
            with path.open("a") as rows:
                rows.write(json.dumps(row) + "\n")
        yield row


TITLE = (
    "| case | where | PIT80 | low | high | actual | median | 80 % width | CRPS | rival's CRPS is |\n"
    "|---|---|---|---|---|---|---|---|---|---|"
)


def lines(name: str, rows: Sequence[Row]) -> Iterable[str]:
    """The table's lines of one case, as Markdown; PIT80 with its standard error."""
    for scope in rows[0]:
        pit, score, rival, median, actual, width = np.array([row[scope] for row in rows]).T
        inside = np.mean((pit > 0.1) & (pit < 0.9))
        error = np.sqrt(inside * (1.0 - inside) / pit.size)
        yield (
            f"| {name if scope == 'all' else ''} | {scope} | {inside:.3f} ± {error:.3f} | {np.mean(pit <= 0.1):.3f} "
            f"| {np.mean(pit >= 0.9):.3f} | {actual.mean():.2f} | {median.mean():.2f} "
            f"| {width.mean():.1f} | {score.mean():.3f} | {rival.mean() / max(score.mean(), 1e-12):.2f} times |"
        )


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--fleets", type=int, default=600)
    parser.add_argument("--case", action="append", choices=[*CASES, *FURTHER])
    parser.add_argument("--further", action="store_true", help="the mixtures and corners instead of the listed cases")
    parser.add_argument("--weeks", action="store_true", help="the first, seventh and thirteenth week as well")
    parser.add_argument("--rows", type=Path, metavar="FOLDER", help="keep each fleet's row there, and go on from them")
    parser.add_argument("--seed", type=int, default=1)
    chosen = parser.parse_args()
    print(TITLE, flush=True)
    for name in chosen.case or (FURTHER if chosen.further else CASES):
        started = time.process_time()
        rows = list(rows_of(name, chosen.fleets, chosen.seed, chosen.rows, weeks=chosen.weeks))
        print("\n".join(lines(name, rows)), flush=True)
        each = 1000 * (time.process_time() - started) / chosen.fleets
        print(f"{name}: {chosen.fleets} fleets, {each:.0f} ms each", file=sys.stderr, flush=True)


if __name__ == "__main__":
    main()
