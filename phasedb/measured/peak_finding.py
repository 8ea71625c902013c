"""From a scan to its lines: noise, detection, fits of overlapping groups, uncertainties."""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np

from phasedb.measured.background import smooth_through
from phasedb.measured.detection import Candidate, strongest_over_scales, threshold_for
from phasedb.measured.noise import Noise, noise_of
from phasedb.measured.peak_search import answers_over, at_own_width
from phasedb.measured.peaklist import FloatArray
from phasedb.measured.profile import Doublet
from phasedb.measured.scan import Scan
from phasedb.measured.scan_fitting import Fitting
from phasedb.measured.scan_result import ScanResult
from phasedb.measured.widths import WidthModel, fit_widths

Progress = Callable[[float, str], None]

FALSE_LINES: Final = 0.1
"""Lines that a scan may show from noise alone, on average."""
WIDEST_DEG: Final = 2.5
"""No line of a powder is wider."""
ROUNDS: Final = 3
"""Fits, each followed by learning the shapes and another look at what is left."""


def find_lines(
    scan: Scan, *, false_lines: float = FALSE_LINES, progress: Progress | None = None
) -> ScanResult:
    """Return the lines of a scan with positions, areas, widths and their uncertainties.

    Parameters
    ----------
    false_lines : float
        Lines expected from noise alone, over the whole scan.
    progress : callable (share done, what is being done), optional
    """
    tell = progress or (lambda share, what: None)
    noise = noise_of(scan)
    tell(0.1, "searching")
    threshold, widths, found = _first_search(scan, noise.sigma, false_lines)
    if widths is None:
        return _nothing(scan, noise, threshold, false_lines)
    fitting = Fitting(scan, noise, threshold=threshold, widths=widths, found=found)
    for number in range(ROUNDS):
        tell(0.2 + 0.2 * number, "fitting")
        fitting.fit_all()
        fitting.learn_shapes()
        if number < ROUNDS - 1:
            fitting.search_residual()
    tell(0.85, "fitting")
    fitting.fit_all()
    tell(1.0, "done")
    if not len(fitting.significant()):
        return _nothing(scan, noise, threshold, false_lines)
    return fitting.result(false_lines)


def _nothing(scan: Scan, noise: Noise, threshold: float, false_lines: float) -> ScanResult:
    step = max(float(np.ptp(scan.two_theta_deg)) / 10.0, 1e-6)
    level = smooth_through(scan.two_theta_deg, scan.counts, noise.sigma, step)
    return ScanResult(
        scan=scan,
        background=level,
        model=level,
        sigma=noise.sigma,
        lines=(),
        false_lines=false_lines,
        threshold=threshold,
        noise_origin=noise.origin,
        doublet_ratio=None,
        notes=(*scan.notes, "no line stands above the noise"),
    )


def _first_search(
    scan: Scan, sigma: FloatArray, false_lines: float
) -> tuple[float, WidthModel | None, list[Candidate]]:
    """Find lines at any width, learn the width from the strongest, then search again at that width.

    Returns the threshold, the widths (None if nothing was found) and the candidates.
    """
    x = scan.two_theta_deg
    span = sum(float(x[end - 1] - x[first]) for first, end in scan.segments)
    answers = answers_over(scan, scan.counts, sigma, widest_deg=min(WIDEST_DEG, span / 8.0))
    in_scales = sum(float(np.ptp(answer.x)) / answer.scale_deg for answer in answers)
    threshold = threshold_for(false_lines, in_scales)
    found = strongest_over_scales(answers, threshold)[:40]
    if not found:
        return threshold, None, []
    widths = fit_widths(
        np.array([one.x for one in found]),
        np.array([one.fwhm for one in found]),
        np.array([min(one.strength, 300.0) for one in found]),
        low=float(x[0]),
        high=float(x[-1]),
    )
    candidates = at_own_width(answers, threshold, widths, Doublet.of(scan.radiation))
    return threshold, widths, candidates or found[:1]
