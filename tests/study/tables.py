"""The tables that the study prints."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from study.metrics import (
    ListScore,
    bootstrap,
    brier,
    calibration_error,
    log_loss,
    pooled,
    reliability,
    share,
    wrong_per_list,
)

if TYPE_CHECKING:
    from study.run import Row

GROUPS = (
    ("1-3 phases, intensities", ("one", "two", "three")),
    ("1-3 phases, no intensities", ("one-bare", "two-bare", "three-bare")),
)


def _by_set(rows: Sequence[Row]) -> dict[str, list[Row]]:
    sets: dict[str, list[Row]] = {}
    for row in rows:
        sets.setdefault(row.set_name, []).append(row)
    for label, names in GROUPS:
        if all(name in sets for name in names):
            sets[label] = [row for name in names for row in sets[name]]
    return sets


def _percent(triple: tuple[float, float, float]) -> str:
    value, low, high = triple
    return "–" if np.isnan(value) else f"{100 * value:.1f} ({100 * low:.1f}–{100 * high:.1f})"


def _plain(triple: tuple[float, float, float], digits: int = 3) -> str:
    value, low, high = triple
    return "–" if np.isnan(value) else f"{value:.{digits}f} ({low:.{digits}f}–{high:.{digits}f})"


def figures_text(rows: Sequence[Row]) -> str:
    """Return the main table: one row for each set, with 95 % bootstrap intervals."""
    lines = [
        "| set | lists | found, look-alikes (%) | found, strict (%) | ceiling, strict (%) | wrong claims per list | "
        "phases claimed (%) | shift in 2 esd (%) | ms a list |",
        "| --- | --- | --- | --- | --- | --- | --- | --- | --- |",
    ]
    for name, members in _by_set(rows).items():
        scores = [row.score for row in members]
        inside = [np.mean(one.shift_inside) for one in scores if one.shift_inside]
        claimed = bootstrap(scores, _claimed)
        lines.append(
            f"| {name} | {len(scores)} | {_percent(bootstrap(scores, lambda s: share(s, 'found_alike')))} | "
            f"{_percent(bootstrap(scores, lambda s: share(s, 'found_strict')))} | "
            f"{_percent(bootstrap(scores, lambda s: share(s, 'ceiling')))} | "
            f"{_plain(bootstrap(scores, wrong_per_list))} | {_percent(claimed)} | "
            f"{f'{100 * np.mean(inside):.1f}' if inside else '–'} | "
            f"{1000 * np.mean([one.seconds for one in scores]):.0f} |"
        )
    lines += ["", "| probabilities | n | ECE | Brier | log loss |", "| --- | --- | --- | --- | --- |"]
    everything = [row.score for row in rows]
    for label, kind in (("strict", "strict"), ("rule for claims", "rule"), ("groups", "group")):
        p, _ = pooled(everything, kind)
        lines.append(
            f"| {label} | {len(p)} | {_plain(bootstrap(everything, lambda s, k=kind: calibration_error(*pooled(s, k))))} | "
            f"{_plain(bootstrap(everything, lambda s, k=kind: brier(*pooled(s, k))))} | "
            f"{_plain(bootstrap(everything, lambda s, k=kind: log_loss(*pooled(s, k))))} |"
        )
    faults = sum(bool(row.score.fault) for row in rows)
    if faults:
        lines.append(f"\nFAULTS: {faults} lists ended in an error")
    return "\n".join(lines)


def _claimed(scores: Sequence[ListScore]) -> float:
    total = sum(one.n_listed for one in scores)
    missed = sum(len(one.missed) for one in scores)
    return 1.0 - missed / total if total else float("nan")


def rivals_text(rows: Sequence[Row]) -> str:
    """Return the usual practice on the same lists."""
    names = list(rows[0].rivals) if rows else []
    if not names:
        return ""
    lines = [
        "| usual practice | set | found, look-alikes (%) | found, strict (%) | wrong claims per list |",
        "| --- | --- | --- | --- | --- |",
    ]
    for name in names:
        for set_name, members in _by_set(rows).items():
            total = sum(row.score.n_listed for row in members)
            wrong = np.mean([row.rivals[name].wrong for row in members])
            alike, strict = (
                "–"
                if not total
                else f"{100 * sum(getattr(row.rivals[name], field) for row in members) / total:.1f}"
                for field in ("found_alike", "found_strict")
            )
            lines.append(f"| {name} | {set_name} | {alike} | {strict} | {wrong:.2f} |")
    return "\n".join(lines)


def reliability_text(rows: Sequence[Row]) -> str:
    """Return the reliability diagram as a table: stated against seen in ten equal-count bins."""
    lines = ["| stated (strict) | seen | n |", "| --- | --- | --- |"]
    p, right = pooled([row.score for row in rows], "strict")
    lines += [f"| {stated:.3f} | {seen:.3f} | {count} |" for stated, seen, count in reliability(p, right)]
    return "\n".join(lines)
