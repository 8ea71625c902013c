"""Detection: the false-alarm rate that is stated, background and width."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.measured.background import clipped_background, smooth_through
from phasedb.measured.detection import filter_answers, maxima, threshold_for
from phasedb.measured.noise import noise_of
from phasedb.measured.options import ReadOptions
from phasedb.measured.scan import RawScan, build_scan
from phasedb.measured.widths import fit_widths

X = np.arange(20.0, 100.0, 0.02)


def scan_of(y, esd=None, x=X):
    return build_scan(RawScan(x, np.asarray(y, dtype=float), esd, ReadOptions()), ReadOptions())


def test_maxima_of_noise_come_at_the_stated_rate():
    # Rice's formula, one filter on white Gaussian noise
    rng = np.random.default_rng(1)
    found = expected = 0.0
    for _ in range(60):
        answer = filter_answers(X, rng.normal(size=len(X)), np.ones(len(X)), widest_deg=0.1)[1]
        length = np.ptp(answer.x) / answer.scale_deg
        found += len(maxima(answer, threshold_for(2.0, length)))
        expected += 2.0
    assert found == pytest.approx(expected, abs=4 * np.sqrt(expected))


@given(st.floats(1e-3, 5.0), st.floats(100.0, 1e6))
def test_a_rarer_false_line_needs_a_higher_threshold(false_lines, length):
    assert threshold_for(false_lines / 2, length) > threshold_for(false_lines, length)
    assert threshold_for(false_lines, 2 * length) > threshold_for(false_lines, length)


def test_a_straight_background_gives_no_answer():
    for answer in filter_answers(X, 5.0 * X - 3.0, np.ones(len(X)), widest_deg=2.0):
        assert np.abs(answer.value).max() < 1e-6


def test_the_answer_is_strongest_at_the_line_s_own_width():
    y = 1000.0 * np.exp(-4 * np.log(2) * ((X - 60.0) / 0.3) ** 2)
    answers = filter_answers(X, y, np.ones(len(X)), widest_deg=2.0)
    best = max(answers, key=lambda answer: answer.value.max())
    (line,) = maxima(best, best.value.max() * 0.9)
    assert line.x == pytest.approx(60.0, abs=0.02)
    assert 0.2 < line.fwhm < 0.45


def test_counts_carry_their_own_noise():
    rng = np.random.default_rng(2)
    noise = noise_of(scan_of(rng.poisson(400.0, len(X))))
    assert noise.origin == "counting statistics"
    assert np.median(noise.sigma) == pytest.approx(20.0, rel=0.02)


def test_stated_noise_is_taken():
    assert np.array_equal(noise_of(scan_of(X % 7, np.full(len(X), 3.0))).sigma, np.full(len(X), 3.0))


def test_scaled_counts_show_their_noise_by_their_scatter():
    rng = np.random.default_rng(3)
    noise = noise_of(scan_of(0.37 * rng.poisson(400.0, len(X))))
    assert "scatter" in noise.origin
    assert np.median(noise.sigma) == pytest.approx(0.37 * 20.0, rel=0.1)


def test_noise_that_changes_along_the_scan_is_followed():
    rng = np.random.default_rng(4)
    scale = np.where(X < 60, 1.0, 0.05)
    noise = noise_of(scan_of(100.5 + scale * rng.normal(size=len(X))))
    assert np.median(noise.sigma[X < 55]) == pytest.approx(1.0, rel=0.15)
    assert np.median(noise.sigma[X > 65]) == pytest.approx(0.05, rel=0.15)


def test_the_background_passes_under_the_lines():
    rng = np.random.default_rng(5)
    smooth = 200.0 * np.exp(-(X - 20) / 25) + 50.0
    lines = sum(3000.0 * np.exp(-4 * np.log(2) * ((X - c) / 0.2) ** 2) for c in (30, 44, 44.4, 80))
    found = clipped_background(X, rng.poisson(smooth + lines).astype(float), 1.5)
    assert np.abs(found / smooth - 1.0).max() < 0.15
    assert np.median(np.abs(found / smooth - 1.0)) < 0.04


def test_the_smooth_curve_is_not_pulled_by_outliers():
    y = 100.0 + 0.5 * X
    y[1000:1005] += 500.0
    found = smooth_through(X, y, np.full(len(X), 2.0), 1.0)
    assert np.abs(found - (100.0 + 0.5 * X)).max() < 1.0


def test_widths_follow_angle_and_one_odd_line_does_not_pull():
    angle = np.linspace(20, 140, 20)
    width = 0.06 * np.exp(0.008 * (angle - 20))
    width[7] *= 4.0
    model = fit_widths(angle, width, np.ones(20), low=20.0, high=140.0)
    good = np.delete(np.arange(20), 7)
    assert np.abs(model.at(angle[good]) / width[good] - 1.0).max() < 0.05
    assert (model.at(np.array([-50.0, 300.0])) > 0).all()
