"""Regression of life on covariates: published motors and fluids, lifelines, plain optimisation, seeded fleets."""

from __future__ import annotations

import csv
import json
import math
import warnings

import numpy as np
import pytest

from reliability.stats.errors import (
    CollinearCovariates,
    InvalidArgument,
    InvalidLifetimes,
    NoSpreadInFailures,
    StatisticsError,
    TooFewFailures,
    UndefinedEstimate,
)
from reliability.stats.life_regression import fit_weibull_regression
from reliability.stats.life_regression_likelihood import regression_likelihood
from reliability.stats.lifetimes import Lifetimes
from reliability.stats.other_fits import fit_lognormal
from reliability.stats.weibull_fit import fit_weibull
from tests.stats import naive
from tests.stats.reference import FOLDER, column, rows


def entry(identifier: str) -> dict:
    with (FOLDER / "regression_checks.json").open(encoding="utf-8") as file:
        return next(entry for entry in json.load(file)["entries"] if entry["id"] == identifier)


def motors(above: float = 0.0) -> tuple[Lifetimes, np.ndarray]:
    lines = [line for line in rows("imotor") if float(line["temp"]) > above]
    return Lifetimes(column(lines, "time"), column(lines, "status")), column(lines, "temp")


def fluids() -> tuple[Lifetimes, np.ndarray]:
    with (FOLDER / "nelson_insulating_fluid_76.csv").open(newline="", encoding="utf-8") as file:
        lines = list(csv.DictReader(file))
    return Lifetimes(column(lines, "min"), np.ones(len(lines), dtype=bool)), np.log(column(lines, "kV"))


def lives_with_duty(rng: np.random.Generator, count: int, *, every_kind: bool = True) -> tuple[Lifetimes, dict]:
    """Shape 2; life e^-0.5 of itself for each unit of duty and e^0.4 in soft water."""
    duty, soft = rng.uniform(0.5, 2.0, count), (rng.random(count) < 0.4).astype(float)
    scale = 100.0 * np.exp(-0.5 * (duty - 1.0) + 0.4 * soft)
    entries = rng.uniform(0.0, 40.0, count) * (rng.random(count) < 0.5) if every_kind else np.zeros(count)
    ages = scale * ((entries / scale) ** 2 + rng.exponential(size=count)) ** 0.5
    ends = entries + rng.uniform(30.0, 200.0, count)
    durations, observed = np.minimum(ages, ends), ages <= ends
    last_good = np.full(count, np.nan)
    if every_kind:
        seen = observed & (rng.random(count) < 0.5)
        left = np.maximum(np.floor(durations / 12.0) * 12.0, entries)
        last_good = np.where(seen, left, np.nan)
        durations = np.where(seen, np.floor(durations / 12.0) * 12.0 + 12.0, durations)
    weights = rng.integers(1, 4, count) if every_kind else 1
    sites = rng.integers(0, 8, count)
    made = Lifetimes(durations, observed, entries=entries, last_good=last_good, weights=weights, sites=sites)
    return made, {"duty": duty, "soft": soft}


def test_motor_insulation_weibull():
    # R package survival, tests/survreg1.Rout.save, "agrees with Venables & Ripley": read in stored text
    published = entry("aft-imotor-weibull")["expected"]
    lives, temperature = motors()
    fit = fit_weibull_regression(lives, {"temp": temperature})
    assert fit.coefficients["intercept"] == pytest.approx(published["intercept"], abs=5e-6)
    assert fit.coefficients["temp"] == pytest.approx(published["temp"], abs=5e-6)
    assert fit.scale == pytest.approx(published["scale"], abs=5e-4)
    assert fit.log_likelihood == pytest.approx(published["loglik"], abs=0.05)
    assert list(fit.standard_errors.values()) == pytest.approx(published["se"], abs=5e-6)
    assert math.sqrt(fit.covariance[2, 2]) == pytest.approx(published["se_logscale"], abs=5e-5)
    logs = [math.log(fit.quantile(share, {"temp": 130})) for share in (0.5, 0.1)]
    assert logs == pytest.approx(published["uquantile_130C_p50_p10"], abs=5e-7)


def test_motor_insulation_lognormal_arrhenius():
    # R package survival, tests/r_sas.Rout.save: read in stored text
    published = entry("aft-imotor-lognormal")["expected"]
    lives, temperature = motors(above=150)
    fit = fit_weibull_regression(lives, {"x": 1000.0 / (273.2 + temperature)}, distribution="lognormal")
    assert fit.coefficients["intercept"] == pytest.approx(published["intercept"], abs=5e-4)
    assert fit.coefficients["x"] == pytest.approx(published["slope"], abs=5e-4)
    assert fit.scale == pytest.approx(published["scale"], abs=5e-4)
    assert fit.log_likelihood == pytest.approx(published["loglik"], abs=0.05)
    for celsius, name in ((130, "quantiles_130C"), (150, "quantiles_150C")):
        place = {"x": 1000.0 / (273.2 + celsius)}
        name = "quantiles_130C_p10_50_90" if celsius == 130 else name
        assert [fit.quantile(p, place) for p in (0.1, 0.5, 0.9)] == pytest.approx(published[name], abs=5e-3)
    z = 1.959963984540054  # normal quantile of 0.975
    for share, error in zip((0.1, 0.5, 0.9), published["se_130C"], strict=True):
        # the package's error is on the age itself: that of the log times the age
        wald = fit.quantile_interval(share, {"x": 1000.0 / 403.2}, method="wald")
        assert math.log(wald.upper / wald.estimate) / z * wald.estimate == pytest.approx(error, abs=5e-3)


def test_insulating_fluid_inverse_power():
    # Nelson 1972, Lawless 1982 chapter 6: values from memory; standard errors and likelihood recomputed with R survreg
    published = entry("aft-insulating-fluid-76")["expected"]
    lives, log_voltage = fluids()
    fit = fit_weibull_regression(lives, log_voltage, names=["log_kV"])
    assert fit.coefficients["intercept"] == pytest.approx(published["intercept"], abs=5e-3)
    assert fit.coefficients["log_kV"] == pytest.approx(published["log_kV"], abs=5e-3)
    assert fit.scale == pytest.approx(published["sigma"], abs=5e-4)
    assert fit.coefficients["intercept"] == pytest.approx(64.84722, abs=5e-6)
    assert list(fit.standard_errors.values()) == pytest.approx([5.61976, 1.60683], abs=6e-6)
    assert fit.log_likelihood == pytest.approx(-300.81742, abs=5e-6)
    exponential = fit_weibull_regression(lives, log_voltage, names=["log_kV"], distribution="exponential")
    assert list(exponential.coefficients.values()) == pytest.approx([64.91142, -17.70391], abs=5e-6)
    assert exponential.scale == exponential.shape == 1.0


def test_against_lifelines():
    pytest.importorskip("lifelines")
    import pandas
    from lifelines import WeibullAFTFitter

    lives, covariates = lives_with_duty(np.random.default_rng(3), 400)
    plain = Lifetimes(lives.durations, lives.observed, entries=lives.entries, weights=lives.weights)
    frame = pandas.DataFrame(
        {"age": plain.durations, "failed": plain.observed, "from": plain.entries, "count": plain.weights, **covariates}
    )
    fitter = WeibullAFTFitter()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        fitter.fit(frame, "age", "failed", entry_col="from", weights_col="count")
    fit = fit_weibull_regression(plain, covariates)
    theirs = fitter.params_
    assert fit.coefficients["intercept"] == pytest.approx(theirs["lambda_", "Intercept"], rel=1e-4)
    assert fit.coefficients["duty"] == pytest.approx(theirs["lambda_", "duty"], rel=1e-3)
    assert fit.coefficients["soft"] == pytest.approx(theirs["lambda_", "soft"], rel=1e-3)
    assert math.log(fit.shape) == pytest.approx(theirs["rho_", "Intercept"], rel=1e-3)
    assert fit.log_likelihood == pytest.approx(fitter.log_likelihood_, rel=1e-6)


@pytest.mark.parametrize("distribution", ["weibull", "lognormal"])
def test_derivatives_are_those_of_the_value(distribution):
    lives, covariates = lives_with_duty(np.random.default_rng(4), 60)
    design = np.column_stack([np.ones(60), *covariates.values()])
    likelihood = regression_likelihood(lives, design, lognormal=distribution == "lognormal")
    point, step = np.array([0.4, 0.2, -0.3, 0.5]), 1e-5
    value, gradient, hessian = likelihood(point)
    assert math.isfinite(value)
    for place, unit in enumerate(np.eye(4)):
        up, down = likelihood(point + step * unit), likelihood(point - step * unit)
        assert gradient[place] == pytest.approx((up[0] - down[0]) / (2 * step), rel=1e-6)
        assert hessian[place] == pytest.approx((up[1] - down[1]) / (2 * step), rel=1e-5, abs=1e-6)
    by_site = likelihood.by_cluster(point, lives.site_codes, lives.site_labels.size)
    assert by_site[0].sum(axis=0) == pytest.approx(gradient)
    assert by_site[1].sum(axis=0) == pytest.approx(hessian)


def test_every_kind_of_row_against_plain_optimisation():
    lives, covariates = lives_with_duty(np.random.default_rng(5), 60)
    fit = fit_weibull_regression(lives, covariates)

    def value(point):
        total = 0.0
        for row in range(len(lives)):
            scale = math.exp(point[1] + point[2] * covariates["duty"][row] + point[3] * covariates["soft"][row])
            total += naive.weibull_log_likelihood(lives.subset([row]), math.exp(point[0]), scale)
        return total

    start = [math.log(fit.shape), *fit.coefficients.values()]
    peak = value(start)
    assert fit.log_likelihood == pytest.approx(peak, abs=1e-8)
    rng = np.random.default_rng(6)
    for _ in range(40):
        assert value(np.array(start) + rng.normal(0.0, 0.02, 4)) < peak


@pytest.mark.parametrize("distribution", ["weibull", "lognormal"])
def test_one_factor_of_two_levels_is_two_scales_with_one_shape(distribution):
    # where every quantile's interval must equal that of a fit to which only a column of its own level was added
    lives, covariates = lives_with_duty(np.random.default_rng(7), 200)
    soft = covariates["soft"]
    fit = fit_weibull_regression(lives, {"soft": soft}, distribution=distribution)
    swapped = fit_weibull_regression(lives, {"hard": 1.0 - soft}, distribution=distribution)
    assert fit.log_likelihood == pytest.approx(swapped.log_likelihood, abs=1e-9)
    ratio, inverse = fit.life_ratio("soft"), swapped.life_ratio("hard")
    assert (ratio.estimate, ratio.lower, ratio.upper) == pytest.approx(
        (1.0 / inverse.estimate, 1.0 / inverse.upper, 1.0 / inverse.lower), rel=1e-6
    )
    for method in ("likelihood-ratio", "wald", "sites"):
        a = fit.quantile_interval(0.1, {"soft": 1}, method=method)
        b = swapped.quantile_interval(0.1, {"hard": 0}, method=method)
        assert (a.estimate, a.lower, a.upper) == pytest.approx((b.estimate, b.lower, b.upper), rel=1e-5)
        assert a.lower < a.estimate < a.upper


@pytest.mark.parametrize("distribution", ["weibull", "lognormal"])
def test_a_covariate_without_effect_leaves_the_plain_fit(distribution):
    lives, _ = lives_with_duty(np.random.default_rng(8), 200)
    twice = Lifetimes(
        *(np.tile(getattr(lives, name), 2) for name in ("durations", "observed")),
        **{name: np.tile(getattr(lives, name), 2) for name in ("entries", "last_good", "weights")},
    )
    fit = fit_weibull_regression(twice, {"copy": np.repeat([0.0, 1.0], 200)}, distribution=distribution)
    plain = (fit_weibull if distribution == "weibull" else fit_lognormal)(twice)
    assert fit.shape == pytest.approx(plain.shape, rel=1e-7)
    assert fit.coefficients["copy"] == pytest.approx(0.0, abs=1e-8)
    assert fit.log_likelihood == pytest.approx(plain.log_likelihood, abs=1e-8)
    for quantity, ours in (
        ("shape", fit.shape_interval()),
        (("survival", 80.0), None),
        (("quantile", 0.1), None),
    ):
        if ours is not None:
            theirs = plain.interval(quantity)
            assert (ours.lower, ours.upper) == pytest.approx((theirs.lower, theirs.upper), rel=1e-6)
    # at the middle of the two copies only shape and intercept matter
    ours, theirs = fit.survival_interval(80.0, {"copy": 0.5}), plain.interval(("survival", 80.0))
    assert (ours.estimate, ours.lower, ours.upper) == pytest.approx(
        (theirs.estimate, theirs.lower, theirs.upper), rel=1e-5
    )
    ours, theirs = fit.quantile_interval(0.1, {"copy": 0.5}), plain.interval(("quantile", 0.1))
    assert (ours.estimate, ours.lower, ours.upper) == pytest.approx(
        (theirs.estimate, theirs.lower, theirs.upper), rel=1e-5
    )


def test_life_ratio_intervals_cover():
    # 200 fleets of 80 lives, likelihood ratio at 90 %: 172 to 188 would be usual, fewer than 166 once in a thousand
    rng, held = np.random.default_rng(9), 0
    for _ in range(200):
        lives, covariates = lives_with_duty(rng, 80, every_kind=False)
        interval = fit_weibull_regression(lives, covariates).life_ratio("duty", confidence_level=0.9)
        held += interval.lower <= math.exp(-0.5) <= interval.upper
    assert 166 <= held <= 194


def fleet_of_sites(rng: np.random.Generator, spread: float) -> tuple[Lifetimes, np.ndarray]:
    """16 sites with hazard multipliers of this variance, 12 lives each; soft water at half of them has no effect."""
    sites = np.repeat(np.arange(16), 12)
    multiplier = rng.gamma(1.0 / spread, spread, 16)[sites]
    ages = 100.0 * (rng.exponential(size=sites.size) / multiplier) ** 0.5
    ends = rng.uniform(50.0, 250.0, sites.size)
    lives = Lifetimes(np.minimum(ages, ends), ages <= ends, sites=sites)
    return lives, (sites % 2).astype(float)


def test_where_sites_differ_only_the_intervals_by_sites_hold():
    # soft water belongs to whole sites: independent lives take the sites' differences for the water's
    rng, held, independent = np.random.default_rng(10), 0, 0
    for _ in range(150):
        lives, soft = fleet_of_sites(rng, 0.5)
        fit = fit_weibull_regression(lives, {"soft": soft})
        sites, alone = fit.life_ratio("soft", method="sites"), fit.life_ratio("soft")
        held += sites.lower <= 1.0 <= sites.upper
        independent += alone.lower <= 1.0 <= alone.upper
    assert held >= 136  # below this less than once in a hundred at 95 %
    assert independent <= 120


@pytest.mark.parametrize("factor", [1e-6, 1e6])
def test_units_do_not_matter(factor):
    lives, covariates = lives_with_duty(np.random.default_rng(11), 120)
    scaled = Lifetimes(
        lives.durations * factor,
        lives.observed,
        entries=lives.entries * factor,
        last_good=lives.last_good * factor,
        weights=lives.weights,
    )
    one = fit_weibull_regression(lives, covariates)
    two = fit_weibull_regression(scaled, {"duty": 1e5 + covariates["duty"] / 1e3, "soft": covariates["soft"]})
    assert two.shape == pytest.approx(one.shape, rel=1e-6)
    assert two.coefficients["duty"] == pytest.approx(one.coefficients["duty"] * 1e3, rel=1e-5)
    a, b = one.life_ratio("duty"), two.life_ratio("duty", 1e-3)
    assert (a.estimate, a.lower, a.upper) == pytest.approx((b.estimate, b.lower, b.upper), rel=1e-5)


def test_columns_that_cannot_be_told_apart_are_named():
    lives, covariates = lives_with_duty(np.random.default_rng(12), 50)
    with pytest.raises(CollinearCovariates, match="The covariate water is the same for all lives") as refused:
        fit_weibull_regression(lives, {**covariates, "water": np.full(50, 7.0)})
    assert refused.value.names == ("water",)
    doubled = {**covariates, "strokes": 3.0 * covariates["duty"] + 1.0}
    with pytest.raises(CollinearCovariates, match="Leave out one of them") as refused:
        fit_weibull_regression(lives, doubled)
    assert set(refused.value.names) == {"duty", "strokes"}


def test_a_value_that_never_failed_is_said_to_be_so():
    lives, covariates = lives_with_duty(np.random.default_rng(13), 60)
    never = (~lives.observed & (np.arange(60) % 2 == 0)).astype(float)
    with pytest.raises(UndefinedEstimate, match="the effect of never lies"):
        fit_weibull_regression(lives, {"never": never, **covariates})
    mixed = never.copy()
    mixed[np.flatnonzero(lives.is_exact)[0]] = 1.0
    fit = fit_weibull_regression(lives, {"mixed": mixed})
    assert fit.coefficients["mixed"] > 0.0


def test_what_is_wrong_is_said():
    lives, covariates = lives_with_duty(np.random.default_rng(14), 50)
    with pytest.raises(InvalidArgument, match="have shape"):
        fit_weibull_regression(lives, np.zeros((3, 2)))
    with pytest.raises(InvalidLifetimes, match="Row 4: x1 is not a number") as refused:
        fit_weibull_regression(lives, np.where(np.arange(50) == 4, np.nan, covariates["duty"]))
    assert refused.value.row == 4
    with pytest.raises(InvalidArgument, match="different names"):
        fit_weibull_regression(lives, covariates["duty"], names=["intercept"])
    with pytest.raises(InvalidArgument, match="columns of 0 and 1"):
        fit_weibull_regression(lives, {"water": np.array(["soft"] * 50)})
    with pytest.raises(InvalidArgument, match="distribution"):
        fit_weibull_regression(lives, covariates, distribution="gamma")
    with pytest.raises(TooFewFailures, match="cannot tell"):
        fit_weibull_regression(Lifetimes([3, 4, 5, 6], [1, 1, 0, 0]), {"a": [1, 2, 3, 4], "b": [1, 3, 3, 1]})
    with pytest.raises(NoSpreadInFailures):
        fit_weibull_regression(Lifetimes([5, 5, 5, 5], [1] * 4), {"a": [1, 2, 3, 4]})
    with pytest.raises(StatisticsError):  # two levels, one age each: any shape fits
        fit_weibull_regression(Lifetimes([5, 5, 9, 9], [1] * 4), {"a": [0, 0, 1, 1]})
    fit = fit_weibull_regression(lives, covariates)
    with pytest.raises(InvalidArgument, match="not among the covariates duty, soft"):
        fit.life_ratio("water")
    with pytest.raises(InvalidArgument, match="A value for soft is missing"):
        fit.quantile(0.1, {"duty": 1})
    with pytest.raises(InvalidArgument, match="method"):
        fit.life_ratio("duty", method="bayes")
    few = fit_weibull_regression(Lifetimes(lives.durations, lives.observed, sites=np.arange(50) % 3), covariates)
    with pytest.raises(InvalidArgument, match="at least 5"):
        few.life_ratio("duty", method="sites")
