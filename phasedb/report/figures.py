"""The figure of a match: its lines with their deviations, each phase with its mark."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Final

from phasedb.crystal.lattice import LatticeType
from phasedb.identify.result import Claim, LedgerLine, Match
from phasedb.report import drawing, wording
from phasedb.report.drawing import FOREIGN_MARK, INK, UNLISTED_MARK, WIDE, Mark

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure


_LABELLED: Final = 40  # with more lines than this only the phase marks are drawn, no hkl


def phase_marks(match: Match) -> dict[str, Mark]:
    """Return the mark of every name that claims a line or is ranked: one letter, colour and shape each."""
    claiming = {claim.name for line in match.ledger for claim in line.claims if claim.kind != "foreign"}
    ranked = [phase.name for phase in match.phases if phase.name in claiming or phase.probability >= 0.05]
    marks = {name: drawing.mark_for(index) for index, name in enumerate(ranked)}
    unlisted = sorted(name for name in claiming if name not in marks and name.startswith("unlisted "))
    for index, name in enumerate(unlisted):
        number = "" if index == 0 else str(index + 1)
        marks[name] = Mark(UNLISTED_MARK.letter + number, UNLISTED_MARK.colour, UNLISTED_MARK.shape)
    for name in sorted(claiming - set(marks)):
        marks[name] = drawing.mark_for(len(marks))
    return marks


def leading_claim(line: LedgerLine) -> Claim | None:
    """Return the claim that explains the line, or None if it counts as unexplained."""
    if not wording.is_explained(line):
        return None
    return max(line.claims, key=lambda claim: claim.probability)


def _mark_of(claim: Claim, marks: dict[str, Mark]) -> Mark:
    return FOREIGN_MARK if claim.kind == "foreign" else marks[claim.name]


def _face(claim: Claim, mark: Mark) -> str:
    """Ghosts (K-beta and the like) are hollow."""
    return mark.colour if claim.kind in ("line", "foreign") else "#ffffff"


def lines_figure(match: Match, size: tuple[float, float] = WIDE) -> Figure:
    """Return the figure of the measured lines, and below it their deviations with the fitted shift.

    Artists carry ids (``line-3-stick``, ``line-3-mark``, ``line-3-deviation``) for the page's script.
    """
    figure = drawing.new_figure(*size)
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(3, 2))
    marks = phase_marks(match)
    _sticks(upper, match, marks, labels=size[0] > 6)
    _deviations(lower, match, marks)
    measurement = match.measurement
    span = measurement.range_high - measurement.range_low
    lower.set_xlim(measurement.range_low - 0.01 * span, measurement.range_high + 0.01 * span)
    if measurement.position_unit == "d":
        lower.invert_xaxis()  # lines run from low angle to high, as in all the other units
    lower.set_xlabel(wording.AXIS_TITLES[measurement.position_unit])
    return figure


def _sticks(axes: Axes, match: Match, marks: dict[str, Mark], *, labels: bool) -> None:
    heights = [line.intensity for line in match.ledger]
    strongest = max((height for height in heights if height is not None), default=0.0)
    with_hkl = labels and len(match.ledger) <= _LABELLED
    for line in match.ledger:
        height = 100.0 if line.intensity is None or strongest <= 0 else 100 * line.intensity / strongest
        claim = leading_claim(line)
        mark = None if claim is None else _mark_of(claim, marks)
        axes.plot(
            [line.position, line.position],
            [0, height],
            color=INK if mark is None else mark.colour,
            linewidth=0.9 if mark is None else 1.5,
            gid=f"line-{line.line}-stick",
        )
        if claim is None or mark is None:
            continue
        axes.plot(
            [line.position],
            [height + 3],
            mark.shape,
            color=mark.colour,
            markerfacecolor=_face(claim, mark),
            markersize=6,
            gid=f"line-{line.line}-mark",
        )
        if with_hkl:
            axes.annotate(
                wording.hkl_text(claim.hkl),
                (line.position, height + 3),
                xytext=(0, 6),
                textcoords="offset points",
                rotation=90,
                ha="center",
                va="bottom",
                fontsize=7,
                gid=f"line-{line.line}-hkl",
            )
    axes.set_ylim(0, 128 if with_hkl else 112)
    axes.set_yticks([0, 50, 100] if strongest > 0 else [])
    axes.set_ylabel("relative intensity, %" if strongest > 0 else "measured lines\n(no intensities)")
    _legend(axes, match, marks, columns=3 if labels else 1)


def _legend(axes: Axes, match: Match, marks: dict[str, Mark], *, columns: int) -> None:
    """Names beside their marks, above the lines; the names of those that claim nothing are left out."""
    from matplotlib.lines import Line2D

    leading = [claim for line in match.ledger if (claim := leading_claim(line)) is not None]
    claiming = {claim.name for claim in leading if claim.kind != "foreign"}
    sure = {claim.name for claim in leading if claim.probability > wording.CLAIMED_FROM}
    handles = [
        Line2D(
            [],
            [],
            color=mark.colour,
            marker=mark.shape,
            label=f"{mark.letter}  {drawing.shortened(name)}" + ("" if name in sure else ", or a look-alike"),
        )
        for name, mark in marks.items()
        if name in claiming
    ]
    if any(claim.kind == "foreign" for claim in leading):
        handles.append(
            Line2D([], [], color=FOREIGN_MARK.colour, marker=FOREIGN_MARK.shape, label="foreign line")
        )
    if any(claim.kind not in ("line", "foreign") for claim in leading):
        handles.append(
            Line2D(
                [], [], color=INK, marker="o", markerfacecolor="#ffffff", label="hollow: ghost of its phase"
            )
        )
    if len(leading) < len(match.ledger):
        handles.append(Line2D([], [], color=INK, linewidth=0.9, label="unexplained"))
    axes.legend(
        handles=handles, loc="lower left", bbox_to_anchor=(0, 1.0), ncols=columns, frameon=False, fontsize=8
    )


def _shift_at(match: Match) -> list[float]:
    at_lines = match.shift.at_lines_deg
    return [0.0] * len(match.ledger) if at_lines is None else list(at_lines)


def _deviations(axes: Axes, match: Match, marks: dict[str, Mark]) -> None:
    """Observed minus ideal positions: what all lines share is the shift curve, the rest is scatter."""
    in_degrees = wording.in_degrees(match)
    shift = _shift_at(match)
    noise = match.shift.noise_deg if in_degrees else match.shift.noise_relative
    factor = 1.0 if in_degrees else 100.0
    scale = 0.0 if in_degrees else match.shift.scale_relative or 0.0
    positions = [line.position for line in match.ledger]
    curve = [value if in_degrees else factor * scale for value in shift]
    if match.shift.at_lines_esd_deg is not None and in_degrees:
        esds = match.shift.at_lines_esd_deg
        low = [value - esd for value, esd in zip(curve, esds, strict=True)]
        high = [value + esd for value, esd in zip(curve, esds, strict=True)]
        axes.fill_between(positions, low, high, color="#dfe3e6", linewidth=0)
    axes.axhline(0.0, color=INK, linewidth=0.6)
    axes.plot(
        positions,
        curve,
        color=INK,
        linewidth=1.0,
        linestyle=(0, (5, 2)),
        label="fitted shift",
        gid="shift-curve",
    )
    for line, base in zip(match.ledger, curve, strict=True):
        claim = leading_claim(line)
        if claim is None:
            continue
        mark = _mark_of(claim, marks)
        value = claim.delta_two_theta_deg if in_degrees else factor * claim.delta_relative
        if value is None:
            continue
        bars = axes.errorbar(
            [line.position],
            [base + value],
            yerr=None if noise is None else [factor * noise],
            fmt=mark.shape,
            color=mark.colour,
            markerfacecolor=_face(claim, mark),
            markersize=4.5,
            elinewidth=0.9,
            capsize=2,
        )
        for artist in bars.get_children():
            artist.set_gid(f"line-{line.line}-deviation")
    axes.set_ylabel("observed − ideal,\n° 2θ" if in_degrees else "observed − ideal,\n% of d")
    axes.margins(y=0.15)
    axes.legend(loc="best", frameon=False, fontsize=8)
    drawing.light_grid(axes)


def named_places(match: Match) -> list[tuple[str, LatticeType, float, Mark]]:
    """Return what the axis figure labels: the marked phases and the unlisted one, each at its fitted a."""
    marks = phase_marks(match)
    places = [
        (
            phase.name,
            phase.lattice_type,
            phase.a_fitted_angstrom or phase.a_stored_angstrom,
            marks[phase.name],
        )
        for phase in match.phases
        if phase.name in marks
    ]
    best = match.unlisted.best
    if best is not None and match.unlisted.probability >= 0.05:
        mark = next((mark for name, mark in marks.items() if name.startswith("unlisted ")), UNLISTED_MARK)
        places.append(("unlisted", best.lattice_type, best.a_angstrom, mark))
    return places


def match_figure(match: Match, path: Path) -> None:
    """Write the lines of a match with their deviations as .svg, .png or .pdf."""
    drawing.figure_format(path)
    with drawing.look():
        drawing.save_figure(lines_figure(match), path)
