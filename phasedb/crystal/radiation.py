"""X-ray and electron wavelengths, and exact conversions between 2theta, d, Q and ring radius."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from phasedb.errors import InputError

FloatArray = NDArray[np.float64]
Convention = Literal["doublet", "alpha1", "mean", "literal", "electron"]


@dataclass(frozen=True, slots=True)
class EmissionLines:
    """K lines of an X-ray anode, Å on the SI scale.

    `beta` is the unresolved K-beta1,3 line where `beta_how` says so, else K-beta1.
    """

    anode: str
    alpha1: float
    alpha1_esd: float
    alpha2: float
    alpha2_esd: float | None
    beta: float
    beta_how: str

    @property
    def mean(self) -> float:
        """Weighted mean of the doublet, (2 alpha1 + alpha2)/3, Å (International Tables C, 2.3.5.2)."""
        return (2.0 * self.alpha1 + self.alpha2) / 3.0


# Deslattes, Kessler, Indelicato, de Billy, Lindroth & Anton, Rev. Mod. Phys. 75 (2003) 35; for Cr, Fe, Co and
# Cu the same as Hölzer, Fritsch, Deutsch, Härtwig & Förster, Phys. Rev. A 56 (1997) 4554. Wavelengths read in
# public documentation and data files; their standard uncertainties, and the K-beta of Mo and Ag, from memory.
EMISSION_LINES: Final[dict[str, EmissionLines]] = {
    "Cr": EmissionLines("Cr", 2.2897260, 3.0e-6, 2.2936510, 3.0e-6, 2.0848810, "K-beta1,3, read"),
    "Fe": EmissionLines("Fe", 1.9360410, 3.0e-6, 1.9399730, 3.0e-6, 1.7566040, "K-beta1,3, read"),
    "Co": EmissionLines("Co", 1.7889960, 1.0e-6, 1.7928350, 1.0e-6, 1.6208260, "K-beta1,3, read"),
    "Cu": EmissionLines("Cu", 1.5405929, 5.0e-7, 1.5444274, 5.0e-6, 1.3922350, "K-beta1,3, read"),
    "Mo": EmissionLines("Mo", 0.70931715, 4.1e-7, 0.7136070, 1.2e-5, 0.6323030, "K-beta1, from memory"),
    "Ag": EmissionLines("Ag", 0.55942178, 7.6e-7, 0.5638131, None, 0.4970820, "K-beta1, from memory"),
}

W_L_ALPHA1_ANGSTROM: Final = 1.47639
"""W L-alpha1, Å: Bearden, Rev. Mod. Phys. 39 (1967) 78 (from memory). Tungsten from the filament settles on
the anode, so the line may appear with any anode."""

HC_KEV_ANGSTROM: Final = 12.398419843320026
"""h c in keV Å, exact in the SI of 2019 (BIPM, SI Brochure, 9th edition)."""

ELECTRON_REST_ENERGY_KEV: Final = 510.99895069
"""m c² of the electron, keV: CODATA 2022."""


@dataclass(frozen=True, slots=True)
class Radiation:
    """The radiation of a measurement.

    Attributes
    ----------
    name : str
        As the user would write it: ``Cu``, ``Cu-Ka1``, ``Cu-mean``, ``electron``, or ``1.5406 A``.
    wavelength_angstrom : float
        The wavelength that turns positions into d: K-alpha1 for a doublet.
    convention : str
        ``doublet`` (positions are K-alpha1 peaks or unresolved blends), ``alpha1`` (monochromatic),
        ``mean``, ``literal`` (a wavelength given as a number) or ``electron``.
    anode : str or None
        The anode whose ghost lines may appear; None for none.
    wavelength_esd_angstrom : float or None
    """

    name: str
    wavelength_angstrom: float
    convention: Convention
    anode: str | None
    wavelength_esd_angstrom: float | None = None

    @property
    def lines(self) -> EmissionLines | None:
        """The emission lines of the anode, or None."""
        return EMISSION_LINES.get(self.anode) if self.anode else None


def electron_wavelength(energy_kev: float) -> float:
    """Return the relativistic de Broglie wavelength in Å of electrons of kinetic energy `energy_kev` (keV).

    Notes
    -----
    lambda = hc / sqrt(E² + 2 E m c²), with E the kinetic energy.
    """
    if not (np.isfinite(energy_kev) and energy_kev > 0):
        raise InputError(f"electron energy {energy_kev!r} keV: expected a number above 0")
    return float(HC_KEV_ANGSTROM / np.sqrt(energy_kev**2 + 2.0 * energy_kev * ELECTRON_REST_ENERGY_KEV))


def radiation_from_wavelength(wavelength_angstrom: float) -> Radiation:
    """Return a literal wavelength (Å) as a radiation; ghosts of an anode within 0.2 % of it are allowed."""
    if not (np.isfinite(wavelength_angstrom) and 0.01 <= wavelength_angstrom <= 10.0):
        raise InputError(
            f"wavelength {wavelength_angstrom!r} Å is not usable: expected 0.01 to 10 Å",
            hint="copper K-alpha1 is 1.5405929 Å; a value near 0.154 is in nm",
        )
    anode = None
    for lines in EMISSION_LINES.values():
        if min(abs(wavelength_angstrom / value - 1.0) for value in (lines.alpha1, lines.mean)) < 2e-3:
            anode = lines.anode
    return Radiation(f"{wavelength_angstrom:g} A", float(wavelength_angstrom), "literal", anode)


def radiation_from_name(name: str, *, energy_kev: float | None = None) -> Radiation:
    """Return the radiation called `name`: an anode, with ``-Ka1`` or ``-mean``, or ``electron``.

    Raises
    ------
    InputError
        If the name is not known, or `energy_kev` is missing for electrons.
    """
    text = name.strip()
    if text.casefold() == "electron":
        if energy_kev is None:
            raise InputError(
                "radiation 'electron' needs the electron energy",
                hint="give --energy-kv, or '# energy_kV: 200'",
            )
        return Radiation("electron", electron_wavelength(energy_kev), "electron", None)
    anode, _, kind = text.partition("-")
    lines = EMISSION_LINES.get(anode.strip().capitalize())
    kinds = {"": "doublet", "ka1": "alpha1", "mean": "mean"}
    convention = kinds.get(kind.strip().casefold())
    if lines is None or convention is None:
        raise InputError(
            f"radiation {name!r} is not known",
            hint="expected one of "
            + ", ".join(sorted(EMISSION_LINES))
            + ", each also with -Ka1 or -mean, or electron; or give --wavelength in Å",
        )
    label = lines.anode
    if convention == "doublet":
        return Radiation(label, lines.alpha1, "doublet", label, lines.alpha1_esd)
    if convention == "alpha1":
        return Radiation(f"{label}-Ka1", lines.alpha1, "alpha1", None, lines.alpha1_esd)
    esd = None if lines.alpha2_esd is None else (2.0 * lines.alpha1_esd + lines.alpha2_esd) / 3.0
    return Radiation(f"{label}-mean", lines.mean, "mean", label, esd)


def two_theta_from_d(d_angstrom: ArrayLike, wavelength_angstrom: float) -> FloatArray:
    """Return 2theta in degrees by Bragg's law, lambda = 2 d sin(theta); NaN where d < lambda/2."""
    sine = wavelength_angstrom / (2.0 * np.asarray(d_angstrom, dtype=np.float64))
    return 2.0 * np.degrees(np.arcsin(np.where(sine <= 1.0, sine, np.nan)))


def d_from_two_theta(two_theta_deg: ArrayLike, wavelength_angstrom: float) -> FloatArray:
    """Return d in Å from 2theta in degrees by Bragg's law."""
    return wavelength_angstrom / (2.0 * np.sin(np.radians(np.asarray(two_theta_deg, dtype=np.float64)) / 2.0))


def q_from_d(d_angstrom: ArrayLike) -> FloatArray:
    """Return Q = 2 pi / d in 1/Å."""
    return 2.0 * np.pi / np.asarray(d_angstrom, dtype=np.float64)


def d_from_q(q_per_angstrom: ArrayLike) -> FloatArray:
    """Return d = 2 pi / Q in Å."""
    return 2.0 * np.pi / np.asarray(q_per_angstrom, dtype=np.float64)


def d_from_ring_radius(
    radius_mm: ArrayLike,
    *,
    camera_constant_mm_angstrom: float | None = None,
    wavelength_angstrom: float | None = None,
    camera_length_mm: float | None = None,
) -> FloatArray:
    """Return d in Å from ring radii in mm.

    Exact (tan 2theta = r / L, then Bragg's law) when wavelength and camera length are given, else the
    small-angle form d = camera constant / r.

    Raises
    ------
    InputError
        If neither pair is given.
    """
    radius = np.asarray(radius_mm, dtype=np.float64)
    if wavelength_angstrom is not None and camera_length_mm is not None:
        return d_from_two_theta(np.degrees(np.arctan(radius / camera_length_mm)), wavelength_angstrom)
    if camera_constant_mm_angstrom is not None:
        return camera_constant_mm_angstrom / radius
    raise InputError(
        "ring radii need a camera constant, or the electron energy and the camera length",
        hint="give --camera-constant (mm Å), or --energy-kv with --camera-length (mm)",
    )


def ring_radius_from_d(
    d_angstrom: ArrayLike, wavelength_angstrom: float, camera_length_mm: float
) -> FloatArray:
    """Return ring radii in mm on a flat detector: r = L tan 2theta; NaN at 2theta >= 90 degrees."""
    two_theta = two_theta_from_d(d_angstrom, wavelength_angstrom)
    forward = np.where(two_theta < 90.0, two_theta, np.nan)
    return camera_length_mm * np.tan(np.radians(forward))
