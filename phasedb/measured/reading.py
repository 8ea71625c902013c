"""Reading a peak list from a file: delimited text, JSON or CIF, told apart by their content."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np

from phasedb.errors import InputError
from phasedb.measured.building import build_peak_list
from phasedb.measured.options import ReadOptions
from phasedb.measured.peaklist import FloatArray, PeakList
from phasedb.measured.raw import RawLines
from phasedb.measured.textfile import SourceText, read_source

NO_OPTIONS = ReadOptions()


def read_peak_list(path: str | Path, overrides: ReadOptions = NO_OPTIONS) -> PeakList:
    """Return the peak list in the file at `path` (``-`` is standard input).

    Parameters
    ----------
    overrides : ReadOptions
        What the caller says; it stands above what the file says.

    Raises
    ------
    InputError
        With file, line and column, what was read, what was expected and what to do.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.NamedTemporaryFile("w", suffix=".csv") as file:
    ...     _ = file.write("# radiation: Cu\\ntwo_theta_deg,intensity\\n28.44,100\\n47.30,55\\n")
    ...     file.flush()
    ...     peaks = read_peak_list(file.name)
    >>> len(peaks), round(float(peaks.d_angstrom[0]), 3)
    (2, 3.136)
    """
    return peak_list_from_text(read_source(path), overrides)


def peak_list_from_text(given: SourceText, overrides: ReadOptions = NO_OPTIONS) -> PeakList:
    """Return the peak list in a text that was already read; see `read_peak_list`."""
    raw = _raw_lines(given, overrides)
    facts = overrides.over(raw.facts)
    scale = raw.per_unit
    measured_range = facts.measured_range
    if measured_range is not None:
        measured_range = (scale * measured_range[0], scale * measured_range[1])
    unit = raw.unit or facts.unit
    radiation = facts.resolved_radiation(given.source)
    if unit is None:
        if radiation is None or radiation.convention == "electron":
            raise InputError(
                "the unit of the positions is not known",
                where=given.source,
                hint="add a header row (two_theta_deg, d_angstrom, q_per_angstrom or ring_radius_mm), "
                "or give --unit two-theta, d, q or ring",
            )
        unit = "two-theta"
    return build_peak_list(
        [scale * value for value in raw.position],
        unit=unit,
        intensity=raw.intensity,
        esd=None if raw.esd is None else [scale * value for value in raw.esd],
        fwhm=raw.fwhm,
        fwhm_in_deg=raw.fwhm_in_deg,
        radiation=radiation,
        measured_range=measured_range,
        goniometer_radius_mm=facts.goniometer_radius_mm,
        temperature_k=facts.temperature_k,
        camera_length_mm=facts.camera_length_mm,
        camera_constant_mm_angstrom=facts.camera_constant_mm_angstrom,
        source=given.source,
        sha256=given.sha256,
        sample=facts.sample or "",
        notes=(*given.notes, *raw.notes),
        places=raw.places,
    )


def read_ring_radii(path: str | Path) -> tuple[FloatArray, ReadOptions]:
    """Return the ring radii (mm) in a file and what its header says; columns as in a list of rings.

    Raises
    ------
    InputError
        If it is a list of something else, or a radius cannot be.
    """
    given = read_source(path)
    raw = _raw_lines(given, NO_OPTIONS)
    if raw.unit not in (None, "ring"):
        raise InputError(
            f"the list is in {raw.unit}, expected ring radii",
            where=given.source,
            hint="name the column ring_radius_mm or ring_diameter_mm",
        )
    radii = raw.per_unit * np.array(raw.position)
    if not (np.isfinite(radii) & (radii > 0)).all():
        raise InputError("a ring radius is not a number above 0", where=given.source)
    return radii, raw.facts


def _raw_lines(given: SourceText, overrides: ReadOptions) -> RawLines:
    if given.text.lstrip().startswith(("{", "[")):
        from phasedb.measured.json_list import read_json_list

        return read_json_list(given.text, given.source)
    if re.match(r"(?:[^\S\n]*(?:#[^\n]*)?\n)*[^\S\n]*data_", given.text, re.IGNORECASE):
        from phasedb.measured.cif_list import read_cif_list

        return read_cif_list(given.text, given.source, unit=overrides.unit)
    from phasedb.measured.text_list import read_text_list

    return read_text_list(given.text, given.source, unit=overrides.unit)
