"""Weibull fits against published examples; where a value is from memory, the reference entry says so."""

from __future__ import annotations

import numpy as np
import pytest

from reliability.stats.weibull_fit import fit_weibull, fit_weibull_known_shape
from tests.stats import reference


def limits(fit, quantity, method="likelihood-ratio"):
    interval = fit.interval(quantity, method=method)
    return [interval.lower, interval.upper]


def test_shock_absorbers():
    # Meeker & Escobar 1998, table 8.1: printed digits from memory; the rest recomputed with R survreg
    entry = reference.check("wei-shock-absorber")
    printed, computed = entry["expected"], entry["computed"]
    fit = fit_weibull(reference.shock_absorbers())
    covariance = fit.covariance
    assert np.log(fit.scale) == pytest.approx(printed["mu"], abs=0.005)
    assert 1.0 / fit.shape == pytest.approx(printed["sigma"], abs=5e-5)
    assert np.sqrt(covariance[1, 1]) / fit.scale == pytest.approx(printed["se_mu"], abs=5e-5)
    assert np.sqrt(covariance[0, 0]) / fit.shape**2 == pytest.approx(printed["se_sigma"], abs=5e-5)
    assert fit.scale == pytest.approx(printed["eta_km"], abs=0.5)
    assert fit.shape == pytest.approx(printed["beta"], abs=0.005)
    assert fit.scale == pytest.approx(computed["eta"], rel=1e-7)
    assert fit.shape == pytest.approx(computed["beta"], rel=1e-7)
    assert np.sqrt(np.diag(covariance)) == pytest.approx([computed["se_beta"], computed["se_eta"]], rel=1e-6)
    assert fit.log_likelihood == pytest.approx(computed["loglik"], abs=1e-6)
    assert fit.quantile(0.1) == pytest.approx(computed["B10"], abs=1e-3)
    assert limits(fit, "scale", "wald") == pytest.approx(computed["Wald95_eta_log"], abs=0.01)
    assert limits(fit, "shape", "wald") == pytest.approx(computed["Wald95_beta_log"], abs=1e-6)
    assert limits(fit, "shape") == pytest.approx(computed["LR95_beta"], abs=1e-6)
    assert limits(fit, "scale") == pytest.approx(computed["LR95_eta"], abs=0.01)
    assert limits(fit, ("quantile", 0.1), "wald") == pytest.approx(computed["B10_Wald95_log"], abs=0.01)
    assert limits(fit, ("quantile", 0.1), "wald-plain") == pytest.approx(computed["B10_Wald95_plain"], abs=0.01)
    assert limits(fit, ("quantile", 0.1)) == pytest.approx(computed["B10_LR95"], abs=0.01)


def test_bearing_cages():
    # Meeker & Escobar 1998, chapter 8: from memory; the rest recomputed with R survreg and an own profile
    entry = reference.check("wei-bearing-cage")
    printed, computed, tolerance = entry["expected"], entry["computed"], entry["tolerance"]
    lives = reference.bearing_cages()
    fit = fit_weibull(lives)
    assert (lives.count, lives.failures) == (printed["n"], printed["failures"])
    assert fit.shape == pytest.approx(printed["beta"], abs=tolerance["beta"])
    assert fit.scale == pytest.approx(printed["eta_h"], abs=tolerance["eta_h"])
    assert fit.quantile(0.1) == pytest.approx(printed["B10_h"], abs=tolerance["B10_h"])
    assert limits(fit, ("quantile", 0.1)) == pytest.approx(printed["B10_LR95"], abs=tolerance["B10_LR95"])
    assert fit.covariance[0, 0] == pytest.approx(computed["se_beta"] ** 2, rel=1e-5)
    assert fit.covariance[1, 1] == pytest.approx(computed["se_eta"] ** 2, rel=1e-5)
    assert limits(fit, "shape") == pytest.approx(computed["LR95_beta"], abs=1e-6)
    assert limits(fit, "scale") == pytest.approx(computed["LR95_eta"], rel=5e-6)
    assert limits(fit, ("quantile", 0.1), "wald") == pytest.approx(computed["B10_Wald95_log"], abs=0.01)
    assert limits(fit, ("quantile", 0.1), "wald-plain") == pytest.approx(computed["B10_Wald95_plain"], abs=0.01)


@pytest.mark.parametrize("shape", [1.5, 2.0, 3.0])
def test_bearing_cages_with_an_assumed_shape(shape):
    # National Research Council 2002, appendix A, fixes these three shapes
    computed = reference.check("wei-bearing-cage")["computed"]
    fit = fit_weibull_known_shape(reference.bearing_cages(), shape)
    assert fit.scale == pytest.approx(computed[f"fixed_beta_{shape:g}"]["eta"], abs=0.01)
    assert fit.quantile(0.1) == pytest.approx(computed[f"fixed_beta_{shape:g}"]["B10"], abs=0.01)
    assert fit.log_likelihood == pytest.approx(computed["loglik_fixed"][f"{shape:g}"], abs=1e-6)


def test_nist_units():
    # NIST/SEMATECH e-Handbook 8.4.1.3, read in stored text
    entry = reference.check("wei-nist-8413")
    printed, computed, tolerance = entry["expected"], entry["computed"], entry["tolerance"]
    fit = fit_weibull(reference.nist_units())
    assert fit.scale == pytest.approx(printed["eta_h"], abs=tolerance["eta_h"])
    assert fit.shape == pytest.approx(printed["beta"], abs=tolerance["beta"])
    assert fit.mean == pytest.approx(printed["mean_h"], abs=tolerance["mean_h"])
    assert fit.standard_deviation == pytest.approx(printed["sd_h"], abs=tolerance["sd_h"])
    assert abs(fit.log_likelihood) == pytest.approx(printed["loglik_abs"], abs=tolerance["loglik_abs"])
    assert fit.aic == pytest.approx(printed["AIC"], abs=tolerance["AIC"])
    assert fit.quantile(0.1) == pytest.approx(computed["B10"], abs=1e-4)
    assert limits(fit, ("quantile", 0.1)) == pytest.approx(computed["B10_LR95"], abs=1e-4)
    assert limits(fit, ("quantile", 0.1), "wald") == pytest.approx(computed["B10_Wald95_log"], abs=1e-4)
    assert limits(fit, "shape") == pytest.approx(computed["LR95_beta"], abs=1e-5)
    assert limits(fit, "scale") == pytest.approx(computed["LR95_eta"], abs=1e-3)


def test_turbine_wheels_inspected_once():
    # data of Nelson 1982; values recomputed with another library
    computed = reference.check("npmle-turbine-wheel")["computed"]["weibull_mle"]
    fit = fit_weibull(reference.turbine_wheels())
    assert fit.scale == pytest.approx(computed["eta_100h"], abs=1e-4)
    assert fit.shape == pytest.approx(computed["beta"], abs=1e-4)
    assert np.sqrt(np.diag(fit.covariance)) == pytest.approx([computed["se_beta"], computed["se_eta"]], abs=1e-4)
    assert fit.log_likelihood == pytest.approx(computed["loglik"], abs=1e-6)


def test_channing_house_men_entering_late():
    # no published value known; three libraries agree
    expected = reference.check("lt-channing-weibull")["expected"]
    lives = reference.channing("1")
    fit = fit_weibull(lives)
    assert (lives.count, lives.failures) == (expected["male"]["n"], expected["male"]["d"])
    assert fit.shape == pytest.approx(expected["male"]["beta"], abs=1e-4)
    assert fit.scale == pytest.approx(expected["male"]["eta_months"], abs=5e-3)
    assert fit.log_likelihood == pytest.approx(expected["male"]["loglik"], abs=1e-4)


def test_ignoring_late_entry_doubles_the_shape():
    expected = reference.check("lt-channing-weibull")["expected"]["male_ignoring_truncation"]
    lives = reference.channing("1")
    fit = fit_weibull(type(lives)(lives.durations, lives.observed))
    assert fit.shape == pytest.approx(expected["beta"], abs=1e-3)
    assert fit.scale == pytest.approx(expected["eta"], abs=5e-3)


@pytest.mark.parametrize(("mode", "key"), [("Mode1", "mode1"), ("Mode2", "mode2")])
def test_shock_absorbers_one_mode_at_a_time(mode, key):
    # Meeker & Escobar 1998, chapter 15; recomputed with R survreg, the other mode withdrawn
    expected = reference.check("cr-shock-absorber")["expected"][key]
    fit = fit_weibull(reference.shock_absorbers(mode))
    assert fit.scale == pytest.approx(expected["eta"], rel=1e-5)
    assert fit.shape == pytest.approx(expected["beta"], abs=1e-4)
    assert fit.log_likelihood == pytest.approx(expected["loglik"], abs=1e-4)
