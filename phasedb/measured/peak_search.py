"""Where in a scan lines may be: filters over its segments, one width for each place, no K-alpha2 twice."""

from __future__ import annotations

from typing import Final

import numpy as np

from phasedb.measured.detection import SCALES_OF_LEVEL, Answer, Candidate, filter_answers, maxima
from phasedb.measured.peaklist import FloatArray
from phasedb.measured.profile import Doublet, moved_by_ratio
from phasedb.measured.scan import Scan
from phasedb.measured.widths import WidthModel

SHORTEST_SEGMENT: Final = 16
RESOLVING_SCALE: Final = 0.55
"""Filter scale over line width in the second search: parts close lines at a loss of 14 % of the signal."""
SAME_LINE: Final = 0.75
"""Nearer than this share of the width two lines are one: a list is read at about that resolution."""
_NEXT_SCALE: Final = SCALES_OF_LEVEL[1] / SCALES_OF_LEVEL[0]


def answers_over(
    scan: Scan, y: FloatArray, sigma: FloatArray, *, widest_deg: float, narrowest_deg: float = 0.0
) -> list[Answer]:
    """Return the filters' answers to `y` (counts or a residual) in every segment of the scan."""
    found = []
    for first, end in scan.segments:
        if end - first >= SHORTEST_SEGMENT:
            part = slice(first, end)
            found += filter_answers(
                scan.two_theta_deg[part],
                y[part],
                sigma[part],
                widest_deg=widest_deg,
                narrowest_deg=narrowest_deg,
            )
    return found


def at_own_width(
    answers: list[Answer], threshold: float, widths: WidthModel, doublet: Doublet | None
) -> list[Candidate]:
    """Return candidates above `threshold`, strongest first, each from the filter that suits its place."""
    if not answers:
        return []
    smallest = min(answer.scale_deg for answer in answers)
    every = []
    for answer in answers:
        for candidate in maxima(answer, threshold):
            wanted = max(RESOLVING_SCALE * _width_at(widths, candidate.x), smallest)
            if abs(np.log(answer.scale_deg / wanted)) <= 0.5 * np.log(_NEXT_SCALE) + 1e-9:
                every.append(candidate)
    kept: list[Candidate] = []
    for candidate in sorted(every, key=lambda one: -one.strength):
        width = _width_at(widths, candidate.x)
        apart = all(abs(candidate.x - other.x) > SAME_LINE * width for other in kept)
        if apart and not _is_alpha2(candidate, kept, width, doublet):
            kept.append(candidate)
    return kept


def _width_at(widths: WidthModel, two_theta_deg: float) -> float:
    return float(widths.at(np.array([two_theta_deg]))[0])


def _is_alpha2(
    candidate: Candidate, stronger: list[Candidate], width: float, doublet: Doublet | None
) -> bool:
    """Return whether the candidate lies where a stronger one has its K-alpha2."""
    if doublet is None:
        return False
    for parent in stronger:
        alpha2 = float(moved_by_ratio(np.array([parent.x]), doublet.ratio_alpha2)[0][0])
        near = abs(candidate.x - alpha2) < max(0.4 * width, 0.25 * (alpha2 - parent.x))
        if near and candidate.strength < 0.85 * parent.strength:
            return True
    return False
