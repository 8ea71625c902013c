"""A refinement as a figure: the residuals, and the classical extrapolation beside the refined a."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from phasedb.characterise.extrapolation import nelson_riley_function
from phasedb.characterise.refined import RefinedLine, Refinement
from phasedb.crystal.quantity import format_measured
from phasedb.measured.peaklist import PeakList
from phasedb.report import drawing, wording
from phasedb.report.drawing import FAINT, INK, MARKS

if TYPE_CHECKING:
    from matplotlib.axes import Axes

SIZE: Final = (7.5, 6.4)
_LABELLED: Final = 14  # more labels than this run into each other


def refine_figure(found: Refinement, peaks: PeakList, path: Path) -> None:
    """Write residuals and extrapolation as .svg, .png or .pdf.

    Parameters
    ----------
    found : Refinement
    peaks : PeakList
        The list that was refined.
    """
    drawing.figure_format(path)
    with drawing.look():
        figure = drawing.new_figure(*SIZE)
        upper, lower = figure.subplots(2, 1, height_ratios=(1, 1.15))
        _residuals(upper, found, peaks)
        if peaks.two_theta_deg is not None and found.nelson_riley is not None:
            _extrapolation(lower, found, peaks.two_theta_deg)
        else:
            _against_position(lower, found, peaks)
        for axes in (upper, lower):
            drawing.light_grid(axes)
        drawing.save_figure(figure, path)


def _residuals(axes: Axes, found: Refinement, peaks: PeakList) -> None:
    in_degrees = found.zero_deg is not None
    factor = 1.0 if in_degrees else 100.0
    for line in found.lines:
        value = line.residual_deg if in_degrees else line.residual_relative
        if value is None:
            continue
        bar = factor * found.noise / np.sqrt(line.weight) if line.weight > 0.05 else None
        axes.errorbar(
            [line.position],
            [factor * value],
            yerr=None if bar is None else [bar],
            fmt=_shape(line),
            color=_colour(line),
            markersize=5,
            elinewidth=0.9,
            capsize=2,
        )
        if len(found.lines) <= _LABELLED:
            axes.annotate(
                wording.hkl_text(line.hkl),
                (line.position, factor * value),
                xytext=(4, 3),
                textcoords="offset points",
                fontsize=6.5,
            )
    axes.axhline(0.0, color=INK, linewidth=0.6)
    axes.set_xlabel(wording.AXIS_TITLES[peaks.unit])
    axes.set_ylabel("observed − calculated,\n" + ("° 2θ" if in_degrees else "% of d"))
    outliers = "; crosses: outliers" if any(line.is_outlier for line in found.lines) else ""
    a = format_measured(found.a_angstrom, found.a_esd_angstrom)
    axes.set_title(f"{found.lattice_type}, a = {a} Å, from {len(found.lines)} lines{outliers}", fontsize=9)
    if peaks.unit == "d":
        axes.invert_xaxis()


def _shape(line: RefinedLine) -> str:
    return "x" if line.is_outlier else MARKS[0].shape


def _colour(line: RefinedLine) -> str:
    return FAINT if line.is_outlier else MARKS[0].colour


def _refined(axes: Axes, found: Refinement) -> None:
    a, esd = found.a_angstrom, found.a_esd_angstrom
    axes.axhspan(a - esd, a + esd, color="#dfe3e6", linewidth=0)
    axes.axhline(a, color=INK, linewidth=1.0, label=f"refined, {format_measured(a, esd)}")
    axes.set_ylabel("a from one line alone, Å")
    axes.ticklabel_format(axis="y", useOffset=False)


def _extrapolation(axes: Axes, found: Refinement, two_theta_deg: np.ndarray) -> None:
    """a of each line against the Nelson-Riley function: where the straight line meets 0 is 2theta = 180°."""
    line_fit = found.nelson_riley
    assert line_fit is not None
    _refined(axes, found)
    places = nelson_riley_function([two_theta_deg[line.line - 1] for line in found.lines])
    for place, line in zip(places, found.lines, strict=True):
        axes.plot([place], [line.a_angstrom], _shape(line), color=_colour(line), markersize=5)
    ends = np.array([0.0, float(places.max())])
    shown = format_measured(line_fit.a_angstrom, line_fit.a_esd_angstrom)
    axes.plot(
        ends,
        line_fit.a_angstrom + line_fit.trend * ends,
        color=MARKS[1].colour,
        linewidth=1.0,
        linestyle=(0, (5, 2)),
        label=f"Nelson-Riley, {shown}",
    )
    if found.cohen is not None:
        axes.errorbar(
            [0.0],
            [found.cohen.a_angstrom],
            yerr=None if found.cohen.a_esd_angstrom is None else [found.cohen.a_esd_angstrom],
            fmt=MARKS[2].shape,
            color=MARKS[2].colour,
            markersize=6,
            capsize=2,
            label=f"Cohen, {format_measured(found.cohen.a_angstrom, found.cohen.a_esd_angstrom)}",
        )
    axes.set_xlabel("½ (cos²θ / sin θ + cos²θ / θ)")
    axes.set_xlim(left=-0.03 * ends[1])
    axes.legend(loc="best", frameon=False, fontsize=8)


def _against_position(axes: Axes, found: Refinement, peaks: PeakList) -> None:
    _refined(axes, found)
    for line in found.lines:
        axes.plot([line.position], [line.a_angstrom], _shape(line), color=_colour(line), markersize=5)
    axes.set_xlabel(wording.AXIS_TITLES[peaks.unit])
    if peaks.unit == "d":
        axes.invert_xaxis()
    axes.legend(loc="best", frameon=False, fontsize=8)
