"""A found list as a file that `match` reads: text with a header, or ``phasedb.peaks/1``."""

from __future__ import annotations

from typing import Any, Final

from phasedb.crystal.radiation import Radiation
from phasedb.measured.json_list import SCHEMA
from phasedb.measured.scan_result import FoundLine, ScanResult

FULL_SCALE: Final = 100.0
"""Intensity (area) of the strongest line in a written list."""


def peaks_text(result: ScanResult) -> str:
    """Return the lines of a scan as delimited text: comments with the facts, a header row, one row a line."""
    rows = [
        f"{line.two_theta_deg:.4f},{_relative_area(line, result):.3f},"
        f"{max(line.two_theta_esd_deg, 1e-4):.4f},{line.fwhm_deg:.4f}"
        for line in result.lines
    ]
    return "\n".join([*_header(result), "two_theta_deg,intensity,esd,fwhm_deg", *rows]) + "\n"


def peaks_document(result: ScanResult) -> dict[str, Any]:
    """Return the lines of a scan as a ``phasedb.peaks/1`` document with what else the fit tells."""
    scan = result.scan
    radiation = scan.radiation
    return {
        "schema": SCHEMA,
        "unit": "two-theta",
        "sample": scan.sample or None,
        "radiation": _named(radiation),
        "wavelength_angstrom": None
        if radiation is None or _named(radiation) is not None
        else radiation.wavelength_angstrom,
        "range": [round(float(scan.two_theta_deg[0]), 5), round(float(scan.two_theta_deg[-1]), 5)],
        "goniometer_radius_mm": scan.goniometer_radius_mm,
        "temperature_K": scan.temperature_k,
        "peaks": [
            {
                "position": round(line.two_theta_deg, 5),
                "intensity": round(_relative_area(line, result), 4),
                "esd": round(max(line.two_theta_esd_deg, 1e-5), 5),
                "fwhm": round(line.fwhm_deg, 5),
                "fwhm_esd": round(line.fwhm_esd_deg, 5),
                "area": float(f"{line.area:.6g}"),
                "area_esd": float(f"{line.area_esd:.3g}"),
                "height": float(f"{line.height:.6g}"),
                "lorentzian": round(line.lorentzian, 3),
                "chi2_reduced": round(line.chi2_reduced, 3),
            }
            for line in result.lines
        ],
        "scan": {
            "source": scan.source,
            "sha256": scan.sha256,
            "points": len(scan),
            "noise": result.noise_origin,
            "threshold": round(result.threshold, 3),
            "false_lines_expected": result.false_lines,
            "doublet_ratio": None if result.doublet_ratio is None else round(result.doublet_ratio, 4),
            "notes": list(result.notes),
        },
    }


def _header(result: ScanResult) -> list[str]:
    scan = result.scan
    said = [f"# found in {_one_line(scan.source) or 'a scan'} of {len(scan)} points"]
    if scan.sha256:
        said.append(f"# the scan's SHA-256 is {scan.sha256}")
    said.append(
        f"# noise, {result.noise_origin}; at most {result.false_lines:g} lines expected from noise alone"
    )
    if result.doublet_ratio is not None:
        said.append(f"# K-alpha2 over K-alpha1 as fitted {result.doublet_ratio:.3f}")
    said += [f"# note {_one_line(note)}" for note in result.notes]
    if scan.sample:
        said.append(f"# sample: {_one_line(scan.sample)}")
    radiation = scan.radiation
    if radiation is not None:
        name = _named(radiation)
        said.append(
            f"# radiation: {name}" if name else f"# wavelength_angstrom: {radiation.wavelength_angstrom:.10g}"
        )
    said.append(f"# range: {scan.two_theta_deg[0]:.4f} {scan.two_theta_deg[-1]:.4f}")
    if scan.goniometer_radius_mm is not None:
        said.append(f"# goniometer_radius_mm: {scan.goniometer_radius_mm:g}")
    if scan.temperature_k is not None:
        said.append(f"# temperature_K: {scan.temperature_k:g}")
    return said


def _named(radiation: Radiation | None) -> str | None:
    """Return the name to write; a doublet's lines were fitted on K-alpha1, which is written as a number.

    As a number K-alpha1 stands for itself: no line of the list is taken for an unresolved blend, while ghosts
    of the anode stay possible.
    """
    if radiation is None or radiation.convention in ("doublet", "literal"):
        return None
    return radiation.name


def _relative_area(line: FoundLine, result: ScanResult) -> float:
    return FULL_SCALE * line.area / max(other.area for other in result.lines)


def _one_line(text: str) -> str:
    return " ".join(text.split())
