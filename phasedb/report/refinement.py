"""A refinement as a document (schema ``phasedb.refine/1``), as text, and its residuals as a figure."""

from __future__ import annotations

from typing import Any, Final

from phasedb.characterise.extrapolation import Extrapolation
from phasedb.characterise.refined import RefinedLine, Refinement
from phasedb.crystal.lattice import hkl_text
from phasedb.crystal.quantity import format_measured
from phasedb.measured.peaklist import PeakList
from phasedb.report.document import rounded
from phasedb.report.table import Column, paragraph, table
from phasedb.report.text import Style, plain
from phasedb.report.wording import POSITION_TITLES

SCHEMA: Final = "phasedb.refine/1"


def refine_document(found: Refinement, peaks: PeakList) -> dict[str, Any]:
    """Return a refinement as JSON values; unknown is None."""
    parts = found.a_esd_parts
    return {
        "schema": SCHEMA,
        "source": peaks.source,
        "sha256": peaks.sha256,
        "wavelength_angstrom": rounded(
            peaks.radiation.wavelength_angstrom if peaks.radiation is not None else None, "wavelength"
        ),
        "position_unit": peaks.unit,
        "lattice_type": found.lattice_type,
        "a_start_angstrom": rounded(found.a_start_angstrom, "angstrom"),
        "a_angstrom": rounded(found.a_angstrom, "angstrom"),
        "a_esd_angstrom": _esd(found.a_esd_angstrom),
        "a_esd_parts": {
            "statistical": _esd(parts.statistical),
            "wavelength": _esd(parts.wavelength),
            "temperature": _esd(parts.temperature),
            "scale": _esd(parts.scale),
        },
        "zero_deg": rounded(found.zero_deg, "degree"),
        "zero_esd_deg": rounded(found.zero_esd_deg, "degree"),
        "displacement_mm": rounded(found.displacement_mm, "millimetre"),
        "displacement_esd_mm": rounded(found.displacement_esd_mm, "millimetre"),
        "goniometer_radius_mm": found.goniometer_radius_mm,
        "radius_assumed": found.radius_assumed,
        "correlations": {
            "a_zero": rounded(found.correlation_zero, "degree"),
            "a_displacement": rounded(found.correlation_displacement, "degree"),
        },
        "chi2_reduced": rounded(found.chi2_reduced, "relative"),
        "noise_deg": rounded(found.noise, "degree") if found.zero_deg is not None else None,
        "noise_relative": rounded(found.noise, "relative") if found.zero_deg is None else None,
        "blends": found.blends,
        "lines": [_line(line) for line in found.lines],
        "lines_not_used": list(found.left_over),
        "extrapolations": {
            "nelson_riley": _extrapolation(found.nelson_riley, "slope_angstrom"),
            "cohen": _extrapolation(found.cohen, "d_coefficient"),
        },
        "cautions": list(found.cautions),
    }


def _esd(value: float | None) -> float | None:
    """Seven decimals: the wavelength part is often below a millionth of an Å."""
    return None if value is None else round(value, 9)


def _line(line: RefinedLine) -> dict[str, Any]:
    return {
        "line": line.line,
        "n": line.n,
        "hkl": [list(hkl) for hkl in line.hkl],
        "position": rounded(line.position, "position"),
        "residual_deg": rounded(line.residual_deg, "degree"),
        "residual_relative": rounded(line.residual_relative, "relative"),
        "weight": round(line.weight, 4),
        "outlier": line.is_outlier,
        "a_angstrom": rounded(line.a_angstrom, "angstrom"),
    }


def _extrapolation(found: Extrapolation | None, trend: str) -> dict[str, Any] | None:
    if found is None:
        return None
    return {
        "a_angstrom": rounded(found.a_angstrom, "angstrom"),
        "a_esd_angstrom": _esd(found.a_esd_angstrom),
        trend: round(found.trend, 9),
        "n_lines": found.n_lines,
    }


def refine_text(found: Refinement, peaks: PeakList, *, width: int = 80, style: Style = plain) -> str:
    """Return a refinement as text, `width` columns wide."""
    parts = [
        "\n".join(paragraph(sentence, width) for sentence in _verdict(found, peaks)),
        style("Lines", "heading") + "\n" + _lines(found, peaks, width),
    ]
    if found.cautions:
        cautions = "\n".join(paragraph(caution, width, first="- ") for caution in found.cautions)
        parts.append(style("Cautions", "heading") + "\n" + cautions)
    return "\n\n".join(parts)


def _verdict(found: Refinement, peaks: PeakList) -> list[str]:
    a = format_measured(found.a_angstrom, found.a_esd_angstrom)
    said = [
        f"a = {a} Å, lattice type {found.lattice_type}, from {len(found.lines)} of {len(peaks)} lines.",
        "Uncertainty (standard): " + "; ".join(_parts(found)) + ".",
    ]
    if found.zero_deg is not None and found.displacement_mm is not None:
        zero = _signed(found.zero_deg, found.zero_esd_deg)
        displacement = _signed(found.displacement_mm, found.displacement_esd_mm)
        said.append(
            f"Zero error {zero} deg, displacement {displacement} mm "
            f"(radius {found.goniometer_radius_mm:g} mm); noise {found.noise:.4f} deg."
        )
    if found.chi2_reduced is not None:
        against = "the stated esds" if peaks.esd is not None else "a noise of 0.02 deg"
        if found.zero_deg is None and peaks.esd is None:
            against = "the usual noise of such lists"
        said.append(f"Reduced chi² {found.chi2_reduced:.3g} against {against}.")
    beside = [
        f"{name} {format_measured(other.a_angstrom, other.a_esd_angstrom)} Å"
        for name, other in (("Nelson-Riley", found.nelson_riley), ("Cohen", found.cohen))
        if other is not None
    ]
    if beside:
        said.append("For the record, extrapolated to 2theta = 180 deg: " + ", ".join(beside) + ".")
    return said


def _parts(found: Refinement) -> list[str]:
    parts = found.a_esd_parts
    said = [f"lines and shifts {parts.statistical:.2g} Å"]
    if parts.scale is not None:
        said.append(f"common scale {parts.scale:.2g} Å")
    else:
        said.append(f"wavelength {'not known' if parts.wavelength is None else f'{parts.wavelength:.1g} Å'}")
    if parts.temperature is not None:
        said.append(f"temperature {parts.temperature:.1g} Å")
    else:
        said.append("temperature not counted (a is at the measuring temperature)")
    return said


def _signed(value: float, esd: float | None) -> str:
    return ("" if value < 0 else "+") + format_measured(value, esd)


def _lines(found: Refinement, peaks: PeakList, width: int) -> str:
    is_angle = found.zero_deg is not None
    columns = (
        Column("line", "right"),
        Column(POSITION_TITLES[peaks.unit], "right"),
        Column("hkl"),
        Column("a alone, Å", "right"),
        Column("residual, deg" if is_angle else "residual, %", "right"),
        Column("weight", "right"),
        Column("remark"),
    )
    rows = []
    for line in found.lines:
        residual = (
            f"{line.residual_deg:+.4f}"
            if line.residual_deg is not None
            else f"{100 * line.residual_relative:+.3f}"
        )
        rows.append(
            (
                str(line.line),
                f"{line.position:.4f}",
                hkl_text(line.n, found.lattice_type),
                f"{line.a_angstrom:.5f}",
                residual,
                f"{line.weight:.2f}",
                "outlier" if line.is_outlier else "",
            )
        )
    return table(columns, rows, width)
