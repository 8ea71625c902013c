"""The tables that the study prints."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np

from study.metrics import (
    ListScore,
    bootstrap,
    brier,
    calibration_error,
    claimed_share,
    log_loss,
    pooled,
    reliability,
    share,
    wrong_per_list,
)

if TYPE_CHECKING:
    from study.run import Row

Scores = Sequence[ListScore]
Figure = Callable[[Scores], float]

GROUPS = {
    "1 to 3, intensities": ("one", "two", "three"),
    "1 to 3, bare": ("one-bare", "two-bare", "three-bare"),
}
"""Sets that the design gives one figure for."""

COLUMNS: tuple[tuple[str, Figure, float], ...] = (
    ("found, look-alikes (%)", lambda scores: share(scores, "found_alike"), 100.0),
    ("found, strict (%)", lambda scores: share(scores, "found_strict"), 100.0),
    ("ceiling, strict (%)", lambda scores: share(scores, "ceiling"), 100.0),
    ("phases claimed (%)", claimed_share, 100.0),
    ("wrong claims a list", wrong_per_list, 1.0),
)


def by_set(rows: Sequence[Row]) -> dict[str, list[Row]]:
    """Return the rows of each set, then those of each group of sets that is complete."""
    sets: dict[str, list[Row]] = {}
    for row in rows:
        sets.setdefault(row.set_name, []).append(row)
    for label, names in GROUPS.items():
        if all(name in sets for name in names):
            sets[label] = [row for name in names for row in sets[name]]
    return sets


def figures_text(rows: Sequence[Row]) -> str:
    """Return the main table: one row for each set, with 95 % bootstrap intervals over whole lists."""
    heads = ["set", "lists", *(head for head, _, _ in COLUMNS), "shift within 2 esd (%)", "CPU ms a list"]
    lines = [_row(heads), _row(["---"] * len(heads))]
    for name, members in by_set(rows).items():
        scores = [row.score for row in members]
        inside = [float(np.mean(one.shift_inside)) for one in scores if one.shift_inside]
        cells = [_cell(scores, figure, scale) for _, figure, scale in COLUMNS]
        covered = f"{100 * np.mean(inside):.1f}" if inside else "–"
        time_ms = f"{1000 * np.mean([one.seconds for one in scores]):.0f}"
        lines.append(_row([name, str(len(scores)), *cells, covered, time_ms]))
    faults = sum(bool(row.score.fault) for row in rows)
    return "\n".join(lines) + (f"\n\nFAULTS: {faults} lists ended in an error" if faults else "")


def honesty_text(rows: Sequence[Row]) -> str:
    """Return the calibration figures of all probabilities >= 0.05, over all sets."""
    scores = [row.score for row in rows]
    heads = ["probabilities", "n", "ECE", "Brier", "log loss"]
    lines = [_row(heads), _row(["---"] * len(heads))]
    for kind in ("entry", "group"):
        figures = [
            _cell(scores, lambda some, f=figure, k=kind: f(*pooled(some, k)), 1.0)
            for figure in (calibration_error, brier, log_loss)
        ]
        lines.append(_row([kind, str(len(pooled(scores, kind)[0])), *figures]))
    return "\n".join(lines)


def rivals_text(rows: Sequence[Row]) -> str:
    """Return the usual practice on the same lists, beside the matcher."""
    names = list(rows[0].rivals) if rows else []
    if not names:
        return ""
    sets = by_set(rows)
    single = {name for members in GROUPS.values() for name in members}
    shown = [name for name in sets if name not in single or not set(GROUPS) & set(sets)]
    lines = [_row(["found, look-alikes (%) / wrong claims a list", *shown])]
    lines.append(_row(["---"] * (len(shown) + 1)))
    scores = {name: [row.score for row in sets[name]] for name in shown}
    ours = [_pair(share(scores[name], "found_alike"), wrong_per_list(scores[name])) for name in shown]
    lines.append(_row(["this matcher", *ours]))
    for rival in names:
        cells = []
        for name in shown:
            total = sum(row.score.n_listed for row in sets[name])
            found = sum(row.rivals[rival].found_alike for row in sets[name])
            wrong = float(np.mean([row.rivals[rival].wrong for row in sets[name]]))
            cells.append(_pair(found / total if total else float("nan"), wrong))
        lines.append(_row([rival, *cells]))
    return "\n".join(lines)


def reliability_text(rows: Sequence[Row]) -> str:
    """Return the reliability diagram as a table: stated against seen in ten equal-count bins."""
    lines = [_row(["stated (entry)", "seen", "n"]), _row(["---"] * 3)]
    p, right = pooled([row.score for row in rows], "entry")
    lines += [
        _row([f"{stated:.3f}", f"{seen:.3f}", str(count)]) for stated, seen, count in reliability(p, right)
    ]
    return "\n".join(lines)


def _row(cells: Sequence[str]) -> str:
    return "| " + " | ".join(cells) + " |"


def _cell(scores: Scores, figure: Figure, scale: float) -> str:
    value, low, high = (scale * part for part in bootstrap(scores, figure))
    digits = 1 if scale > 1.0 else 3
    return "–" if np.isnan(value) else f"{value:.{digits}f} ({low:.{digits}f}–{high:.{digits}f})"


def _pair(found: float, wrong: float) -> str:
    return f"{'–' if np.isnan(found) else f'{100 * found:.1f}'} / {wrong:.2f}"
