"""A match as a plain document (schema ``phasedb.match/1``): what ``match --json`` prints and a record keeps.

Unknown is None. Every number is rounded to the digits that `DIGITS` states, so that the same match gives the
same bytes.
"""

from __future__ import annotations

import json
import math
from typing import Any, Final

from phasedb.identify.result import (
    AxisCurve,
    Claim,
    LedgerLine,
    Match,
    MeritF,
    MeritM,
    PhaseResult,
    Shift,
    Unlisted,
    UnlistedCandidate,
)

SCHEMA: Final = "phasedb.match/1"

DIGITS: Final[dict[str, int]] = {
    "probability": 6,  # also shares, chances and all other parts of one
    "log10_odds": 2,
    "angstrom": 6,  # a and d
    "wavelength": 7,
    "degree": 5,  # 2theta, shifts, deviations
    "millimetre": 5,
    "position": 6,  # in the list's own unit
    "relative": 7,  # (found - stored)/stored and the like
    "intensity": 4,
    "merit": 2,
    "count": 2,  # expected numbers of lines and of chance matches
}
"""Decimals of each kind of number."""

AXIS_STEPS: Final = 1200
"""The most points that a stored axis curve keeps for each lattice type."""


def rounded(value: float | None, kind: str) -> float | None:
    """Return `value` with the decimals of its kind; None if it is unknown or not finite."""
    if value is None or not math.isfinite(value):
        return None
    return round(float(value), DIGITS[kind]) + 0.0  # + 0.0 turns -0.0 into 0.0


def _chance(value: float) -> float | None:
    """An expected number: decimals below one, so that 0.0004 is not written as 0."""
    return rounded(value, "count" if value >= 1 else "probability")


def merit_document(merit_f: MeritF | None, merit_m: MeritM | None) -> dict[str, Any]:
    """Return both figures of merit as JSON values; None where there is none."""
    f: dict[str, Any] | None = None
    m: dict[str, Any] | None = None
    if merit_f is not None:
        f = {
            "value": rounded(merit_f.value, "merit"),
            "n": merit_f.n,
            "mean_abs_delta_two_theta_deg": rounded(merit_f.mean_abs_delta_two_theta_deg, "degree"),
            "n_possible": merit_f.n_possible,
            "n_possible_in_range": merit_f.n_possible_in_range,
        }
    if merit_m is not None:
        m = {"value": rounded(merit_m.value, "merit"), "n": merit_m.n, "n_possible": merit_m.n_possible}
    return {"F": f, "M": m}


def _phase(phase: PhaseResult) -> dict[str, Any]:
    return {
        "name": phase.name,
        "formula": phase.formula,
        "lattice_type": phase.lattice_type,
        "structure_type": phase.structure_type,
        "standing": phase.standing,
        "probability": rounded(phase.probability, "probability"),
        "group_probability": rounded(phase.group_probability, "probability"),
        "look_alikes": list(phase.look_alikes),
        "look_alike_count": phase.look_alike_count,
        "separated_by": list(phase.separated_by),
        "expected_by_chance": _chance(phase.expected_by_chance),
        "share": rounded(phase.share, "probability"),
        "log10_odds": rounded(phase.log10_odds, "log10_odds"),
        "a_stored_angstrom": rounded(phase.a_stored_angstrom, "angstrom"),
        "a_fitted_angstrom": rounded(phase.a_fitted_angstrom, "angstrom"),
        "a_fitted_esd_angstrom": rounded(phase.a_fitted_esd_angstrom, "angstrom"),
        "relative_shift": rounded(phase.relative_shift, "relative"),
        "lines_claimed": phase.lines_claimed,
        "lines_expected": rounded(phase.lines_expected, "count"),
        "absences": phase.absences,
        "merit": merit_document(phase.merit_f, phase.merit_m),
    }


def _candidate(candidate: UnlistedCandidate) -> dict[str, Any]:
    return {
        "probability": rounded(candidate.probability, "probability"),
        "lattice_type": candidate.lattice_type,
        "a_angstrom": rounded(candidate.a_angstrom, "angstrom"),
        "a_esd_angstrom": rounded(candidate.a_esd_angstrom, "angstrom"),
        "nearest": [
            {"name": name, "relative_difference": rounded(difference, "relative")}
            for name, difference in candidate.nearest
        ],
        "lines_claimed": candidate.lines_claimed,
        "merit": merit_document(candidate.merit_f, candidate.merit_m),
    }


def _unlisted(unlisted: Unlisted) -> dict[str, Any]:
    """The best candidate's fields beside the whole probability, as the schema has it."""
    if unlisted.best is None:
        best: dict[str, Any] = {
            "lattice_type": None,
            "a_angstrom": None,
            "a_esd_angstrom": None,
            "nearest": [],
            "lines_claimed": None,
            "merit": merit_document(None, None),
            "best_probability": None,
        }
    else:
        best = _candidate(unlisted.best)
        best["best_probability"] = best.pop("probability")
    return {
        "probability": rounded(unlisted.probability, "probability"),
        **best,
        "others": [_candidate(other) for other in unlisted.others],
    }


def _degrees(values: tuple[float, ...] | None) -> list[float | None] | None:
    return None if values is None else [rounded(value, "degree") for value in values]


def _shift(shift: Shift) -> dict[str, Any]:
    return {
        "zero_deg": rounded(shift.zero_deg, "degree"),
        "zero_esd_deg": rounded(shift.zero_esd_deg, "degree"),
        "displacement_mm": rounded(shift.displacement_mm, "millimetre"),
        "displacement_esd_mm": rounded(shift.displacement_esd_mm, "millimetre"),
        "correlation": rounded(shift.correlation, "probability"),
        "noise_deg": rounded(shift.noise_deg, "degree"),
        "noise_relative": rounded(shift.noise_relative, "relative"),
        "scale_relative": rounded(shift.scale_relative, "relative"),
        "scale_esd_relative": rounded(shift.scale_esd_relative, "relative"),
        "goniometer_radius_mm": rounded(shift.goniometer_radius_mm, "millimetre"),
        "radius_assumed": shift.radius_assumed,
        "at_lines_deg": _degrees(shift.at_lines_deg),
        "at_lines_esd_deg": _degrees(shift.at_lines_esd_deg),
    }


def _claim(claim: Claim) -> dict[str, Any]:
    return {
        "name": claim.name,
        "hkl": [list(hkl) for hkl in claim.hkl],
        "kind": claim.kind,
        "delta_two_theta_deg": rounded(claim.delta_two_theta_deg, "degree"),
        "delta_relative": rounded(claim.delta_relative, "relative"),
        "probability": rounded(claim.probability, "probability"),
    }


def _line(line: LedgerLine) -> dict[str, Any]:
    return {
        "line": line.line,
        "position": rounded(line.position, "position"),
        "corrected_position": rounded(line.corrected_position, "position"),
        "two_theta_deg": rounded(line.two_theta_deg, "degree"),
        "d_angstrom": rounded(line.d_angstrom, "angstrom"),
        "intensity": rounded(line.intensity, "intensity"),
        "claims": [_claim(claim) for claim in line.claims],
        "unexplained": rounded(line.unexplained, "probability"),
    }


def thinned(curve: AxisCurve) -> AxisCurve:
    """Return the curve with at most `AXIS_STEPS` points, the highest of each stretch: no peak is lost."""
    n = len(curve.ln_a)
    stretch = max(1, math.ceil(n / AXIS_STEPS))
    tops = [
        max(range(start, min(start + stretch, n)), key=curve.log_evidence.__getitem__)
        for start in range(0, n, stretch)
    ]
    return AxisCurve(
        curve.lattice_type,
        tuple(curve.ln_a[top] for top in tops),
        tuple(curve.log_evidence[top] for top in tops),
    )


def _axis(curve: AxisCurve) -> dict[str, Any]:
    thin = thinned(curve)
    return {
        "lattice_type": thin.lattice_type,
        "ln_a": [round(value, 5) for value in thin.ln_a],
        "log_evidence": [round(value, 2) for value in thin.log_evidence],
    }


def plain_settings(value: Any) -> Any:
    """Return settings as JSON values: tuples and arrays as lists, numbers that are not finite as None."""
    if isinstance(value, dict):
        return {str(key): plain_settings(entry) for key, entry in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain_settings(entry) for entry in value]
    if hasattr(value, "tolist"):
        return plain_settings(value.tolist())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def match_document(match: Match, *, with_axis: bool = False) -> dict[str, Any]:
    """Return the match as the document ``phasedb.match/1``, ready for JSON.

    Parameters
    ----------
    match : Match
    with_axis : bool
        Also keep the curve of evidence along the lattice-constant axis (about 40 kB as JSON), thinned to its
        highest points: a record keeps it, ``match --json`` leaves it out.

    Examples
    --------
    >>> from phasedb.report.document import DIGITS, rounded
    >>> rounded(4.24171234, "angstrom"), rounded(float("nan"), "degree"), DIGITS["angstrom"]
    (4.241712, None, 6)
    """
    measurement = match.measurement
    document: dict[str, Any] = {
        "schema": SCHEMA,
        "program_version": match.program_version,
        "settings": plain_settings(match.settings),
        "measurement": {
            "source": measurement.source,
            "sha256": measurement.sha256,
            "wavelength_angstrom": rounded(measurement.wavelength_angstrom, "wavelength"),
            "radiation": measurement.radiation,
            "line_count": measurement.line_count,
            "range": [
                rounded(measurement.range_low, "position"),
                rounded(measurement.range_high, "position"),
            ],
            "range_assumed": measurement.range_assumed,
            "position_unit": measurement.position_unit,
            "sample": measurement.sample,
        },
        "library": {"phase_count": match.library_phase_count, "fingerprint": match.library_fingerprint},
        "phases": [_phase(phase) for phase in match.phases],
        "unlisted": _unlisted(match.unlisted),
        "nothing_cubic": rounded(match.nothing_cubic, "probability"),
        "shift": _shift(match.shift),
        "ledger": [_line(line) for line in match.ledger],
        "cautions": list(match.cautions),
    }
    if with_axis:
        document["axis"] = [_axis(curve) for curve in match.axis]
    return document


def document_bytes(document: dict[str, Any]) -> bytes:
    """Return a document as compact UTF-8 JSON with sorted keys: the form that is hashed and kept."""
    text = json.dumps(document, allow_nan=False, ensure_ascii=False, sort_keys=True, separators=(",", ":"))
    return text.encode("utf-8")
