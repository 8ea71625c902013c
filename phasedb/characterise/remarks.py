"""What a reader of a refinement must be told."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Final

from phasedb.measured.building import RANGE_REMARK

if TYPE_CHECKING:
    from phasedb.characterise.refined import Refinement
    from phasedb.characterise.shift_model import PositionModel
    from phasedb.measured.peaklist import PeakList

_MATTERS: Final = 0.95
"""Correlation above which a and a shift cannot be told apart by the lines."""


def remarks_on(result: Refinement, peaks: PeakList, model: PositionModel) -> Refinement:
    """Return the refinement with its cautions."""
    notes = [note for note in peaks.notes if not note.startswith(RANGE_REMARK)]
    said = [*notes, *_on_lines(result, peaks), *_on_blends(result, model)]
    if result.zero_deg is not None:
        said += _on_shifts(result, model)
    said += _on_extrapolations(result)
    if result.a_esd_parts.scale is not None:
        said.append(
            "the common scale of the list is uncertain: its part "
            f"({result.a_esd_parts.scale:.2g} Å) is in the uncertainty of a"
        )
    return replace(result, cautions=tuple(said))


def _on_lines(result: Refinement, peaks: PeakList) -> list[str]:
    said = []
    used = len(result.lines)
    if used < 3:
        said.append(
            f"a rests on {used} line{'s' if used > 1 else ''}: no scatter can be judged; the noise is assumed"
        )
    outliers = [f"{line.position:.3f}" for line in result.lines if line.is_outlier]
    if outliers:
        said.append(f"outliers, hardly counted: lines at {', '.join(outliers)}")
    if result.left_over:
        at = ", ".join(f"{peaks.position[rank - 1]:.3f}" for rank in result.left_over[:8])
        more = ", ..." if len(result.left_over) > 8 else ""
        said.append(
            f"{len(result.left_over)} of {len(peaks)} lines are not lines of {result.lattice_type} "
            f"with this a: at {at}{more}"
        )
    if result.chi2_reduced is not None and peaks.esd is not None and result.chi2_reduced > 4.0:
        said.append(
            f"the lines scatter {result.chi2_reduced**0.5:.1f} times as much as their stated esds: enlarged"
        )
    away = result.a_angstrom / result.a_start_angstrom - 1.0
    if abs(away) > 5e-3:
        said.append(f"a came out {100.0 * away:+.2f} % from the value given ({result.a_start_angstrom:g} Å)")
    return said


def _on_blends(result: Refinement, model: PositionModel) -> list[str]:
    if result.blends == "unresolved":
        return [
            "lines whose K-alpha splitting is below their width fit as blends of the doublet "
            "(mean wavelength)"
        ]
    used = [line.line - 1 for line in result.lines]
    if used and (model.blend_ratio[used] > 1.0).all():
        larger = result.a_angstrom * (model.blend_ratio[used[0]] - 1.0)
        return [
            "no line resolves the K-alpha doublet: positions are taken as K-alpha1; if they are blends, "
            f"a is {larger:.4f} Å larger (say so with the -mean radiation)"
        ]
    return []


def _on_shifts(result: Refinement, model: PositionModel) -> list[str]:
    said = []
    if result.radius_assumed:
        said.append(f"goniometer radius not given: {result.goniometer_radius_mm:g} mm assumed")
    pairs = (
        ("zero error", result.zero_deg, "degrees", result.correlation_zero),
        ("displacement", result.displacement_mm, "mm", result.correlation_displacement),
    )
    scales = model.shift_precision[:2] ** -0.5
    for (name, value, unit, correlation), mean, scale in zip(
        pairs, model.shift_mean[:2], scales, strict=True
    ):
        if correlation is not None and abs(correlation) > _MATTERS:
            said.append(
                f"a and the {name} move together over these lines (correlation {correlation:+.2f}): "
                "a rests on the assumed size of the shift; an internal standard or high-angle lines "
                "would part them"
            )
        if value is not None and abs(value - mean) > 3.0 * scale:
            said.append(f"the {name} ({value:+.3f} {unit}) is larger than an aligned instrument's: see to it")
    return said


def _on_extrapolations(result: Refinement) -> list[str]:
    pairs = (("Nelson-Riley", result.nelson_riley), ("Cohen", result.cohen))
    said = []
    for name, found in pairs:
        if found is None or found.a_esd_angstrom is None or found.n_lines < 4:
            continue
        combined = (found.a_esd_angstrom**2 + result.a_esd_angstrom**2) ** 0.5
        apart = abs(found.a_angstrom - result.a_angstrom) / combined
        if apart > 2.0:
            said.append(
                f"the {name} extrapolation lies {apart:.1f} combined esds from the least-squares a: "
                "an error of the measurement is not described by zero error and displacement"
            )
    return said
