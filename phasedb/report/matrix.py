"""The figure of a batch: samples against phases."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from phasedb.report import drawing

if TYPE_CHECKING:
    from matplotlib.figure import Figure

_MOST_PHASES: Final = 40
_LABELLED_ROWS: Final = 120
Cells = Sequence[tuple[str, dict[str, float]]]


def matrix_figure(cells: Cells, path: Path) -> None:
    """Write the matrix of samples against phases as .svg, .png or .pdf.

    Parameters
    ----------
    cells : sequence of (sample, {phase: probability})
        In the order of the rows. The phases found most often come first; at most 40 are shown.
    """
    drawing.figure_format(path)
    with drawing.look():
        drawing.save_figure(_draw(cells), path)


def _draw(cells: Cells) -> Figure:
    weight: Counter[str] = Counter()
    for _, probabilities in cells:
        weight.update(probabilities)
    phases = [name for name, _ in sorted(weight.items(), key=lambda item: (-item[1], item[0]))]
    shown = phases[:_MOST_PHASES]
    columns = {name: index for index, name in enumerate(shown)}
    grid = np.zeros((len(cells), max(1, len(shown))))
    for row, (_, probabilities) in enumerate(cells):
        for name, probability in probabilities.items():
            if name in columns:
                grid[row, columns[name]] = probability
    labelled = len(cells) <= _LABELLED_ROWS
    height = min(40.0, 2.2 + 0.17 * len(cells)) if labelled else 12.0
    figure = drawing.new_figure(min(20.0, 3.2 + 0.26 * max(4, len(shown))), height)
    axes = figure.subplots()
    image = axes.imshow(grid, cmap="Greys", vmin=0, vmax=1, aspect="auto", interpolation="nearest")
    axes.set_xticks(
        range(len(shown)), [drawing.shortened(name, 32) for name in shown], rotation=60, ha="left", fontsize=7
    )
    axes.xaxis.tick_top()
    if labelled:
        axes.set_yticks(range(len(cells)), [drawing.shortened(name, 36) for name, _ in cells], fontsize=6)
        axes.set_yticks(np.arange(len(cells) + 1) - 0.5, minor=True)
        axes.grid(which="minor", axis="y", color="#dfe3e6", linewidth=0.4)
        axes.tick_params(which="minor", length=0)
    else:
        axes.set_ylabel(f"{len(cells)} lists, in the order of the table")
    bar = figure.colorbar(image, ax=axes, shrink=min(1.0, 2.5 / height), pad=0.01)
    bar.set_label("probability", fontsize=8)
    hidden = len(phases) - len(shown)
    if hidden:
        axes.set_xlabel(f"{hidden} more phases, each in fewer lists, are not shown")
    return figure
