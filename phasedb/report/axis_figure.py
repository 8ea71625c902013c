"""The figure of the lattice-constant axis: evidence over ln a, the library's entries, what was found."""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType
from phasedb.identify.result import AxisCurve
from phasedb.report import drawing, wording
from phasedb.report.document import thinned
from phasedb.report.drawing import INK, WIDE, Mark

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from phasedb.characterise.indexing import IndexResult

FAINT_LINE: Final = "#b9c0c6"
_TICKS: Final = (2, 2.5, 3, 3.5, 4, 5, 6, 7, 8, 10, 12, 15, 20, 25, 30, 40)


@dataclass(frozen=True, slots=True)
class Entry:
    """A library entry as the axis figure needs it."""

    name: str
    lattice_type: LatticeType
    a_angstrom: float


def axis_figure(
    curves: Sequence[AxisCurve],
    entries: Sequence[Entry] = (),
    named: Sequence[tuple[str, LatticeType, float, Mark]] = (),
    size: tuple[float, float] = WIDE,
) -> Figure:
    """Return the figure of the lattice-constant axis: evidence over ln a for each lattice type.

    Parameters
    ----------
    curves : sequence of AxisCurve
    entries : sequence of Entry
        The library's entries, small marks under each curve.
    named : sequence of (label, lattice type, a in Å, Mark)
        What is labelled: the phases found, the unlisted one.
    size : (width, height) in inches
    """
    figure = drawing.new_figure(*size)
    rows: list[Axes] = list(figure.subplots(len(LATTICE_TYPES), 1, sharex=True, sharey=True))
    by_lattice = {curve.lattice_type: curve for curve in curves}
    ends = [math.exp(end) for curve in curves for end in (curve.ln_a[0], curve.ln_a[-1])] or [2.5, 25.0]
    low, high = min(ends), max(ends)
    character = 0.0075 * WIDE[0] / size[0] * math.log(high / low)
    top = max((max(curve.log_evidence) for curve in curves), default=1.0)
    for axes, lattice in zip(rows, LATTICE_TYPES, strict=True):
        _axis_row(axes, lattice, by_lattice.get(lattice), entries, top)
        here = [place for place in named if place[1] == lattice]
        _axis_labels(axes, here, by_lattice.get(lattice), top, character)
    rows[-1].set_xscale("log")
    rows[-1].set_xlim(low, high)
    ticks = [tick for tick in _TICKS if low <= tick <= high]
    rows[-1].set_xticks(ticks, [f"{tick:g}" for tick in ticks])
    rows[-1].minorticks_off()
    rows[-1].set_xlabel("lattice constant a, Å (logarithmic)")
    rows[len(rows) // 2].set_ylabel("evidence against chance, natural log")
    return figure


def _axis_row(
    axes: Axes, lattice: LatticeType, curve: AxisCurve | None, entries: Sequence[Entry], top: float
) -> None:
    if curve is not None:
        a = [math.exp(value) for value in curve.ln_a]
        floor = [max(value, -0.2 * top) for value in curve.log_evidence]
        axes.fill_between(a, floor, -0.2 * top, color="#e8ebee", linewidth=0)
        axes.plot(a, floor, color=INK, linewidth=0.7, gid=f"curve-{lattice}")
    axes.axhline(0.0, color=FAINT_LINE, linewidth=0.5)
    here = [entry.a_angstrom for entry in entries if entry.lattice_type == lattice]
    axes.vlines(here, -0.34 * top, -0.24 * top, color=INK, linewidth=0.5, alpha=0.7, gid=f"entries-{lattice}")
    axes.set_ylim(-0.36 * top, 1.3 * top)
    axes.set_title(
        f"{lattice}, {wording.LATTICE_WORDS[lattice]}", loc="left", fontsize=9, fontweight="bold", pad=2
    )


def _height_at(curve: AxisCurve | None, a_angstrom: float) -> float:
    """The curve's highest value at and beside a, where its label is to stand."""
    if curve is None:
        return 0.0
    place = bisect_left(curve.ln_a, math.log(a_angstrom))
    return max([*curve.log_evidence[max(0, place - 2) : place + 2], 0.0])


def _axis_labels(
    axes: Axes,
    named: Sequence[tuple[str, LatticeType, float, Mark]],
    curve: AxisCurve | None,
    top: float,
    character: float,
) -> None:
    """Mark each place above its peak and label it; a label that would run into another goes above it.

    `character` is the width of a letter on the ln a axis.
    """
    step = 0.14 * top / (1.0 - 0.08 * min(len(named), 8))  # room for a label in a row that grows with them
    taken: list[tuple[float, float, float]] = []  # from, to (ln a) and height of the labels so far
    for label, _, a, mark in sorted(named, key=lambda place: place[2]):
        peak = _height_at(curve, a) + 0.1 * top
        text = f"{mark.letter} {drawing.shortened(label, 22)}"
        start, end = math.log(a), math.log(a) + (len(text) + 3) * character
        height = peak
        while any(start < right and left < end and abs(height - at) < step for left, right, at in taken):
            height += 0.2 * step
        taken.append((start, end, height))
        axes.plot(
            [a, a], [-0.34 * top, height], color=mark.colour, linewidth=1.0, gid=f"phase-{mark.letter}-place"
        )
        axes.plot([a], [height], mark.shape, color=mark.colour, markersize=6, gid=f"phase-{mark.letter}-axis")
        axes.annotate(
            text,
            (a, height),
            xytext=(6, 0),
            textcoords="offset points",
            va="center",
            fontsize=8,
            bbox={"facecolor": "#ffffff", "alpha": 0.7, "edgecolor": "none", "pad": 0.6},
            gid=f"phase-{mark.letter}-label",
        )
    axes.set_ylim(top=max(1.3 * top, *(at + 0.12 * top for _, _, at in taken), 0.0))


def index_figure(found: IndexResult, path: Path) -> None:
    """Write the axis of an indexing as .svg, .png or .pdf, its solutions labelled with a and probability."""
    drawing.figure_format(path)
    named = [
        (
            f"{wording.lattice_constant(solution.a_angstrom, solution.a_esd_angstrom)} Å,"
            f" p {wording.probability(solution.probability)}",
            solution.lattice_type,
            solution.a_angstrom,
            drawing.mark_for(rank),
        )
        for rank, solution in enumerate(found.solutions[: len(drawing.MARKS)])
        if solution.probability >= 0.01
    ]
    with drawing.look():
        drawing.save_figure(axis_figure([thinned(curve) for curve in found.axis], (), named), path)
