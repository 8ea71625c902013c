"""The camera constant or camera length of an electron camera, from the rings of a standard film."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.characterise.cells import StartingCell
from phasedb.crystal.lattice import allowed_n, hkl_text
from phasedb.crystal.radiation import ring_radius_from_d
from phasedb.errors import InputError

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

FEWEST_RINGS: Final = 3
HIGHEST_N: Final = 60
"""Rings of a standard film further out are too weak to be measured."""
RING_NOISE: Final = 0.006
"""Relative noise of a measured ring radius; `common practice, no source`."""
MISSING_COSTS: Final = 1.5
"""Natural log of the odds against a ring that is expected between the others and not seen."""
LEAST_ESD: Final = 1e-3
"""Least relative uncertainty of a calibration: rings are not quite round; `common practice, no source`."""
SAME_SCALE: Final = 0.02


@dataclass(frozen=True, slots=True)
class CameraCalibration:
    """What the rings of a standard give.

    Attributes
    ----------
    camera_constant_mm_angstrom, camera_length_mm : float or None
        The length where the electron energy is known, else the constant.
    esd_relative : float
    n : tuple of int, N of each ring in the order of radii
    residual_relative : tuple of float, observed over calculated radius less 1
    text : str, for the user
    """

    camera_constant_mm_angstrom: float | None
    camera_length_mm: float | None
    esd_relative: float
    n: tuple[int, ...]
    residual_relative: tuple[float, ...]
    text: str


def calibrate_camera(
    radius_mm: FloatArray,
    cell: StartingCell,
    *,
    name: str,
    wavelength_angstrom: float | None,
    near: float | None = None,
    source: str = "",
) -> CameraCalibration:
    """Return the camera calibration from ring radii (mm) of a phase of known a.

    Parameters
    ----------
    wavelength_angstrom : float or None
        Electron wavelength: then the camera length is found exactly, r = L tan 2theta, else d = constant / r.
    near : float or None
        A rough value of the length or constant sought; the answer lies within 10 % of it.

    Raises
    ------
    InputError
        For fewer than three rings, rings that no scale explains, or that two scales explain equally well.
    """
    radius = np.unique(np.asarray(radius_mm, dtype=np.float64))
    if len(radius) < FEWEST_RINGS:
        raise InputError(
            f"{len(radius)} rings of the standard: a calibration needs at least {FEWEST_RINGS}",
            where=source,
            hint="measure more rings of the standard film",
        )
    allowed = allowed_n(cell.lattice_type, HIGHEST_N) if cell.allowed is None else cell.allowed
    allowed = allowed[allowed <= HIGHEST_N]
    unit_radius = _unit_radius(cell.a_angstrom, allowed, wavelength_angstrom)
    scales = _candidates(radius, unit_radius, near)
    scored = sorted(((_score(radius, unit_radius, scale), scale) for scale in scales), reverse=True)
    if not scored or scored[0][0] <= 0:
        raise InputError(
            f"the rings do not fit {name} ({cell.lattice_type}, a = {cell.a_angstrom:g} Å) at any scale",
            where=source,
            hint="check the standard's name, and that radii (not diameters) in mm are given",
        )
    best = scored[0]
    rivals = [other for other in scored if abs(other[1] / best[1] - 1.0) > SAME_SCALE]
    if rivals and rivals[0][0] > best[0] - 2.0:
        raise InputError(
            f"the rings fit {name} at two scales, {best[1]:.4g} and {rivals[0][1]:.4g}, about equally well",
            where=source,
            hint="give a rough --camera-length or --camera-constant, or more rings",
        )
    return _settled(radius, unit_radius, allowed, best[1], wavelength_angstrom, cell, name)


def _unit_radius(a: float, n: IntArray, wavelength: float | None) -> FloatArray:
    """Return ring radii at a camera length of 1 mm, or at a camera constant of 1 mm Å."""
    d = a / np.sqrt(n)
    return ring_radius_from_d(d, wavelength, 1.0) if wavelength is not None else 1.0 / d


def _candidates(radius: FloatArray, unit_radius: FloatArray, near: float | None) -> FloatArray:
    scales = (radius[:3, None] / unit_radius[None, :10]).ravel()
    scales = scales[np.isfinite(scales)]
    if near is not None:
        scales = scales[np.abs(scales / near - 1.0) < 0.1]
    return np.array([_improved(radius, unit_radius, float(scale)) for scale in scales])


def _nearest(radius: FloatArray, unit_radius: FloatArray, scale: float) -> tuple[IntArray, FloatArray]:
    """Return the index of the line nearest to each ring, and ln observed - ln calculated."""
    away = np.log(radius)[:, None] - np.log(scale * unit_radius)[None, :]
    which = np.abs(away).argmin(axis=1)
    return which.astype(np.int64), away[np.arange(len(radius)), which]


def _improved(radius: FloatArray, unit_radius: FloatArray, scale: float) -> float:
    for _ in range(3):
        _, away = _nearest(radius, unit_radius, scale)
        weight = np.exp(-0.5 * (away / (2.0 * RING_NOISE)) ** 2)
        if weight.sum() < 1e-6:
            break
        scale *= float(np.exp((weight * away).sum() / weight.sum()))
    return scale


def _score(radius: FloatArray, unit_radius: FloatArray, scale: float) -> float:
    which, away = _nearest(radius, unit_radius, scale)
    span = max(float(np.log(radius[-1] / radius[0])), 0.1)
    density = len(radius) / span
    gauss = np.exp(-0.5 * (away / RING_NOISE) ** 2) / (RING_NOISE * np.sqrt(2.0 * np.pi))
    gain = float(np.log(0.02 + 0.98 * gauss / density).sum())
    distinct = len(np.unique(which))
    between = (scale * unit_radius >= 0.99 * radius[0]) & (scale * unit_radius <= 1.01 * radius[-1])
    before = int((scale * unit_radius < 0.99 * radius[0]).sum())
    missing = int(between.sum()) - distinct
    return gain - MISSING_COSTS * (max(missing, 0) + before) - 3.0 * (len(radius) - distinct)


def _settled(
    radius: FloatArray,
    unit_radius: FloatArray,
    allowed: IntArray,
    scale: float,
    wavelength: float | None,
    cell: StartingCell,
    name: str,
) -> CameraCalibration:
    which, away = _nearest(radius, unit_radius, scale)
    used = np.abs(away) < 4.0 * RING_NOISE
    if int(used.sum()) < FEWEST_RINGS:
        raise InputError(f"only {int(used.sum())} of the rings are rings of {name}")
    scale *= float(np.exp(away[used].mean()))
    away = away - away[used].mean()
    spread = float(np.sqrt((away[used] ** 2).sum() / (used.sum() - 1)))
    esd = max(spread / float(np.sqrt(used.sum())), LEAST_ESD)
    what, unit = ("camera length", "mm") if wavelength is not None else ("camera constant", "mm Å")
    rings = ", ".join(hkl_text(int(n), cell.lattice_type) for n in allowed[which[used]])
    return CameraCalibration(
        camera_constant_mm_angstrom=None if wavelength is not None else scale,
        camera_length_mm=scale if wavelength is not None else None,
        esd_relative=esd,
        n=tuple(int(n) for n in allowed[which]),
        residual_relative=tuple(float(value) for value in np.expm1(away)),
        text=f"{what} {scale:.5g} {unit} (± {100 * esd:.2f} %) from {int(used.sum())} rings of {name}: "
        + rings,
    )
