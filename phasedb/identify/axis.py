"""The coordinate that lines are scored on, and how shifts, noise and a lattice constant act on it.

With an X-ray wavelength the coordinate is 2theta in degrees; with electrons, or without a wavelength, it is
-ln d. On both, x grows with N, so one code serves both.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.radiation import (
    EMISSION_LINES,
    W_L_ALPHA1_ANGSTROM,
    Radiation,
    d_from_q,
    d_from_ring_radius,
    d_from_two_theta,
    radiation_from_name,
    two_theta_from_d,
)
from phasedb.identify.settings import ShiftPrior
from phasedb.measured.peaklist import PeakList

FloatArray = NDArray[np.float64]

DEFAULT_RADIUS_MM = 200.0  # common practice, no source: taken where the list does not say
ELECTRON_BELOW_ANGSTROM = 0.2  # shorter wavelengths than any laboratory X-ray tube's K lines

# Ghost lines: kind, how often a list shows them at all, height as a share of the parent's line.
# K-alpha2 : K-alpha1 is 1 : 2 (International Tables C, 2.3.5.2); a filter or mirror leaves K-beta and
# tungsten lines at the per-cent level (common practice, no source).
KIND_LINE, KIND_ALPHA2, KIND_BETA, KIND_TUNGSTEN = 0, 1, 2, 3


@dataclass(frozen=True, slots=True)
class Ghost:
    """An optional further line of every strong line.

    How often a list shows such lines at all, and their height relative to the parent's line (and its spread
    in ln).
    """

    kind: int
    wavelength_ratio: float
    frequency: float
    height: float
    height_spread: float


@dataclass(frozen=True, slots=True)
class Axis:
    """Observed lines on the scoring coordinate.

    Attributes
    ----------
    x : (n,) ascending
    ln_intensity : (n,) or None
        ln of intensity with the strongest line at 1.
    extra_noise : (n,)
        Part of the noise that the list itself declares (esd and width), in units of x.
    noise_profile : (n,)
        The list's noise at each line relative to its scale. 1 for angles and rings. A list of d alone was
        read from angles nearly always, so that its relative noise grows as cot(theta), about as d.
    low, high : float
        Measured range on x.
    wavelength : float or None
        Å; None on the ln d coordinate.
    shift_mean, shift_scale : (3,)
        Student-t centres and scales of the three shift terms: zero (degrees), displacement (mm), and the part
        of the unresolved doublet's offset that the list's peaks show; on ln d, the common scale and nothing.
    noise_center, noise_spread : float
        Median of the list's noise scale and its spread in ln.
    resolution : float
        Lines of one phase or set closer than this are one line.
    doublet_ratio, doublet_width : float
        ln of (mean / K-alpha1 wavelength), signed so that the offset is added to the positions predicted; 0
        without a doublet. The width (degrees) at which the two lines part.
    doublet_resolved : bool
        True where the wavelength is the mean, so that it is the resolved lines that are offset.
    most_certain : float
        The chance above which no line is expected; less for rings, which merge and fade.
    height_factor : float
        How much wider heights scatter than a powder's X-ray lines do: electrons say little by intensity.
    blocked : tuple of (low, high)
        Stretches hidden by foreign lines: nothing is expected there.
    """

    x: FloatArray
    ln_intensity: FloatArray | None
    extra_noise: FloatArray
    noise_profile: FloatArray
    low: float
    high: float
    wavelength: float | None
    radius_mm: float
    shift_mean: FloatArray
    shift_scale: FloatArray
    noise_center: float
    noise_spread: float
    resolution: float
    doublet_ratio: float
    doublet_width: float
    doublet_resolved: bool
    ghosts: tuple[Ghost, ...]
    most_certain: float = 0.98
    height_factor: float = 1.0
    read_from_angles: bool = False
    likely_wavelength: float | None = None
    blocked: tuple[tuple[float, float], ...] = ()

    @property
    def is_angle(self) -> bool:
        return self.wavelength is not None

    @property
    def span(self) -> float:
        return self.high - self.low

    def positions(self, ln_n: FloatArray, ln_a: FloatArray) -> FloatArray:
        """Return true (unshifted) x of lines with ½ ln N + ln(wavelength ratio) = `ln_n`; NaN beyond 180°."""
        if self.wavelength is None:
            return ln_n - ln_a
        sine = np.exp(ln_n - ln_a) * (self.wavelength / 2.0)
        with np.errstate(invalid="ignore"):
            return np.asarray(np.degrees(2.0 * np.arcsin(sine)), dtype=np.float64)

    def slope(self, x_true: FloatArray) -> FloatArray:
        """Return dx / d ln a at true positions (degrees, or -1)."""
        if self.wavelength is None:
            return np.full_like(x_true, -1.0)
        return np.asarray(-2.0 * np.degrees(np.tan(np.radians(x_true) / 2.0)))

    def displacement_basis(self, x_true: FloatArray) -> FloatArray:
        """Return dx/ds for displacement s in mm: -(2/R)(180/pi) cos(theta).

        On ln d of a list that was read from angles, the offset of a zero error, which grows as d; else zero.
        """
        if self.wavelength is None:
            return np.exp(-x_true) / TYPICAL_D_ANGSTROM if self.read_from_angles else np.zeros_like(x_true)
        return np.asarray(-(2.0 / self.radius_mm) * np.degrees(np.cos(np.radians(x_true) / 2.0)))

    @property
    def tilt(self) -> FloatArray:
        """Return 1/d² of the observed lines, its mean taken off, on a scale of 1 for the list's whole
        range.
        """
        q = np.exp(-2.0 * self.ln_d(self.x))
        width = float(q.max() - q.min()) if len(q) else 0.0
        return np.zeros_like(q) if width == 0.0 else np.asarray((q - q.mean()) / width)

    def bases(self, x_true: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return dx/d(shift term) at true positions for the three shift terms."""
        return np.ones_like(x_true), self.displacement_basis(x_true), self.doublet_basis(x_true)

    def doublet_basis(self, x_true: FloatArray) -> FloatArray:
        """Return the offset of a peak of the doublet, in degrees.

        Where the splitting is small beside the width, a peak is the weighted mean of K-alpha1 and K-alpha2;
        where it is large, K-alpha1: a smooth step between (its form: common practice, no source).
        """
        if self.doublet_ratio == 0.0:
            return np.zeros_like(x_true)
        offset = np.degrees(2.0 * np.tan(np.radians(x_true) / 2.0)) * self.doublet_ratio
        parted = (3.0 * np.abs(offset) / self.doublet_width) ** 4
        share = parted / (1.0 + parted) if self.doublet_resolved else 1.0 / (1.0 + parted)
        return np.asarray(offset * share)

    def shift(self, x_true: FloatArray, phi: FloatArray) -> FloatArray:
        """Return the sum of the shift terms `phi` (3,) at true positions."""
        return np.asarray(sum(value * basis for value, basis in zip(phi, self.bases(x_true), strict=True)))

    def ln_d(self, x_true: FloatArray) -> FloatArray:
        """Return ln d (Å) of true positions."""
        if self.wavelength is None:
            return -x_true
        half = np.radians(np.clip(x_true, 1e-3, 179.9)) / 2.0
        return np.asarray(np.log(self.wavelength / 2.0) - np.log(np.sin(half)))


def _ghosts(radiation: Radiation | None) -> tuple[Ghost, ...]:
    if radiation is None or radiation.anode is None:
        return ()
    lines = EMISSION_LINES[radiation.anode]
    base = radiation.wavelength_angstrom
    found = [
        Ghost(KIND_BETA, lines.beta / base, 0.12, 0.03, 1.2),
        Ghost(KIND_TUNGSTEN, W_L_ALPHA1_ANGSTROM / base, 0.04, 0.02, 1.0),
    ]
    if radiation.convention in ("doublet", "literal") and abs(base / lines.alpha1 - 1.0) < 2e-4:
        found.append(Ghost(KIND_ALPHA2, lines.alpha2 / base, 0.10, 0.5, 0.25))
    return tuple(found)


@dataclass(frozen=True, slots=True)
class _Doublet:
    ratio: float
    resolved: bool
    usual: float
    spread: float


def _doublet(radiation: Radiation) -> _Doublet:
    """Return how peaks of this radiation may be offset by the doublet, and how much they usually are."""
    lines = radiation.lines
    if lines is None or radiation.convention in ("alpha1", "electron"):
        return _Doublet(0.0, False, 0.0, NEVER)
    step = float(np.log(lines.mean / lines.alpha1))
    nearer_mean = abs(radiation.wavelength_angstrom / lines.mean - 1.0) < 3e-4
    if nearer_mean:
        return _Doublet(-step, True, 0.3, 0.4)
    usual = 0.6 if radiation.convention == "doublet" else 0.4
    return _Doublet(step, False, usual, 0.4)


def is_angle_scored(peaks: PeakList) -> bool:
    """Return whether a list is scored on 2theta (X-rays) rather than on ln d (electrons, or no
    wavelength).
    """
    radiation = peaks.radiation
    return (
        radiation is not None
        and radiation.convention != "electron"
        and radiation.wavelength_angstrom > ELECTRON_BELOW_ANGSTROM
    )


def make_axis(peaks: PeakList, prior: ShiftPrior) -> Axis:
    """Return the scoring axis of a peak list."""
    radiation = peaks.radiation
    angle = is_angle_scored(peaks)
    ln_intensity = None if peaks.intensity is None else np.log(peaks.intensity / peaks.intensity.max())
    radius = peaks.goniometer_radius_mm or DEFAULT_RADIUS_MM
    fwhm = np.nan_to_num(peaks.fwhm) if peaks.fwhm is not None else np.zeros(len(peaks))
    esd = np.nan_to_num(peaks.esd) if peaks.esd is not None else np.zeros(len(peaks))
    low, high = _range_on_axis(peaks, angle)
    if angle:
        assert radiation is not None and peaks.two_theta_deg is not None
        extra = np.hypot(esd, WIDTH_TO_NOISE * fwhm)
        typical_width = float(np.median(fwhm)) if fwhm.any() else 0.0
        doublet = _doublet(radiation)
        return Axis(
            x=peaks.two_theta_deg,
            ln_intensity=ln_intensity,
            extra_noise=extra,
            noise_profile=np.ones(len(peaks)),
            low=low,
            high=high,
            wavelength=radiation.wavelength_angstrom,
            radius_mm=radius,
            shift_mean=np.array([prior.zero_deg, prior.displacement_mm, doublet.usual]),
            shift_scale=np.array([prior.zero_scale_deg, prior.displacement_scale_mm, doublet.spread]),
            noise_center=NOISE_CENTER_DEG,
            noise_spread=NOISE_SPREAD,
            resolution=max(0.03, 0.5 * typical_width),
            doublet_ratio=doublet.ratio,
            doublet_width=typical_width or USUAL_WIDTH_DEG,
            doublet_resolved=doublet.resolved,
            ghosts=_ghosts(radiation),
        )
    relative = np.ones(len(peaks))
    if peaks.two_theta_deg is not None:  # electrons: the list's degrees become relative
        relative = 1.0 / (2.0 * np.degrees(np.tan(np.radians(peaks.two_theta_deg) / 2.0)))
    extra = np.hypot(esd, WIDTH_TO_NOISE * fwhm) * relative
    is_camera = peaks.unit == "ring" or radiation is not None
    likely = None if is_camera else _likely_radiation(peaks)
    return Axis(
        x=-np.log(peaks.d_angstrom),
        ln_intensity=ln_intensity,
        extra_noise=extra,
        noise_profile=np.ones(len(peaks))
        if is_camera
        else np.clip(peaks.d_angstrom / TYPICAL_D_ANGSTROM, 0.4, 4.0),
        low=low,
        high=high,
        wavelength=None,
        radius_mm=radius,
        shift_mean=np.zeros(3),
        shift_scale=np.array(
            [_scale_esd(peaks, is_camera=is_camera), NEVER if is_camera else ZERO_OF_D_LIST, NEVER]
        ),
        noise_center=NOISE_CENTER_RELATIVE_CAMERA if is_camera else NOISE_CENTER_RELATIVE,
        noise_spread=NOISE_SPREAD,
        resolution=2e-3 if is_camera else 5e-4,
        doublet_ratio=0.0,
        doublet_width=1.0,
        doublet_resolved=False,
        ghosts=() if likely is None else _ghosts(likely),
        most_certain=RING_CERTAINTY if is_camera else 0.98,
        height_factor=RING_HEIGHT_FACTOR if is_camera else 1.0,
        read_from_angles=not is_camera,
        likely_wavelength=None if likely is None else likely.wavelength_angstrom,
    )


def _scale_esd(peaks: PeakList, *, is_camera: bool) -> float:
    """Return the scale of the common error in ln d: a calibration's own, else the usual one."""
    if peaks.scale_esd_relative is not None:
        return peaks.scale_esd_relative
    return SCALE_OF_CAMERA if is_camera else SCALE_OF_D_LIST


def _likely_radiation(peaks: PeakList) -> Radiation:
    """Return the radiation that a list of d alone was most likely read with: copper, if it reaches."""
    for anode in ("Cu", "Mo"):
        if peaks.d_angstrom.min() > 0.51 * EMISSION_LINES[anode].alpha1:
            return radiation_from_name(anode)
    return radiation_from_name("Ag")


def _range_on_axis(peaks: PeakList, angle: bool) -> tuple[float, float]:
    """Return the measured range on the scoring coordinate."""
    ends = np.array([peaks.range_low, peaks.range_high])
    if angle and peaks.unit == "two-theta":
        return float(ends[0]), float(ends[1])
    with np.errstate(divide="ignore"):
        if peaks.unit == "d":
            d = ends
        elif peaks.unit == "q":
            d = d_from_q(ends)
        elif peaks.unit == "two-theta":
            assert peaks.radiation is not None
            d = d_from_two_theta(ends, peaks.radiation.wavelength_angstrom)
        elif peaks.ring_scale_approximate or peaks.radiation is None:
            d = peaks.position[0] * peaks.d_angstrom[0] / ends
        else:
            d = d_from_ring_radius(
                ends,
                wavelength_angstrom=peaks.radiation.wavelength_angstrom,
                camera_length_mm=peaks.camera_length_mm,
            )
        if angle:
            assert peaks.radiation is not None
            values = two_theta_from_d(
                np.maximum(d, peaks.radiation.wavelength_angstrom / 2.0), peaks.radiation.wavelength_angstrom
            )
        else:
            values = -np.log(d)
    low = float(values.min())
    if not np.isfinite(low):  # a range that starts at zero angle: nothing cubic lies beyond d = 30 Å
        low = min(-np.log(30.0), -float(np.log(peaks.d_angstrom.max())) - 0.1)
    return low, float(values.max())


# Scales of the model, tuned on the tuning seeds of tests/study (never on the reporting
# seeds).
NOISE_CENTER_DEG = 0.02
NOISE_SPREAD = 0.9
NOISE_CENTER_RELATIVE = 6e-4
NOISE_CENTER_RELATIVE_CAMERA = 3e-3
SCALE_OF_CAMERA = 5e-3
SCALE_OF_D_LIST = 6e-4
ZERO_OF_D_LIST = 9e-4  # of ln d at TYPICAL_D_ANGSTROM: a zero error of 0.05 degrees with copper radiation
TYPICAL_D_ANGSTROM = 1.5
WIDTH_TO_NOISE = 0.06
USUAL_WIDTH_DEG = 0.15
RING_CERTAINTY = 0.85
RING_HEIGHT_FACTOR = 1.8
NEVER = 1e-9  # the scale of a term that does not exist
