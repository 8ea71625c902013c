"""Simulated lists of one cubic phase."""

from __future__ import annotations

import numpy as np
import pytest

from phasedb.crystal.lattice import allowed_n
from phasedb.crystal.radiation import radiation_from_name
from phasedb.measured.building import build_peak_list


def simulated_list(
    rng,
    *,
    lattice="F",
    a=4.05,
    noise=0.02,
    zero=0.0,
    displacement=0.0,
    low=20.0,
    high=110.0,
    seen=1.0,
    stated=False,
    radiation="Cu-Ka1",
    extra=0,
):
    """Return a list of the lines of a phase with zero error, noise (degrees) and displacement (mm)."""
    rays = radiation_from_name(radiation)
    n = allowed_n(lattice, int((2 * a / rays.wavelength_angstrom) ** 2))
    true = 2 * np.degrees(np.arcsin(rays.wavelength_angstrom * np.sqrt(n) / (2 * a)))
    inside = (true > low) & (true < high)
    true = true[inside]
    keep = rng.random(len(true)) < seen
    if keep.sum() >= 4:
        true = true[keep]
    esd = noise * (rng.uniform(0.5, 2.0, len(true)) if stated else np.ones(len(true)))
    shift = zero - 2 * displacement / 200.0 * np.degrees(1.0) * np.cos(np.radians(true / 2))
    position = true + shift + esd * rng.normal(size=len(true))
    position = np.append(position, rng.uniform(low, high, extra))
    return build_peak_list(
        position,
        unit="two-theta",
        esd=np.append(esd, np.full(extra, noise)) if stated else None,
        radiation=rays,
        measured_range=(low - 3, high + 3),
        goniometer_radius_mm=200.0,
    )


@pytest.fixture
def simulate():
    return simulated_list
