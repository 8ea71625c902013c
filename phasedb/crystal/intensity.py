"""How strong each line of a phase is: |F|², multiplicity, Lorentz-polarisation.

Everything is summed per N = h²+k²+l², since the families of one N share one powder line.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from phasedb.crystal.lattice import LatticeType
from phasedb.crystal.phases import Phase, Site
from phasedb.crystal.radiation import EMISSION_LINES, HC_KEV_ANGSTROM, Radiation, two_theta_from_d
from phasedb.crystal.structure import reduced_orbit, space_group
from phasedb.errors import InputError

FloatArray = NDArray[np.float64]
Lines = tuple[NDArray[np.int32], NDArray[np.float64]]

D_MIN_ANGSTROM: Final = 0.36
"""Shortest d that lines are computed for: Mo K-alpha1 at 2theta = 160 degrees."""
N_MOST: Final = 2500
"""Highest N computed unless asked: a = 22.5 Å at the shortest d."""
S_MAX_PER_ANGSTROM: Final = 2.0
"""The form factors hold up to sin(theta)/lambda = 2 per Å (International Tables C, table 6.1.1.4)."""
TOO_WEAK: Final = 1e-9
"""Lines below this part of the strongest are rounding noise of a systematic absence."""
TWO_THETA_SCALE_DEG: Final = 160.0
"""100 is the strongest line up to here: beyond it, cos(theta) in Lorentz-polarisation runs to 0."""


@dataclass(frozen=True, slots=True, eq=False)
class _Reflections:
    """One hkl for each set of equivalents, ascending in N.

    hkl (n_reflections, 3); multiplicity (n_reflections,); n (n_lines,), distinct N; line (n_reflections,),
    index into n.
    """

    hkl: NDArray[np.int64]
    multiplicity: FloatArray
    n: NDArray[np.int64]
    line: NDArray[np.int64]


def _bucket(n_max: int) -> int:
    """Round up to a few sizes, so that phases of different a share cached sums."""
    size = 64
    while size < n_max:
        size = size * 3 // 2
    return size


@lru_cache(maxsize=64)
def _reflections(lattice: LatticeType, swaps_indices: bool, n_max: int) -> _Reflections:
    top = int(np.sqrt(n_max))
    h, k, l = (part.ravel() for part in np.indices((top + 1, top + 1, top + 1)))
    n = h * h + k * k + l * l
    keep = (h >= k) & (k >= l) & (n > 0) & (n <= n_max)
    if lattice == "I":
        keep &= (h + k + l) % 2 == 0
    elif lattice == "F":
        keep &= (h % 2 == k % 2) & (k % 2 == l % 2)
    hkl = np.stack([h[keep], k[keep], l[keep]], axis=1)
    signs = 2.0 ** np.count_nonzero(hkl, axis=1)
    equal = (hkl[:, 0] == hkl[:, 1]).astype(int) + (hkl[:, 1] == hkl[:, 2])
    multiplicity = signs * np.array([6.0, 3.0, 1.0])[equal]
    if not swaps_indices:
        # Laue class m-3: hkl and khl are two independent sets, each with half of the planes
        split = equal == 0
        multiplicity[split] /= 2.0
        hkl = np.concatenate([hkl, hkl[split][:, [1, 0, 2]]])
        multiplicity = np.concatenate([multiplicity, multiplicity[split]])
    total = (hkl**2).sum(axis=1)
    order = np.argsort(total, kind="stable")
    distinct, line = np.unique(total[order], return_inverse=True)
    return _Reflections(hkl[order], multiplicity[order], distinct, line)


@lru_cache(maxsize=512)
def _site_sums(name: str, position: tuple[float, float, float], n_bucket: int) -> NDArray[np.complex128]:
    """Return the sum of exp(2 pi i h.r) over the atoms of one site in the cubic cell, for each reflection."""
    group = space_group(name)
    hkl = _reflections(group.lattice_type, group.swaps_indices, n_bucket).hkl
    atoms = reduced_orbit(name, position)
    # exp(2 pi i (hx + ky + lz)) as a product of three table look-ups: far fewer exponentials
    orders = np.arange(int(hkl.max()) + 1)
    table = np.exp(2j * np.pi * orders[:, None, None] * atoms[None, :, :])
    terms = table[hkl[:, 0], :, 0] * table[hkl[:, 1], :, 1]
    terms *= table[hkl[:, 2], :, 2]
    total: NDArray[np.complex128] = terms.sum(axis=1) * len(group.centring)
    total.flags.writeable = False
    return total


@lru_cache(maxsize=256)
def _coefficients(symbol: str, probe: str) -> tuple[FloatArray, FloatArray, float, int]:
    import gemmi

    element = gemmi.Element("H" if symbol in "DT" else symbol)
    held = element.c4322 if probe == "electron" else element.it92
    if held is None:
        raise InputError(
            f"no published form factor is at hand for {symbol}", hint="enter the phase without a structure"
        )
    values = np.array(held.get_coefs(), dtype=np.float64)
    size = len(values) // 2
    constant = float(values[-1]) if len(values) % 2 else 0.0
    return values[:size], values[size : 2 * size], constant, int(element.atomic_number)


@lru_cache(maxsize=1024)
def anomalous_dispersion(symbol: str, wavelength_angstrom: float) -> tuple[float, float]:
    """Return f' and f'' in electrons, by the method of Cromer and Liberman (as gemmi computes them).

    References
    ----------
    Cromer & Liberman, Acta Cryst. A37 (1981) 267; Kissel & Pratt, Acta Cryst. A46 (1990) 170.
    """
    import gemmi

    number = gemmi.Element(symbol).atomic_number
    if not 3 <= number <= 92:  # outside the tables of the method; hydrogen and helium have none to speak of
        return 0.0, 0.0
    first, second = gemmi.cromer_liberman(number, 1000.0 * HC_KEV_ANGSTROM / wavelength_angstrom)
    return float(first), float(second)


def form_factor(symbol: str, s_per_angstrom: ArrayLike, *, probe: str = "xray") -> FloatArray:
    """Return the form factor of the neutral atom at s = sin(theta)/lambda (1/Å).

    X-ray in electrons, without dispersion; electron (``probe='electron'``) in Å.

    References
    ----------
    International Tables for Crystallography Vol. C, tables 6.1.1.4 (X-ray), 4.3.2.2 (electron), from gemmi.
    """
    heights, widths, constant, _ = _coefficients(symbol, probe)
    s2 = np.square(np.asarray(s_per_angstrom, dtype=np.float64))
    result: FloatArray = np.exp(-s2[..., None] * widths) @ heights + constant
    return result


def _site_amplitude(
    site: Site, s_per_angstrom: FloatArray, probe: str, wavelength_angstrom: float | None
) -> tuple[FloatArray, float]:
    """Return f0 + f' (per line) and f'' of the mean atom of a site, before the displacement factor."""
    real = np.zeros_like(s_per_angstrom)
    imaginary = 0.0
    for symbol, occupancy in site.species:
        real += occupancy * form_factor(symbol, s_per_angstrom, probe=probe)
        if wavelength_angstrom is not None:
            first, second = anomalous_dispersion(symbol, wavelength_angstrom)
            real += occupancy * first
            imaginary += occupancy * second
    return real, imaginary


def line_strengths(
    phase: Phase,
    *,
    n_max: int | None = None,
    d_min_angstrom: float = D_MIN_ANGSTROM,
    radiation: Radiation | None = None,
    dispersion: bool = True,
) -> Lines | None:
    """Return N and the sum of multiplicity times |F|² for each line of a phase, or None without a structure.

    Parameters
    ----------
    phase : Phase
    n_max : int, optional
        Highest N; else all lines down to `d_min_angstrom`, at most N = 2500.
    radiation : Radiation, optional
        Decides f' and f'' (default Cu K-alpha1) and, for electrons, the form factor.
    dispersion : bool
        Whether X-ray form factors carry f' and f''.

    Returns
    -------
    n : (n_lines,) int32
        Ascending; systematic absences are left out.
    strength : (n_lines,) float64
        One cell: electrons² for X-rays, Å² for electrons, without Lorentz-polarisation.

    Notes
    -----
    F = sum over atoms of (f0 + f' + i f'') exp(-B s²) exp(2 pi i (hx + ky + lz)), s = sin(theta)/lambda.
    A powder line holds hkl and its opposite; the mean of their |F|² is that of the part with f0 + f' plus
    that of the part with f''.
    """
    structure = phase.structure
    if structure is None:
        return None
    a = phase.a_angstrom
    top = min(int((a / d_min_angstrom) ** 2), N_MOST) if n_max is None else n_max
    top = min(top, int((2.0 * a * S_MAX_PER_ANGSTROM) ** 2))
    if top < 1:
        return np.zeros(0, dtype=np.int32), np.zeros(0)
    probe = "electron" if radiation is not None and radiation.convention == "electron" else "xray"
    wavelength = EMISSION_LINES["Cu"].alpha1 if radiation is None else radiation.wavelength_angstrom
    at_wavelength = wavelength if dispersion and probe == "xray" else None
    group = space_group(structure.space_group)
    bucket = _bucket(top)
    reflections = _reflections(group.lattice_type, group.swaps_indices, bucket)
    n = reflections.n[: np.searchsorted(reflections.n, top, side="right")]
    line = reflections.line[: np.searchsorted(reflections.line, len(n), side="left")]
    s = np.sqrt(n) / (2.0 * a)
    dispersive: NDArray[np.complex128] = np.zeros(len(line), dtype=np.complex128)
    absorptive: NDArray[np.complex128] = np.zeros(len(line), dtype=np.complex128)
    for site in structure.sites:
        sums = _site_sums(structure.space_group, site.position, bucket)[: len(line)]
        real, imaginary = _site_amplitude(site, s, probe, at_wavelength)
        damping = np.exp(-site.b_iso * s * s)
        dispersive += sums * (real * damping)[line]
        if imaginary:
            absorptive += sums * (imaginary * damping)[line]
    squared = np.square(np.abs(dispersive)) + np.square(np.abs(absorptive))
    strength = np.bincount(line, reflections.multiplicity[: len(line)] * squared, minlength=len(n))
    seen = strength > TOO_WEAK * strength.max(initial=0.0)
    return n[seen].astype(np.int32), strength[seen]


def lorentz_polarisation(
    two_theta_deg: ArrayLike, monochromator_two_theta_deg: float | None = None
) -> FloatArray:
    """Return (1 + c cos² 2theta) / ((1 + c) sin² theta cos theta), c = cos² 2theta_M, or 1.

    Powder in reflection geometry with fixed slits; `monochromator_two_theta_deg` is that of a crystal in the
    diffracted beam (26.6 degrees for graphite and Cu K-alpha); without one, c = 1.

    References
    ----------
    International Tables for Crystallography Vol. C, sections 6.2.3 to 6.2.5.
    """
    two_theta = np.radians(np.asarray(two_theta_deg, dtype=np.float64))
    c = 1.0 if monochromator_two_theta_deg is None else np.cos(np.radians(monochromator_two_theta_deg)) ** 2
    theta = two_theta / 2.0
    result: FloatArray = (1.0 + c * np.cos(two_theta) ** 2) / ((1.0 + c) * np.sin(theta) ** 2 * np.cos(theta))
    return result


def absolute_intensities(
    n: ArrayLike,
    strength: ArrayLike,
    a_angstrom: float,
    radiation: Radiation,
    monochromator_two_theta_deg: float | None = None,
) -> FloatArray:
    """Return the integrated intensity of each line per volume of sample: strength x LP / V², V = a³ in Å³.

    Comparable between phases (up to absorption); 0 where d is below lambda/2. Electrons have no
    Lorentz-polarisation here: their intensities are kinematical and weak evidence anyway.
    """
    d = a_angstrom / np.sqrt(np.asarray(n, dtype=np.float64))
    per_volume = np.asarray(strength, dtype=np.float64) / a_angstrom**6
    two_theta = two_theta_from_d(d, radiation.wavelength_angstrom)
    if radiation.convention == "electron":
        return np.where(np.isfinite(two_theta), per_volume, 0.0)
    factor = np.nan_to_num(lorentz_polarisation(two_theta, monochromator_two_theta_deg), nan=0.0)
    result: FloatArray = per_volume * factor
    return result


def relative_intensities(
    n: ArrayLike,
    strength: ArrayLike,
    a_angstrom: float,
    radiation: Radiation,
    monochromator_two_theta_deg: float | None = None,
) -> FloatArray:
    """Return intensities from 0 to 100, 100 for the strongest line up to 2theta = 160 degrees."""
    absolute = absolute_intensities(n, strength, a_angstrom, radiation, monochromator_two_theta_deg)
    two_theta = two_theta_from_d(
        a_angstrom / np.sqrt(np.asarray(n, dtype=float)), radiation.wavelength_angstrom
    )
    strongest = absolute[two_theta <= TWO_THETA_SCALE_DEG].max(initial=0.0) or absolute.max(initial=0.0)
    if strongest == 0.0:
        return absolute
    result: FloatArray = np.minimum(100.0 * absolute / strongest, 100.0)
    return result
