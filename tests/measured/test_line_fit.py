"""The line shape, its derivatives, and the fit of a group of lines."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.optimize import least_squares

from phasedb.crystal.radiation import EMISSION_LINES, radiation_from_name, radiation_from_wavelength
from phasedb.measured.line_fit import ShapePrior, components, fit_group, model_of
from phasedb.measured.profile import Doublet, moved_by_ratio, pseudo_voigt, pseudo_voigt_height

COPPER = Doublet.of(radiation_from_name("Cu"))
shares = st.floats(0.0, 1.0)


def profile(x, centre=40.0, fwhm=0.1, mixing=0.5):
    return pseudo_voigt(np.atleast_1d(x), np.array([centre]), np.array([fwhm]), np.array([mixing]))


@settings(max_examples=20)
@given(shares)
def test_the_profile_has_unit_area_and_its_width_at_half_height(mixing):
    area, _ = quad(lambda x: profile(x, mixing=mixing)[0][0, 0], 0, 80, points=[39.9, 40, 40.1], limit=400)
    assert area == pytest.approx(1.0, abs=3e-3)  # a Lorentzian keeps 0.1 / (pi * 40) beyond the interval
    top, half = (profile(x, mixing=mixing)[0][0, 0] for x in (40.0, 40.05))
    assert half / top == pytest.approx(0.5)
    assert top == pytest.approx(pseudo_voigt_height(np.array([0.1]), np.array([mixing]))[0])


@given(st.floats(39.5, 40.5), st.floats(0.05, 0.4), shares)
def test_derivatives_are_those_of_the_profile(x, fwhm, mixing):
    step = 1e-6
    _, by_centre, by_ln_width, by_mixing = profile(x, fwhm=fwhm, mixing=mixing)

    def difference(**moved):
        up, down = (profile(x, **{"fwhm": fwhm, "mixing": mixing, **change}) for change in moved["pair"])
        return (up[0] - down[0])[0, 0] / (2 * step)

    scale = 10.0 / fwhm**2
    centre = difference(pair=({"centre": 40 + step}, {"centre": 40 - step}))
    width = difference(pair=({"fwhm": fwhm * np.exp(step)}, {"fwhm": fwhm * np.exp(-step)}))
    share = difference(pair=({"mixing": mixing + step}, {"mixing": mixing - step}))
    assert by_centre[0, 0] == pytest.approx(centre, abs=1e-6 * scale)
    assert by_ln_width[0, 0] == pytest.approx(width, abs=1e-6 * scale)
    assert by_mixing[0, 0] == pytest.approx(share, abs=1e-6 * scale)


@given(st.floats(10.0, 150.0))
def test_alpha2_lies_where_bragg_puts_it(two_theta):
    lines = EMISSION_LINES["Cu"]
    moved, slope = moved_by_ratio(np.array([two_theta]), lines.alpha2 / lines.alpha1)
    d = lines.alpha1 / (2 * np.sin(np.radians(two_theta / 2)))
    assert moved[0] == pytest.approx(2 * np.degrees(np.arcsin(lines.alpha2 / (2 * d))))
    ahead, _ = moved_by_ratio(np.array([two_theta + 1e-5]), lines.alpha2 / lines.alpha1)
    assert slope[0] == pytest.approx((ahead[0] - moved[0]) / 1e-5, rel=1e-3)


def test_a_line_past_180_degrees_does_no_harm():
    moved, slope = moved_by_ratio(np.array([179.5]), 1.01)
    assert moved[0] <= 180.0 and np.isfinite(slope[0])


@pytest.mark.parametrize(
    ("radiation", "has", "certain"),
    [
        (radiation_from_name("Cu"), True, True),
        (radiation_from_name("Cu-Ka1"), False, None),
        (radiation_from_name("Cu-mean"), True, True),
        (radiation_from_wavelength(1.540593), True, False),
        (radiation_from_wavelength(1.5418), True, False),
        (radiation_from_wavelength(1.6), False, None),
        (radiation_from_name("electron", energy_kev=200), False, None),
        (None, False, None),
    ],
)
def test_which_radiations_have_a_doublet(radiation, has, certain):
    doublet = Doublet.of(radiation)
    assert (doublet is not None) == has
    if doublet is not None:
        assert doublet.is_certain == certain


def test_the_mean_lies_between_its_lines():
    (alpha1, _, _), (alpha2, _, share) = components(
        np.array([90.0]), Doublet.of(radiation_from_name("Cu-mean")), 0.5
    )
    assert alpha1[0] < 90.0 < alpha2[0] and share == 0.5
    assert (2 * alpha1[0] + alpha2[0]) / 3 == pytest.approx(90.0, abs=1e-3)


def prior(count, fwhm=0.1, loose=0.5):
    return ShapePrior(
        ln_fwhm=np.full(count, np.log(fwhm)),
        ln_fwhm_scale=np.full(count, loose),
        logit_mixing=np.zeros(count),
        logit_mixing_scale=1.0,
        doublet_ratio=0.5,
        doublet_scale=0.05,
    )


@pytest.fixture
def overlapping():
    rng = np.random.default_rng(11)
    x = np.arange(44.0, 46.0, 0.01)
    centre, area = np.array([44.9, 45.05]), np.array([900.0, 400.0])
    truth = model_of(
        x, centre, area, np.array([0.11, 0.12]), np.array([0.4, 0.4]), COPPER, np.array([0.5, 0.5])
    )
    mean = truth + 200.0 + 30.0 * (x - 45.0)
    return x, rng.poisson(mean).astype(float), np.sqrt(mean), centre, area


def test_an_overlapping_pair_is_parted_within_its_uncertainties(overlapping):
    x, y, sigma, centre, area = overlapping
    fit = fit_group(x, y, sigma, centre=centre + 0.02, area=area * 1.5, prior=prior(2), doublet=COPPER)
    assert np.all(np.abs(fit.centre - centre) < 4 * fit.centre_esd)
    assert np.all(np.abs(fit.area - area) < 4 * fit.area_esd)
    assert np.all(fit.centre_esd < 0.003)
    assert 0.7 < fit.chi2_reduced < 1.3


def test_the_fit_and_its_esds_are_those_of_a_general_minimiser(overlapping):
    # the same residuals given to scipy.optimize.least_squares, derivatives by differences
    x, y, sigma, centre, area = overlapping
    given = prior(2)
    fit = fit_group(x, y, sigma, centre=centre, area=area, prior=given, doublet=COPPER)

    def residuals(p):
        shape = p[:8].reshape(2, 4)
        mixing = 1 / (1 + np.exp(-shape[:, 3]))
        lines = model_of(
            x, shape[:, 0], shape[:, 1], np.exp(shape[:, 2]), mixing, COPPER, np.full(2, np.exp(p[8]))
        )
        model = lines + p[9] + p[10] * (x - 0.5 * (x[0] + x[-1]))
        return np.concatenate(
            [
                (y - model) / sigma,
                (shape[:, 2] - given.ln_fwhm) / 0.5,
                shape[:, 3] / 1.0,
                [(p[8] - np.log(0.5)) / 0.05],
            ]
        )

    start = [44.9, 900, np.log(0.1), 0, 45.05, 400, np.log(0.1), 0, np.log(0.5), 200, 30]
    found = least_squares(residuals, start, x_scale=np.maximum(np.abs(start), 0.01), xtol=1e-12, ftol=1e-12)
    esd = np.sqrt(np.diag(np.linalg.inv(found.jac.T @ found.jac)))[:8].reshape(2, 4)
    assert fit.centre == pytest.approx(found.x[:8].reshape(2, 4)[:, 0], abs=0.02 * fit.centre_esd.min())
    assert fit.area == pytest.approx(found.x[:8].reshape(2, 4)[:, 1], abs=0.02 * fit.area_esd.min())
    assert fit.centre_esd == pytest.approx(esd[:, 0], rel=0.02)
    assert fit.area_esd == pytest.approx(esd[:, 1], rel=0.02)
