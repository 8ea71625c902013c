"""From plain arrays to a checked `PeakList`: sorting, merging, range, conversions."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from phasedb.crystal.radiation import (
    Radiation,
    d_from_q,
    d_from_ring_radius,
    d_from_two_theta,
    two_theta_from_d,
)
from phasedb.errors import InputError
from phasedb.measured.merging import merge_close
from phasedb.measured.peaklist import FloatArray, PeakList, PositionUnit

MOST_LINES: Final = 2000
"""A list with more lines is a scan."""
RANGE_MARGIN: Final = 0.02
"""A range that was not given: the span of the lines, widened on each side by this share of it."""
RANGE_REMARK: Final = "measured range not given"
"""How the caution about an assumed range starts."""

UNIT_WORDS: Final[dict[PositionUnit, tuple[str, str]]] = {
    "two-theta": ("2theta", "degrees"),
    "d": ("d", "Å"),
    "q": ("Q", "1/Å"),
    "ring": ("ring radius", "mm"),
}


def build_peak_list(
    position: ArrayLike,
    *,
    unit: PositionUnit,
    intensity: ArrayLike | None = None,
    esd: ArrayLike | None = None,
    fwhm: ArrayLike | None = None,
    fwhm_in_deg: bool = False,
    radiation: Radiation | None = None,
    measured_range: tuple[float, float] | None = None,
    goniometer_radius_mm: float | None = None,
    temperature_k: float | None = None,
    camera_length_mm: float | None = None,
    camera_constant_mm_angstrom: float | None = None,
    source: str = "",
    sha256: str = "",
    sample: str = "",
    notes: tuple[str, ...] = (),
    places: Sequence[str] | None = None,
) -> PeakList:
    """Return a checked list of lines, sorted, close lines merged, converted to d and 2theta.

    Parameters
    ----------
    position, esd, fwhm : (n_lines,) array-like
        In `unit` (degrees, Å, 1/Å or mm); NaN in `esd` and `fwhm` where a line has none.
    fwhm_in_deg : bool
        True if `fwhm` is in degrees 2theta although the positions are not.
    intensity : (n_lines,) array-like, any scale
    measured_range : (low, high) in `unit`, or None for an assumed one
    places : one text for each line, where it was read; used in errors

    Raises
    ------
    InputError
        For a position that cannot be, a range that leaves lines out, more than 2000 lines, 2theta without a
        wavelength.
    """
    values = np.atleast_1d(np.array(position, dtype=np.float64))
    where = list(places) if places is not None else [source] * len(values)
    wavelength = radiation.wavelength_angstrom if radiation is not None else None
    _check_positions(values, unit, wavelength, where=where, source=source)
    # A camera constant given beside a camera length is the calibrated one: it wins.
    length = None if camera_constant_mm_angstrom is not None else camera_length_mm

    d = _d_of(values, unit, wavelength, length, camera_constant_mm_angstrom, source)
    _check_bragg(values, d, unit, wavelength, where)
    order = np.argsort(-d, kind="stable")
    values, d = values[order], d[order]
    where = [where[index] for index in order]
    remarks = list(notes)
    strength = _checked_intensity(intensity, order, where, remarks)

    slope = _relative_slope(values, unit, wavelength, length)
    # Electron lists share an error of scale, not an angle offset: they stay on ln d.
    if wavelength is not None and radiation is not None and radiation.convention != "electron":
        two_theta = two_theta_from_d(d, wavelength) if unit != "two-theta" else values.copy()
        to_scale = 2.0 * np.tan(np.radians(two_theta) / 2.0) * (180.0 / np.pi) * slope
        if unit == "two-theta":
            to_scale = np.ones_like(values)
    else:
        two_theta, to_scale = None, slope
    scaled_esd = _checked_width(esd, "esd", order, where, to_scale)
    if fwhm_in_deg and two_theta is None:
        remarks.append("the widths are in degrees and no wavelength is known: they were not used")
        scaled_fwhm = None
    else:
        unchanged = np.ones_like(values) if fwhm_in_deg else to_scale
        scaled_fwhm = _checked_width(fwhm, "fwhm", order, where, unchanged)

    low, high, assumed = _range_of(values, measured_range, unit, wavelength, where, source)
    if assumed:
        word, per = UNIT_WORDS[unit]
        remarks.append(
            f"{RANGE_REMARK}: assumed {low:.4g} to {high:.4g} {per} ({word}); "
            "lines missing outside the lines listed cannot count"
        )
    columns = merge_close(values, d, two_theta, strength, scaled_esd, scaled_fwhm, remarks)
    values, d, two_theta, strength, scaled_esd, scaled_fwhm = columns
    approximate = unit == "ring" and camera_constant_mm_angstrom is not None
    if approximate:
        remarks.append("d = camera constant / ring radius, the small-angle form")
    return PeakList(
        position=values,
        unit=unit,
        d_angstrom=d,
        two_theta_deg=two_theta,
        intensity=strength,
        esd=scaled_esd,
        fwhm=scaled_fwhm,
        radiation=radiation,
        range_low=low,
        range_high=high,
        range_assumed=assumed,
        goniometer_radius_mm=goniometer_radius_mm,
        temperature_k=temperature_k,
        source=source,
        sha256=sha256,
        sample=sample,
        ring_scale_approximate=approximate,
        camera_length_mm=camera_length_mm,
        notes=tuple(remarks),
    )


def _check_positions(
    values: FloatArray, unit: PositionUnit, wavelength: float | None, *, where: list[str], source: str
) -> None:
    word, per = UNIT_WORDS[unit]
    if len(values) == 0:
        raise InputError("the list holds no lines", where=source, hint="give at least one line position")
    if len(values) > MOST_LINES:
        raise InputError(
            f"{len(values)} lines: expected at most {MOST_LINES}",
            where=source,
            hint="this looks like a scan; find its lines with: phasedb peaks SCAN",
        )
    bad = np.flatnonzero(~(np.isfinite(values) & (values > 0)))
    if bad.size:
        raise InputError(
            f"{word} {values[bad[0]]:g}: expected a finite number above 0 ({per})",
            where=where[bad[0]],
            hint="correct or remove the line",
        )
    if unit == "two-theta":
        bad = np.flatnonzero(values >= 180.0)
        if bad.size:
            raise InputError(
                f"2theta {values[bad[0]]:g}: expected a number below 180 degrees",
                where=where[bad[0]],
                hint="if these are d-spacings or Q, say so with --unit d or --unit q",
            )
        if wavelength is None:
            raise InputError(
                "2theta positions need a wavelength, and none is given",
                where=source,
                hint="add '# radiation: Cu' or '# wavelength_angstrom: 1.5406' to the file, "
                "or give --radiation or --wavelength",
            )


def _d_of(
    values: FloatArray,
    unit: PositionUnit,
    wavelength: float | None,
    camera_length_mm: float | None,
    camera_constant: float | None,
    source: str,
) -> FloatArray:
    if unit == "d":
        return values.copy()
    if unit == "q":
        return d_from_q(values)
    if unit == "two-theta" and wavelength is not None:
        return d_from_two_theta(values, wavelength)
    try:
        return d_from_ring_radius(
            values,
            camera_constant_mm_angstrom=camera_constant,
            wavelength_angstrom=wavelength,
            camera_length_mm=camera_length_mm,
        )
    except InputError as error:
        raise InputError(error.what, where=source, hint=error.hint) from None


def _check_bragg(
    values: FloatArray, d: FloatArray, unit: PositionUnit, wavelength: float | None, where: list[str]
) -> None:
    if wavelength is None or unit not in ("d", "q"):
        return
    bad = np.flatnonzero(2.0 * d <= wavelength)
    if bad.size:
        word, per = UNIT_WORDS[unit]
        raise InputError(
            f"{word} = {values[bad[0]]:g} {per}: d must lie above half the wavelength "
            f"({wavelength / 2.0:.5g} Å) and is {d[bad[0]]:.5g} Å",
            where=where[bad[0]],
            hint="no line can lie there: check the unit and the wavelength",
        )


def _checked_intensity(
    intensity: ArrayLike | None, order: NDArray[np.intp], where: list[str], remarks: list[str]
) -> FloatArray | None:
    if intensity is None:
        return None
    given: FloatArray = np.array(intensity, dtype=np.float64)[order]
    bad = np.flatnonzero(np.isinf(given) | (given < 0))
    if bad.size:
        raise InputError(
            f"intensity {given[bad[0]]:g}: expected a finite number, 0 or above",
            where=where[bad[0]],
            hint="correct it or leave the column out",
        )
    missing = np.isnan(given)
    if missing.any():
        remarks.append(
            f"{int(missing.sum())} of {len(given)} lines have no intensity: intensities were not used"
        )
        return None
    if not (given > 0).any():
        remarks.append("all intensities are 0: they were not used")
        return None
    zero = given == 0
    if zero.any():
        given[zero] = 0.5 * given[~zero].min()
        remarks.append(f"{int(zero.sum())} lines have intensity 0: taken as half of the weakest other line")
    return given


def _checked_width(
    width: ArrayLike | None, name: str, order: NDArray[np.intp], where: list[str], scale: FloatArray
) -> FloatArray | None:
    if width is None:
        return None
    given = np.array(width, dtype=np.float64)[order]
    bad = np.flatnonzero(np.isinf(given) | (given < 0))
    if bad.size:
        raise InputError(
            f"{name} {given[bad[0]]:g}: expected a finite number above 0",
            where=where[bad[0]],
            hint="correct it or leave the cell empty",
        )
    scaled: FloatArray = np.where(given > 0, given * scale, np.nan)
    return None if np.isnan(scaled).all() else scaled


def _relative_slope(
    values: FloatArray, unit: PositionUnit, wavelength: float | None, camera_length_mm: float | None
) -> FloatArray:
    """Return |d ln d / d position| for each line."""
    if unit == "two-theta":
        return np.asarray(np.radians(0.5) / np.tan(np.radians(values) / 2.0))
    if unit == "ring" and wavelength is not None and camera_length_mm is not None:
        two_theta = np.arctan(values / camera_length_mm)
        per_mm = camera_length_mm / (camera_length_mm**2 + values**2)
        return np.asarray(0.5 / np.tan(two_theta / 2.0) * per_mm)
    return 1.0 / values


def _range_of(
    values: FloatArray,
    given: tuple[float, float] | None,
    unit: PositionUnit,
    wavelength: float | None,
    where: list[str],
    source: str,
) -> tuple[float, float, bool]:
    word, per = UNIT_WORDS[unit]
    ceiling = {"two-theta": 180.0}.get(unit, np.inf)
    if unit == "q" and wavelength is not None:
        ceiling = 4.0 * np.pi / wavelength
    floor = wavelength / 2.0 if unit == "d" and wavelength is not None else 0.0
    lowest, highest = float(values.min()), float(values.max())
    if given is None:
        margin = RANGE_MARGIN * ((highest - lowest) or highest)
        return max(lowest - margin, floor), min(highest + margin, ceiling), True
    low, high = (float(end) for end in given)
    if not (np.isfinite(low) and np.isfinite(high) and 0 <= low < high) or (
        unit == "two-theta" and high > 180
    ):
        raise InputError(
            f"range {low:g} to {high:g} is not usable: expected two numbers, the lower first, "
            f"in the list's unit ({word}, {per})",
            where=source,
            hint="give the range that was measured, for example --range 20 100",
        )
    slack = 1e-9 * high
    outside = np.flatnonzero((values < low - slack) | (values > high + slack))
    if outside.size:
        raise InputError(
            f"{word} {values[outside[0]]:g} lies outside the stated range {low:g} to {high:g} {per}",
            where=where[outside[0]],
            hint="correct the range or the line",
        )
    return max(low, floor), min(high, ceiling), False
