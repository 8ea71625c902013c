"""Which lines are a phase's, and which N each is."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from phasedb.characterise.assignment import assign, nearest_n
from phasedb.crystal.lattice import allowed_n
from phasedb.crystal.radiation import radiation_from_name

WAVELENGTH = radiation_from_name("Cu-Ka1").wavelength_angstrom


def lines(lattice, a, high=110.0):
    n = allowed_n(lattice, int((2 * a / WAVELENGTH) ** 2))
    two_theta = 2 * np.degrees(np.arcsin(WAVELENGTH * np.sqrt(n) / (2 * a)))
    return n[two_theta < high], two_theta[two_theta < high]


def assigned(two_theta, lattice, a):
    d = WAVELENGTH / (2 * np.sin(np.radians(two_theta / 2)))
    return assign(two_theta, d, WAVELENGTH, a_angstrom=a, allowed=allowed_n(lattice, 400))


@settings(max_examples=40)
@given(
    st.sampled_from(["P", "I", "F"]),
    st.floats(3.0, 6.0),
    st.floats(-0.008, 0.008),
    st.floats(-0.12, 0.12),
)
def test_lines_of_a_shifted_drifted_phase_find_their_n(lattice, a, drift, zero):
    n, two_theta = lines(lattice, a)
    if len(n) < 4:
        return
    found = assigned(two_theta + zero, lattice, a * (1 + drift))
    assert found.n.tolist() == n.tolist()


def test_lines_of_another_phase_are_left_alone():
    n, own = lines("F", 4.05)
    _, other = lines("I", 3.15)
    both = np.sort(np.concatenate([own, other]))
    found = assigned(both, "F", 4.06)
    assert both[found.line] == pytest.approx(own)
    assert found.n.tolist() == n.tolist()


def test_two_lines_never_share_an_n():
    _, own = lines("F", 4.05)
    doubled = np.sort(np.concatenate([own, own + 0.06]))
    found = assigned(doubled, "F", 4.05)
    assert len(set(found.n.tolist())) == len(found.n)


@given(st.floats(0.5, 390.0), st.sampled_from(["P", "I", "F"]))
def test_the_nearest_n_is_the_nearest_in_d(value, lattice):
    allowed = allowed_n(lattice, 400)
    found = nearest_n(np.array([value]), allowed)[0]
    away = np.abs(np.log(allowed / value))
    assert np.abs(np.log(found / value)) == pytest.approx(away.min())
