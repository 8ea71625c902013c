"""Figures of merit against their definitions, by hand."""

from __future__ import annotations

import numpy as np
import pytest

from phasedb.identify.merit import merit_f, merit_m, possible_lines


def test_f_is_lines_over_mean_deviation_times_possible() -> None:
    n = np.array([3, 4, 8, 11, 12])
    found = merit_f(n, np.full(5, 0.02), possible_lines("F", 12, None))
    assert found is not None
    assert (found.n, found.n_possible) == (5, 5)
    assert found.value == pytest.approx(1.0 / 0.02)


def test_missing_lines_and_a_late_start_are_counted() -> None:
    n = np.array([8, 12, 16])
    found = merit_f(n, np.array([0.01, -0.03, 0.02]), possible_lines("F", 16, None), n_first_in_range=8)
    assert found is not None
    assert (found.n_possible, found.n_possible_in_range) == (6, 4)  # 3 4 8 11 12 16; 8 11 12 16
    assert found.value == pytest.approx(3.0 / (0.02 * 6))


def test_only_the_first_thirty_lines_count() -> None:
    n = possible_lines("P", 60, None)[:40]
    found = merit_f(n, np.r_[np.full(30, 0.01), np.full(10, 5.0)], n)
    assert found is not None
    assert (found.n, found.mean_abs_delta_two_theta_deg) == (30, pytest.approx(0.01))


def test_m_by_hand() -> None:
    a, n = 4.0, np.array([1, 2, 3])
    d = a / np.sqrt(n)
    found = merit_m(n, 1.0 / np.sqrt(1.0 / d**2 + 0.001), a, possible_lines("P", 3, None))
    assert found is not None
    assert found.value == pytest.approx((3.0 / 16.0) / (2.0 * 0.001 * 3))


def test_no_lines_no_merit() -> None:
    empty = np.array([], dtype=np.int64)
    assert merit_f(empty, np.array([]), empty) is None
    assert merit_m(empty, np.array([]), 4.0, empty) is None
