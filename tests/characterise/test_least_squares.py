"""The least squares against general minimisers, and what its weights and esds do."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import least_squares
from scipy.stats import t as student

from phasedb.characterise.least_squares import PRIOR_SCALES, over_prior_scales, solve, student_widening

NOMINAL = 0.02


def straight_line(x, y):
    design = np.stack([np.ones_like(x), x], axis=1)
    return lambda p: (y - design @ p, design)


def priors(precision=(0.0, 0.0), mean=(0.0, 0.0)):
    return {"prior_mean": np.array(mean), "prior_precision": np.array(precision)}


def test_parameters_and_covariance_with_priors_are_those_of_scipy():
    rng = np.random.default_rng(1)
    x = np.linspace(0, 1, 6)
    esd = rng.uniform(0.02, 0.05, 6)
    y = 1.0 + 0.3 * x + 0.3 * esd * rng.normal(size=6)  # scatter below the stated esds: nothing is enlarged
    found = solve(
        straight_line(x, y), np.zeros(2), **priors((0.0, 0.1**-2), (0.0, 0.2)), stated=esd, nominal=NOMINAL
    )

    def residuals(p):
        return np.append((y - p[0] - p[1] * x) / esd, (p[1] - 0.2) / 0.1)

    other = least_squares(residuals, [0, 0], xtol=1e-14, ftol=1e-14, gtol=1e-14)
    assert found.parameters == pytest.approx(other.x, abs=1e-7)
    assert found.covariance == pytest.approx(np.linalg.inv(other.jac.T @ other.jac), rel=1e-4)
    assert found.sigma == pytest.approx(esd)


def test_stated_esds_are_only_enlarged():
    rng = np.random.default_rng(2)
    x = np.linspace(0, 1, 40)
    esd = np.full(40, 0.01)
    calm = solve(
        straight_line(x, 0.2 * esd * rng.normal(size=40)),
        np.zeros(2),
        **priors(),
        stated=esd,
        nominal=NOMINAL,
    )
    wild = solve(
        straight_line(x, 5.0 * esd * rng.normal(size=40)),
        np.zeros(2),
        **priors(),
        stated=esd,
        nominal=NOMINAL,
    )
    assert np.array_equal(calm.sigma, esd) and calm.chi2_reduced < 0.2
    assert wild.chi2_reduced > 10
    assert np.sqrt(np.mean(wild.sigma**2)) == pytest.approx(0.05, rel=0.3)


def test_without_esds_the_scatter_sets_the_noise():
    rng = np.random.default_rng(3)
    x = np.linspace(0, 1, 400)
    found = solve(
        straight_line(x, 0.07 * rng.normal(size=400)), np.zeros(2), **priors(), stated=None, nominal=NOMINAL
    )
    assert found.sigma[0] == pytest.approx(0.07, rel=0.1)


def test_a_suspiciously_small_scatter_is_not_believed():
    x = np.linspace(0, 1, 20)
    found = solve(straight_line(x, 1.0 + x), np.zeros(2), **priors(), stated=None, nominal=NOMINAL)
    assert found.sigma[0] == pytest.approx(0.2 * NOMINAL)


def test_outliers_neither_pull_nor_widen():
    rng = np.random.default_rng(4)
    x = np.linspace(0, 1, 30)
    clean = 1.0 + x + 0.02 * rng.normal(size=30)
    spoiled = clean.copy()
    spoiled[[3, 20]] += [0.6, -0.4]
    good, bad = (
        solve(straight_line(x, y), np.zeros(2), **priors(), stated=None, nominal=NOMINAL)
        for y in (clean, spoiled)
    )
    assert bad.good[[3, 20]].max() < 0.01 and np.delete(bad.good, [3, 20]).min() > 0.2
    assert bad.parameters == pytest.approx(good.parameters, abs=0.01)
    assert bad.sigma[0] == pytest.approx(good.sigma[0], rel=0.3)


@pytest.mark.parametrize("freedom", [3, 4, 6, 10, 30, 200])
def test_the_widening_is_that_of_student(freedom):
    exact = student.ppf(0.975, freedom) / 1.959964
    assert student_widening(freedom) == pytest.approx(exact, rel=0.02)


@given(st.floats(0.0, 400.0))
def test_fewer_degrees_of_freedom_widen_more(freedom):
    assert student_widening(freedom) >= student_widening(freedom + 1.0) > 1.0


def test_averaging_over_prior_scales_is_a_numerical_integral():
    # one shift b with prior N(0, k²), k as in PRIOR_SCALES, seen through y_i = b + noise
    y = np.array([0.5, 0.7, 0.3, 0.6, 0.55])
    ones = np.ones((5, 1))

    def model(p):
        return y - p[0], ones

    unit = {"prior_mean": np.zeros(1), "prior_precision": np.ones(1)}
    first = solve(model, np.zeros(1), **unit, stated=np.full(5, 0.4), nominal=NOMINAL)
    found = over_prior_scales(first, model, **unit, first=0)
    sigma = first.sigma[0] * student_widening(first.freedom)
    grid = np.linspace(-4, 4, 20001)
    density = sum(share * np.exp(-0.5 * (grid / k) ** 2) / k for k, share in PRIOR_SCALES) * np.exp(
        -0.5 * ((y[:, None] - grid) ** 2).sum(axis=0) / sigma**2
    )
    density /= density.sum()
    mean = (grid * density).sum()
    assert found.parameters[0] == pytest.approx(mean, abs=1e-3)
    assert found.covariance[0, 0] == pytest.approx(((grid - mean) ** 2 * density).sum(), rel=1e-2)
