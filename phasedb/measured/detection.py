"""Finding lines in a noisy scan at a stated expected number of false ones."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.measured.noise import MAD_TO_SIGMA
from phasedb.measured.peaklist import FloatArray

NARROWEST_STEPS: Final = 2.2
"""Smallest filter scale in (averaged) steps."""
SCALES_OF_LEVEL: Final = (1.0, 2.0**0.5)
WIDTH_OF_SCALE: Final = 2.3548 / 5.0**0.5
"""Full width at half maximum of the Gaussian line that a filter of scale 1 answers best."""

DIP: Final = 5.0
"""How far, in units of noise, the answer sinks between two lines."""


@dataclass(frozen=True, slots=True)
class Answer:
    """Signal to noise of one filter along a scan: positions (degrees), values, filter scale (degrees)."""

    x: FloatArray
    value: FloatArray
    scale_deg: float


@dataclass(frozen=True, slots=True)
class Candidate:
    """A place where a line may be: 2theta and width in degrees, signal to noise."""

    x: float
    fwhm: float
    strength: float


def filter_answers(
    x: FloatArray, y: FloatArray, sigma: FloatArray, *, widest_deg: float, narrowest_deg: float = 0.0
) -> list[Answer]:
    """Return the answers of zero-mean line filters of rising scale, each normalised to its noise.

    The filter is the negative second derivative of a Gaussian: blind to a straight background. Wide scales
    work on averaged points, so a million points cost little. Where neighbouring noise is correlated, the
    scatter of the answers themselves widens the noise.
    """
    answers: list[Answer] = []
    step = float(np.median(np.diff(x)))
    while len(x) >= 16:
        for factor in SCALES_OF_LEVEL:
            scale = NARROWEST_STEPS * factor
            if step * scale * WIDTH_OF_SCALE > widest_deg:
                return answers
            if step * scale * WIDTH_OF_SCALE < 0.7 * narrowest_deg:
                continue
            answers.append(Answer(x, _normalised(y, sigma, scale), scale * step))
        x, y, sigma = _halved(x), _halved(y), _halved(sigma**2) ** 0.5 / 2.0**0.5
        step *= 2.0
    return answers


def _normalised(y: FloatArray, sigma: FloatArray, scale: float) -> FloatArray:
    half = int(np.ceil(5.0 * scale))
    u = np.arange(-half, half + 1) / scale
    kernel = (1.0 - u**2) * np.exp(-0.5 * u**2)
    kernel -= kernel.mean()
    padded = np.concatenate([2.0 * y[0] - y[half:0:-1], y, 2.0 * y[-1] - y[-2 : -half - 2 : -1]])
    if len(padded) != len(y) + 2 * half:
        return np.zeros(len(y))
    signal = np.convolve(padded, kernel, mode="valid")
    variance = np.convolve(np.pad(sigma**2, half, mode="edge"), kernel**2, mode="valid")
    answer = signal / np.sqrt(np.maximum(variance, 1e-300))
    return np.asarray(answer / max(_scatter(answer), 1.0))


def _scatter(answer: FloatArray) -> float:
    """Return the standard deviation of the answers where there are no lines: a low quantile over blocks."""
    blocks = np.array_split(answer, min(24, max(len(answer) // 60, 1)))
    return MAD_TO_SIGMA * float(np.quantile([np.median(np.abs(block)) for block in blocks], 0.3))


def _halved(values: FloatArray) -> FloatArray:
    whole = len(values) // 2 * 2
    return np.asarray(values[:whole].reshape(-1, 2).mean(axis=1))


def threshold_for(false_lines: float, length_in_scales: float) -> float:
    """Return the signal to noise above which `false_lines` maxima are expected from noise alone.

    Notes
    -----
    Rice's formula for a Gaussian process: maxima above T come at the rate sqrt(second spectral moment) /
    (2 pi) exp(-T²/2); the filter's second moment is 5 / (2 scale²) (Rice, Bell Syst. Tech. J. 24 (1945) 46).
    """
    rate = float(np.sqrt(2.5) / (2.0 * np.pi)) * max(length_in_scales, 1.0)
    return float(np.sqrt(2.0 * np.log(max(rate / false_lines, 1.0 + 1e-9))))


def maxima(answer: Answer, threshold: float) -> list[Candidate]:
    """Return the local maxima of one filter above `threshold`, strongest first."""
    value = answer.value
    inner = (value[1:-1] >= value[:-2]) & (value[1:-1] > value[2:]) & (value[1:-1] > threshold)
    found = []
    for index in np.flatnonzero(inner) + 1:
        left, top, right = value[index - 1 : index + 2]
        bend = left - 2.0 * top + right
        offset = 0.5 * (left - right) / bend if bend < 0 else 0.0
        spacing = 0.5 * (answer.x[index + 1] - answer.x[index - 1])
        found.append(
            Candidate(
                float(answer.x[index] + offset * spacing), answer.scale_deg * WIDTH_OF_SCALE, float(top)
            )
        )
    return sorted(found, key=lambda candidate: -candidate.strength)


def strongest_over_scales(answers: list[Answer], threshold: float) -> list[Candidate]:
    """Return places where some filter answers above `threshold`, each at its best scale, strongest first.

    A weaker answer within the width of a stronger one is the same line seen at another scale; but where a
    finer filter sees two lines inside a wide one, the two are meant.
    """
    seen = [maxima(answer, threshold) for answer in answers]
    every = sorted((one for found in seen for one in found), key=lambda one: -one.strength)
    kept: list[Candidate] = []
    for candidate in every:
        if all(
            abs(candidate.x - other.x) > 0.8 * max(other.fwhm, min(candidate.fwhm, 3.0 * other.fwhm))
            for other in kept
        ):
            kept += _parts_of(candidate, answers, seen) or [candidate]
    return kept


def _parts_of(candidate: Candidate, answers: list[Answer], seen: list[list[Candidate]]) -> list[Candidate]:
    """Return the lines that a finer filter sees inside a candidate, or none if it is one line there too."""
    best: list[Candidate] = []
    for answer, found in zip(answers, seen, strict=True):
        inside = [
            one
            for one in found
            if one.fwhm < 0.75 * candidate.fwhm and abs(one.x - candidate.x) <= 0.8 * candidate.fwhm
        ]
        parts = _parted(inside, answer)
        if len(parts) >= 2 and (len(best) < 2 or parts[1].strength > best[1].strength):
            best = parts
    return best


def _parted(found: list[Candidate], answer: Answer) -> list[Candidate]:
    """Return the candidates that a real dip parts: noise ripples the top of a broad line. Strongest first."""
    kept: list[Candidate] = []
    for one in found:
        for other in kept:
            low, high = np.searchsorted(answer.x, sorted((one.x, other.x)))
            valley = float(answer.value[low : high + 1].min())
            if one.strength - valley < DIP:
                break
        else:
            kept.append(one)
    return kept
