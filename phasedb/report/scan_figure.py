"""A scan with its background, fit and lines, as a figure."""

from __future__ import annotations

from pathlib import Path
from typing import Final

import numpy as np

from phasedb.measured.scan_result import ScanResult
from phasedb.report.drawing import FAINT, INK, MARKS, light_grid, look, new_figure, save_figure

MOST_POINTS: Final = 6000
"""Longer scans are drawn by the lowest and highest point of each piece, so that no line is lost."""
LABELLED: Final = 60


def peaks_figure(result: ScanResult, path: Path) -> None:
    """Draw counts, background, fit and found lines, and the misfit below, into `path` (.svg, .png, .pdf)."""
    with look():
        figure = new_figure(9.0, 5.5)
        upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=(4, 1))
        scan = result.scan
        x = scan.two_theta_deg
        for first, end in scan.segments:
            part = slice(first, end)
            shown = x[part][_envelope(scan.counts[part])]
            counts = scan.counts[part][_envelope(scan.counts[part])]
            upper.plot(shown, counts, ".", color=FAINT, markersize=2, gid=f"counts-{first}")
            fit = _envelope(result.model[part])
            upper.plot(x[part][fit], result.model[part][fit], color=MARKS[0].colour, linewidth=1.0)
            upper.plot(
                x[part][fit],
                result.background[part][fit],
                color=MARKS[1].colour,
                linewidth=1.0,
                dashes=(4, 2),
            )
            misfit = (scan.counts[part] - result.model[part]) / result.sigma[part]
            drawn = _envelope(misfit)
            lower.plot(x[part][drawn], misfit[drawn], color=INK, linewidth=0.5)
        for number, line in enumerate(result.lines, 1):
            top = float(np.interp(line.two_theta_deg, x, result.model))
            upper.plot(
                [line.two_theta_deg],
                [top],
                MARKS[0].shape,
                color=MARKS[0].colour,
                markersize=3,
                gid=f"line-{number}",
            )
            if len(result.lines) <= LABELLED:
                upper.annotate(
                    f"{line.two_theta_deg:.3f}",
                    (line.two_theta_deg, top),
                    xytext=(0, 4),
                    textcoords="offset points",
                    rotation=90,
                    ha="center",
                    va="bottom",
                    fontsize=6,
                )
        light_grid(upper)
        low, high = float(scan.counts.min()), float(scan.counts.max())
        upper.set_ylim(low - 0.03 * (high - low), high + 0.16 * (high - low))
        upper.set_ylabel("counts")
        lower.set_ylabel("misfit / noise")
        lower.set_xlabel("2θ, degrees")
        upper.set_title(
            f"{len(result.lines)} lines; line: fit, dashes: background; "
            f"at most {result.false_lines:g} lines expected from noise",
            fontsize=9,
        )
        save_figure(figure, path)


def _envelope(values: np.ndarray) -> np.ndarray:
    """Return indices of all points, or of the lowest and highest of each piece of a long scan."""
    if len(values) <= MOST_POINTS:
        return np.arange(len(values))
    size = int(np.ceil(2 * len(values) / MOST_POINTS))
    whole = len(values) // size * size
    pieces = values[:whole].reshape(-1, size)
    start = np.arange(0, whole, size)
    both = np.stack([start + pieces.argmin(axis=1), start + pieces.argmax(axis=1)], axis=1)
    return np.unique(both)
