"""The rounds of fitting over one scan: groups of lines, their shapes, the background between them."""

from __future__ import annotations

from dataclasses import replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.measured.background import clipped_background, smooth_through
from phasedb.measured.detection import Candidate
from phasedb.measured.fitting_lines import FittingLines
from phasedb.measured.line_fit import ShapePrior, fit_group
from phasedb.measured.noise import Noise
from phasedb.measured.peak_search import (
    RESOLVING_SCALE,
    SAME_LINE,
    SHORTEST_SEGMENT,
    answers_over,
    at_own_width,
)
from phasedb.measured.peaklist import FloatArray
from phasedb.measured.profile import Doublet, moved_by_ratio, pseudo_voigt_height
from phasedb.measured.scan import Scan
from phasedb.measured.scan_result import FoundLine, ScanResult
from phasedb.measured.widths import WidthModel, fit_widths

MOST_REFITS: Final = 4
BOOK_RATIO: Final = 0.5
"""K-alpha2 over K-alpha1: International Tables for Crystallography Vol. C, 2.3.5.2."""
LEAST_RATIO: Final = 0.2
"""Below it a scan shows no doublet."""
RESOLVED: Final = 0.7
"""Splitting over width from which lines tell the ratio of the doublet."""
KEEP_FROM: Final = 3.5
"""Area over its uncertainty below which a fitted line is dropped."""
SHAPE_ERROR: Final = 0.08
"""Share of the fitted height that the line shape may be wrong by, when the residual is searched again."""
TAIL_ERROR: Final = 0.004
TAIL_ERROR_WIDTHS: Final = 5.0
"""Share of its height that a line may leave within so many widths (a filter's edge, axial divergence)."""
ODD_WIDTH: Final = 2.5
"""A weak line this many times as wide as its neighbours is a bend of the background."""


class Fitting:
    """What the rounds of fitting hand to each other: lines, background, noise, shapes."""

    def __init__(
        self, scan: Scan, noise: Noise, *, threshold: float, widths: WidthModel, found: list[Candidate]
    ) -> None:
        self.scan = scan
        self.x = scan.two_theta_deg
        self.noise = noise
        self.threshold = threshold
        self.widths = widths
        self.doublet = Doublet.of(scan.radiation)
        self.doublet_ratio = BOOK_RATIO
        self.doublet_scale = 0.03 if self.doublet is None or self.doublet.is_certain else 0.7
        self.logit_mixing, self.mixing_scale, self.width_scale = 0.0, 1.5, 0.4
        reach = 6.0 * float(self.widths.at(self.x).max())
        self.background = np.concatenate(
            [
                clipped_background(self.x[first:end], scan.counts[first:end], reach)
                if end - first >= SHORTEST_SEGMENT
                else scan.counts[first:end].copy()
                for first, end in scan.segments
            ]
        )
        self.lines = self.started(found, np.zeros_like(self.x))

    def started(self, candidates: list[Candidate], model: FloatArray) -> FittingLines:
        centre = np.sort(np.array([candidate.x for candidate in candidates]))
        fwhm = self.widths.at(centre)
        height = np.interp(centre, self.x, self.scan.counts - self.background - model)
        height = np.maximum(height, np.interp(centre, self.x, self.noise.sigma))
        mixing = 1.0 / (1.0 + np.exp(-self.logit_mixing))
        return FittingLines.started(centre, 1.2 * height * fwhm, fwhm, mixing=mixing)

    def search_residual(self) -> None:
        """Look for lines that the fitted ones leave; the shape of strong lines is never quite right."""
        model = self.lines.model(self.x, self.doublet)
        widths = self.widths.at(self.x)
        answers = answers_over(
            self.scan,
            self.scan.counts - self.background - model,
            np.hypot(self.noise.sigma, SHAPE_ERROR * model + self.tail_error()),
            widest_deg=float(widths.max()),
            narrowest_deg=0.5 * RESOLVING_SCALE * float(widths.min()),
        )
        widest = np.maximum(self.lines.fwhm, self.widths.at(self.lines.centre))
        new = [
            candidate
            for candidate in at_own_width(answers, self.threshold, self.widths, self.doublet)
            if (np.abs(self.lines.centre - candidate.x) > SAME_LINE * widest).all()
            and not self.is_misfit_of_alpha2(candidate, self.scan.counts - self.background - model)
        ]
        if new:
            self.lines = self.lines.joined(self.started(new, model))

    def tail_error(self) -> FloatArray:
        """Return how wrong the tails of strong lines may be, at every point (counts)."""
        error = np.zeros_like(self.x)
        lines = self.lines
        height = lines.area * pseudo_voigt_height(lines.fwhm, lines.mixing)
        reach = TAIL_ERROR_WIDTHS * lines.fwhm
        first = np.searchsorted(self.x, lines.centre - reach)
        last = np.searchsorted(self.x, lines.alpha2(self.doublet) + reach)
        for low, high, value in zip(first, last, TAIL_ERROR * height, strict=True):
            error[low:high] = np.maximum(error[low:high], value)
        return error

    def is_misfit_of_alpha2(self, candidate: Candidate, left: FloatArray) -> bool:
        """Return whether what is left there is a small part of a fitted line's K-alpha2."""
        if self.doublet is None:
            return False
        lines = self.lines
        near = np.abs(lines.alpha2(self.doublet) - candidate.x) < 0.5 * lines.fwhm
        height = lines.area * pseudo_voigt_height(lines.fwhm, lines.mixing)
        return bool((near & (np.interp(candidate.x, self.x, left) < 0.5 * height)).any())

    def fit_all(self) -> None:
        """Fit every group until no two lines run together, then draw the background anew."""
        for _ in range(MOST_REFITS):
            fitted = self.fitted()
            left = fitted.without_vanished(SAME_LINE)
            self.lines = left if len(left) else fitted
            if len(left) in (0, len(fitted)):
                break
        self.redraw_background()

    def fitted(self) -> FittingLines:
        """Return the lines after one fit of every group, the other groups' tails taken off."""
        lines = self.lines
        whole = lines.model(self.x, self.doublet)
        for first, end in lines.groups(self.doublet):
            index = np.arange(first, end)
            own = lines.taken(index)
            inside = self.inside(own)
            if int(inside.sum()) < 5 + 3 * len(index):
                continue
            x = self.x[inside]
            others = whole[inside] - own.model(x, self.doublet)
            fit = fit_group(
                x,
                self.scan.counts[inside] - self.background[inside] - others,
                self.noise.sigma[inside],
                centre=own.centre,
                area=own.area,
                prior=self.shape_prior(own.centre),
                doublet=self.doublet,
            )
            lines.store(index, fit)
            whole[inside] = others + lines.taken(index).model(x, self.doublet)
        return lines

    def inside(self, own: FittingLines) -> NDArray[np.bool_]:
        """Return the points that belong to the fit of a group: usable, in the same segment, near enough."""
        low, high = own.span(self.doublet)
        near: NDArray[np.bool_] = (self.x >= low) & (self.x <= high) & self.scan.usable
        for first, end in self.scan.segments:
            if self.x[first] <= own.centre[0] <= self.x[end - 1]:
                near[:first] = False
                near[end:] = False
        return near

    def shape_prior(self, centre: FloatArray) -> ShapePrior:
        return ShapePrior(
            ln_fwhm=np.log(self.widths.at(centre)),
            ln_fwhm_scale=np.full(len(centre), self.width_scale),
            logit_mixing=np.full(len(centre), self.logit_mixing),
            logit_mixing_scale=self.mixing_scale,
            doublet_ratio=self.doublet_ratio,
            doublet_scale=self.doublet_scale,
        )

    def redraw_background(self) -> None:
        model = self.lines.model(self.x, self.doublet)
        left = self.scan.counts - model
        sigma = np.hypot(self.noise.sigma, SHAPE_ERROR * model)
        for first, end in self.scan.segments:
            keep = self.scan.usable[first:end]
            if int(keep.sum()) < SHORTEST_SEGMENT:
                continue
            x = self.x[first:end]
            step = float(np.median(np.diff(x)))
            spacing = max(3.0 * float(np.median(self.widths.at(x))), 12.0 * step)
            curve = smooth_through(x[keep], left[first:end][keep], sigma[first:end][keep], spacing)
            self.background[first:end] = np.interp(x, x[keep], curve)
        self.noise = self.noise.at_level(self.background + model)

    def learn_shapes(self) -> None:
        """Learn width and Lorentzian share as smooth functions of angle, and what the doublet is."""
        lines = self.lines
        strength = np.nan_to_num(lines.area / np.maximum(lines.area_esd, 1e-300))
        strong = strength >= min(15.0, float(np.sort(strength)[-min(3, len(strength))]))
        weight = np.clip(strength[strong], 1e-3, 100.0) ** 2
        self.widths = fit_widths(
            lines.centre[strong], lines.fwhm[strong], weight, low=float(self.x[0]), high=float(self.x[-1])
        )
        self.width_scale = max(self.widths.spread, 0.08)
        logit = np.log(lines.mixing[strong] / (1.0 - lines.mixing[strong]))
        self.logit_mixing = float(np.clip(np.average(logit, weights=weight), -2.5, 2.5))
        self.mixing_scale = 0.7
        self.learn_doublet(strong)

    def learn_doublet(self, strong: NDArray[np.bool_]) -> None:
        """Learn the ratio of the doublet from lines that resolve it; give it up where nothing shows it.

        Only resolved lines tell: on others the ratio would take up the asymmetry of the line shape.
        """
        if self.doublet is None:
            return
        lines = self.lines
        start = moved_by_ratio(lines.centre, self.doublet.ratio_alpha1)[0]
        resolved = strong & (lines.alpha2(self.doublet) - start > RESOLVED * lines.fwhm)
        for place in self.x[~self.scan.usable]:
            resolved &= np.abs(lines.centre - place) > 2.0 * lines.fwhm
        if resolved.any():
            self.doublet_ratio = float(np.median(lines.ratio[resolved]))
        if not self.doublet.is_certain:
            rarely = self.doublet.is_on_mean and int(resolved.sum()) < 0.5 * int(strong.sum())
            shows = self.doublet_ratio >= LEAST_RATIO and not rarely
            self.doublet = replace(self.doublet, is_certain=True) if shows else None
        self.doublet_scale = 0.01 if resolved.any() else 0.03

    def significant(self) -> FittingLines:
        """Return the lines that stand out, inside a segment, and are no bend of the background."""
        lines = self.lines
        odd = lines.fwhm > ODD_WIDTH * self.widths.at(lines.centre)
        keep = lines.area >= np.where(odd, 4.0 * KEEP_FROM, KEEP_FROM) * lines.area_esd
        inside = np.zeros(len(lines), dtype=np.bool_)
        for first, end in self.scan.segments:
            inside |= (lines.centre >= self.x[first]) & (lines.centre <= self.x[end - 1])
        return lines.taken(keep & inside)

    def result(self, false_lines: float) -> ScanResult:
        lines = self.significant()
        height = lines.area * pseudo_voigt_height(lines.fwhm, lines.mixing)
        columns = (
            lines.centre,
            lines.centre_esd,
            lines.area,
            lines.area_esd,
            height,
            lines.fwhm,
            lines.fwhm_esd,
            lines.mixing,
            lines.chi2,
        )
        notes = list(self.scan.notes)
        radiation = self.scan.radiation
        if self.doublet is not None and self.doublet.is_on_mean and radiation is not None:
            notes.append(
                "the K-alpha doublet is resolved: positions are those of K-alpha1, while the wavelength "
                "given is the mean; unless the angles were calibrated with it, give --radiation "
                f"{radiation.anode}"
            )
        return ScanResult(
            scan=self.scan,
            background=self.background,
            model=self.background + lines.model(self.x, self.doublet),
            sigma=self.noise.sigma,
            lines=tuple(FoundLine(*(float(value) for value in row)) for row in zip(*columns, strict=True)),
            false_lines=false_lines,
            threshold=self.threshold,
            noise_origin=self.noise.origin,
            doublet_ratio=None if self.doublet is None else self.doublet_ratio,
            notes=tuple(notes),
        )
