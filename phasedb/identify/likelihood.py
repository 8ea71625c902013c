"""Evidence of many sets of phases at once: a likelihood for line lists, integrated by Laplace's
method.

For each set the three shift terms, every member's ln a, its share and the list's noise scale are fitted
together (responsibility-weighted Gauss-Newton, which is the EM algorithm for this mixture), then integrated
out: Gaussian widths from the information matrix for the continuous ones, a sum over values for share and
background. All arrays carry the set first: (n_sets, n_members, n_observed, 4), 4 being the predicted
lines next to each observed one.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.identify.axis import KIND_LINE, Axis
from phasedb.identify.lines import LineTable

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

# Constants of the model. Those marked (tuned) were set on the tuning seeds of tests/study.
BACKGROUND: Final = np.array([0.2, 0.7, 2.0, 5.0, 12.0, 30.0, 80.0, 250.0, 1000.0])
BACKGROUND_LN_PRIOR: Final = np.log(np.array([0.25, 0.25, 0.2, 0.13, 0.08, 0.05, 0.02, 0.01, 0.01]))
DETECTION_SLOPE: Final = 2.0  # of the logistic in ln(height / floor) (tuned)
FLOOR_AT_MOST: Final = 0.10  # of the strongest line, when the list is short
TAIL_SHARE: Final = 0.08  # of lines whose position is off by more than the noise says (tuned)
TAIL_WIDTH: Final = 3.5
HEIGHT_SPREAD: Final = (0.38, 1.1)  # ln: powder, textured (tuned)
HEIGHT_MIX: Final = (0.72, 0.23, 0.05)  # powder, textured, anything: texture cannot veto a phase (tuned)
SHIFT_TAIL: Final = 3.0  # degrees of freedom of the Student-t priors
DRIFT_TAIL: Final = 3.0
DRIFT_EDGE: Final = 0.08  # of the largest drift: how sharply an entry ends there
SHARE_STEPS: Final = np.array([-1.0, -0.5, 0.0, 0.5, 1.0])
SHARE_RANGE: Final = 5.3  # ln 200: shares from 0.5 % to all
DETECTION_STEPS: Final = np.log(np.array([1.5, 3.5, 8.0, 20.0, 50.0, 150.0, 600.0, 4000.0]))
N_ITERATIONS: Final = 7
N_ROUGH: Final = 3  # iterations before hopeless sets are dropped
SET_SHARES_AT: Final = (0, 1, 3, 5)
FIND_NEIGHBOURS_AT: Final = (0, 2, 3, 5)  # iterations that look up anew which lines lie beside each other
LN_2PI: Final = float(np.log(2.0 * np.pi))
FAR: Final = 1e6
LEAST_NOISE: Final = 0.08  # of the usual noise: lists are rounded, and exact ones must not prove too much
TILT_SPREAD: Final = 0.5  # of the trend of ln height over the list's range of 1/d²
FEWEST_OWN_LINES: Final = 3.0  # that a phase should claim alone (tuned)
COST_OF_LACKING: Final = 2.5  # nats for each line short of it, for a cell that may lie anywhere (tuned)
COST_OF_LACKING_LISTED: Final = 1.0
BARE_GHOST_HEIGHT: Final = 0.8
GHOST_PRIOR_LINES: Final = 1.5  # weight of the usual frequency of ghosts, in lines
GHOST_LIST_PRIOR: Final = -1.0  # ln chance that a list shows a kind of ghost throughout
N_SHIFT: Final = 3  # shift terms: zero, displacement, doublet


@dataclass(frozen=True, slots=True)
class Pool:
    """Candidates that sets are made of.

    Attributes
    ----------
    lines : LineTable
    ln_a : (n_candidates,) ln of the stored a at the measuring temperature (unlisted: of the starting a)
    drift_scale : (n_candidates,) Student-t scale of the drift in ln a; 0 for unlisted
    largest_drift : (n_candidates,) how far in ln a a sample may be from the entry
    ln_a_low, ln_a_high : (n_candidates,) stated range, equal to ln_a where there is none
    ln_odds : (n_candidates,) prior odds of being present; for unlisted, per unit of ln a
    unlisted : (n_candidates,) bool
    height_scale : (n_candidates,)
        How much wider heights scatter than those of a known structure: 1, more for an assumed line pattern.
    """

    lines: LineTable
    ln_a: FloatArray
    drift_scale: FloatArray
    largest_drift: FloatArray
    ln_a_low: FloatArray
    ln_a_high: FloatArray
    ln_odds: FloatArray
    unlisted: BoolArray
    height_scale: FloatArray

    def __len__(self) -> int:
        return len(self.ln_a)


@dataclass(frozen=True, slots=True)
class Evaluated:
    """Fitted sets. `phi` (n_sets, 3) shifts, `ln_a` (n_sets, m), `covariance` (n_sets, 3+m, 3+m)."""

    log_evidence: FloatArray
    log_likelihood: FloatArray
    phi: FloatArray
    ln_a: FloatArray
    ln_sigma: FloatArray
    ln_share: FloatArray
    covariance: FloatArray
    background: FloatArray  # (n_sets, n_observed): responsibility of the background
    claims: FloatArray  # (n_sets, m, n_observed, 4)
    claim_line: IntArray  # (n_sets, m, n_observed, 4) index into the candidate's lines
    claim_delta: FloatArray  # observed minus predicted, units of x
    expected: FloatArray  # (n_sets, m): sum of p over plain lines in range
    base: FloatArray  # (n_sets, n_observed): total density of each line, for growing the set
    background_rate: FloatArray  # (n_sets,)


def log_student(value: FloatArray, scale: FloatArray, tail: float) -> FloatArray:
    """Return the log density of Student's t with `tail` 3 degrees of freedom and the given scale."""
    constant = np.log(2.0 / (np.sqrt(3.0) * np.pi))  # Gamma(2)/(Gamma(3/2) sqrt(3 pi))
    return np.asarray(constant - np.log(scale) - 0.5 * (tail + 1.0) * np.log1p((value / scale) ** 2 / tail))


def log_height_density(residual: FloatArray) -> FloatArray:
    """Return the log density of ln(observed / expected height)."""
    narrow, wide = HEIGHT_SPREAD
    norm = 1.0 / np.sqrt(2.0 * np.pi)
    density = (
        HEIGHT_MIX[0] * norm / narrow * np.exp(-0.5 * (residual / narrow) ** 2)
        + HEIGHT_MIX[1] * norm / wide * np.exp(-0.5 * (residual / wide) ** 2)
        + HEIGHT_MIX[2] / 7.0
    )
    return np.asarray(np.log(density))


def ln_floor(axis: Axis) -> float:
    """Return ln of the list's detection floor relative to its strongest line; 0 without intensities."""
    if axis.ln_intensity is None:
        return 0.0
    return float(min(axis.ln_intensity.min() - 0.1, np.log(FLOOR_AT_MOST)))


def empty_log_likelihood(axis: Axis) -> float:
    """Return the log likelihood of *nothing cubic*, every line background, B marginalised."""
    n = len(axis.x)
    values = BACKGROUND_LN_PRIOR + n * np.log(BACKGROUND / axis.span) - BACKGROUND
    return float(np.logaddexp.reduce(values))


class _Fit:
    """One batch of sets of equal size while it is being fitted."""

    def __init__(
        self,
        axis: Axis,
        pool: Pool,
        members: IntArray,
        phi: FloatArray,
        ln_a: FloatArray,
        ln_sigma: FloatArray,
    ) -> None:
        self.axis = axis
        self.n_sets, self.m = members.shape
        self.n = len(axis.x)
        self.members = members
        lines = pool.lines
        self.half = lines.half_ln_n[members]
        self.height = lines.ln_height[members]
        self.frequency = lines.frequency[members]
        self.kind = lines.kind[members]
        self.stored = pool.ln_a[members]
        self.scale = pool.drift_scale[members]
        self.largest = pool.largest_drift[members]
        self.low = pool.ln_a_low[members]
        self.high = pool.ln_a_high[members]
        self.unlisted = pool.unlisted[members]
        self.height_scale = pool.height_scale[members] * axis.height_factor
        self.ln_odds = pool.ln_odds[members].sum(axis=1)
        self.phi = phi.copy()
        self.u = ln_a.copy()
        self.ln_sigma = ln_sigma.copy()
        self.floor = ln_floor(axis)
        start = -0.7 if axis.ln_intensity is not None else np.log(20.0)
        self.ln_share = np.full((self.n_sets, self.m), start)
        self.rate = np.full(self.n_sets, max(1.0, self.n / 4.0))
        self.use_heights = False
        self.tilt = np.zeros(self.n_sets)
        # of each kind of ghost (column = kind): the chance that its lines show, and ln height against the
        # usual
        self.activity = np.ones((self.n_sets, 4))
        self.ghost_height = np.zeros((self.n_sets, 4))
        for ghost in axis.ghosts:
            self.activity[:, ghost.kind] = ghost.frequency
            if (
                axis.ln_intensity is None
            ):  # without heights, a list that shows ghosts shows the strong lines' ones
                self.ghost_height[:, ghost.kind] = -BARE_GHOST_HEIGHT * np.log(ghost.height)
        self.x_line = np.empty((0, 0, 0))

    def subset(self, pool: Pool, rows: IntArray) -> _Fit:
        """Return some of the sets, as far as they are fitted."""
        part = _Fit(self.axis, pool, self.members[rows], self.phi[rows], self.u[rows], self.ln_sigma[rows])
        part.ln_share = self.ln_share[rows]
        part.rate = self.rate[rows]
        part.use_heights = self.use_heights
        part.tilt = self.tilt[rows]
        part.activity = self.activity[rows]
        part.ghost_height = self.ghost_height[rows]
        return part

    def iterate(self, first: int, last: int) -> None:
        """Run iterations `first` to `last` - 1 of the fit."""
        for iteration in range(first, last):
            if iteration in FIND_NEIGHBOURS_AT:
                self.predict()
            else:
                self.place_neighbours()
            self.respond()
            if iteration in SET_SHARES_AT:
                self.update_shares()
                if self.axis.ghosts:
                    self.update_ghosts()
                self.respond()
            self.step()

    def rough_evidence(self) -> FloatArray:
        """Return log evidence up to terms that hardly differ between sets of one size."""
        inside = self.in_range()
        active, level = self.shown(self.kind)
        p = active * self.chance_seen(self.ln_share[..., None], self.height + level, self.frequency * inside)
        drift = log_student(self.drift(), np.maximum(self.scale, 1e-12), DRIFT_TAIL) + np.log(
            np.maximum(self.scale, 1e-12)
        )
        prior = np.where(self.unlisted, 0.0, drift - self.beyond_drift()).sum(axis=1)
        prior += log_student(self.phi - self.axis.shift_mean, self.axis.shift_scale, SHIFT_TAIL).sum(axis=1)
        return np.asarray(
            np.log(self.total).sum(axis=1) - self.rate + np.log1p(-p).sum(axis=(1, 2)) + prior + self.ln_odds
        )

    # -- predicted lines -------------------------------------------------------------------------

    def predict(self) -> None:
        """Place every line, and find the four next to each observed one."""
        axis = self.axis
        true = np.nan_to_num(axis.positions(self.half, self.u[..., None]), nan=FAR)
        clipped = np.minimum(true, 179.9) if axis.is_angle else true
        parts = zip(self.phi.T, axis.bases(clipped), strict=True)
        shift = sum(value[:, None, None] * basis for value, basis in parts)
        self.x_line = np.where(true < FAR, true + shift, FAR)
        below = (self.x_line[:, :, None, :] < axis.x[None, None, :, None]).sum(axis=3)
        offsets = np.arange(-2, 2)
        index = below[..., None] + offsets
        count = self.x_line.shape[2]
        self.neighbour_ok = (index >= 0) & (index < count)
        self.index = np.clip(index, 0, count - 1)
        flat = self.index.reshape(self.n_sets, self.m, -1)

        def gather(column: NDArray[np.generic]) -> FloatArray:
            taken = np.take_along_axis(column, flat, axis=2)
            return taken.reshape(self.index.shape).astype(np.float64)

        self.near_half = gather(self.half)
        self.near_height = gather(self.height)
        self.near_frequency = gather(self.frequency)
        self.near_kind = gather(self.kind).astype(np.int64)
        self.near_plain = self.near_kind == KIND_LINE
        self.place_neighbours()
        self.neighbour_ok &= self.near_x < FAR

    def place_neighbours(self) -> None:
        """Place the neighbouring lines only: enough between two looks at all lines."""
        axis = self.axis
        true = np.nan_to_num(axis.positions(self.near_half, self.u[:, :, None, None]), nan=FAR)
        self.near_true = np.minimum(true, 179.9) if axis.is_angle else true
        self.near_bases = axis.bases(self.near_true)
        parts = zip(self.phi.T, self.near_bases, strict=True)
        shift = sum(value[:, None, None, None] * basis for value, basis in parts)
        self.near_x = np.where(true < FAR, true + shift, FAR)

    def chance_seen(self, ln_share: FloatArray, height: FloatArray, frequency: FloatArray) -> FloatArray:
        """Return p, the chance that a line is seen; `ln_share` broadcasts against `height`."""
        slope = DETECTION_SLOPE / self.height_scale.reshape(
            self.height_scale.shape + (1,) * (height.ndim - 2)
        )
        ratio = np.clip(ln_share + height - self.floor, -40.0, 40.0)
        return np.asarray(self.axis.most_certain * frequency / (1.0 + np.exp(-slope * ratio)))

    def shown(self, kind: NDArray[np.integer]) -> tuple[FloatArray, FloatArray]:
        """Return, for lines of some kinds (set first), the chance that the list shows them and their ln
        height.
        """
        row = np.arange(self.n_sets).reshape((-1,) + (1,) * (kind.ndim - 1))
        return self.activity[row, kind], self.ghost_height[row, kind]

    def update_ghosts(self) -> None:
        """Learn from the lines claimed as ghosts how often, and how high, this list shows each kind."""
        inside = self.in_range()
        for ghost in self.axis.ghosts:
            of_kind = self.kind == ghost.kind
            if not of_kind.any():
                continue
            level = self.ghost_height[:, ghost.kind]
            p = self.chance_seen(
                self.ln_share[..., None], self.height + level[:, None, None], self.frequency * inside
            )
            visible = (p * of_kind).sum(axis=(1, 2)) / self.axis.most_certain
            claims = np.where(self.near_kind == ghost.kind, self.claims, 0.0)
            seen = claims.sum(axis=(1, 2, 3))
            prior = GHOST_PRIOR_LINES
            share = (seen + prior * ghost.frequency) / (visible + prior)
            self.activity[:, ghost.kind] = np.clip(share, 0.01, 0.95)
            if self.axis.ln_intensity is not None:
                gap = self.observed_heights() - self.ln_share[:, :, None, None]
                gap = np.where(np.isfinite(self.near_height), gap - self.near_height, 0.0)
                weight = 1.0 / HEIGHT_SPREAD[0] ** 2
                total = (claims * gap).sum(axis=(1, 2, 3)) * weight
                moved = total / (seen * weight + 1.0 / ghost.height_spread**2)
                self.ghost_height[:, ghost.kind] = np.clip(moved, -2.5, 2.5)

    def ghost_prior(self) -> FloatArray:
        """Return the log prior density of the ghosts' activity (beta) and height (n_sets,), relative to
        none.
        """
        value = np.zeros(self.n_sets)
        for ghost in self.axis.ghosts:
            base = np.clip(ghost.frequency, 0.01, 0.95)
            active = self.activity[:, ghost.kind]
            a, b = GHOST_PRIOR_LINES * base, GHOST_PRIOR_LINES * (1.0 - base)
            value += np.minimum(a * np.log(active / base) + b * np.log((1 - active) / (1 - base)), 0.0)
            value += np.where(active > 0.4, GHOST_LIST_PRIOR, 0.0)
            if self.axis.ln_intensity is not None:
                value -= 0.5 * (self.ghost_height[:, ghost.kind] / ghost.height_spread) ** 2
        return value

    def in_range(self) -> BoolArray:
        """Return which predicted lines the measurement could have shown."""
        inside = (self.x_line >= self.axis.low) & (self.x_line <= self.axis.high)
        for low, high in self.axis.blocked:
            inside &= (self.x_line < low) | (self.x_line > high)
        return inside

    # -- responsibilities ------------------------------------------------------------------------

    def respond(self) -> None:
        """Compute the densities that every predicted line gives to the observed lines beside it."""
        axis = self.axis
        own = np.exp(2.0 * self.ln_sigma)[:, None] * axis.noise_profile**2
        sigma2 = own + axis.extra_noise[None, :] ** 2
        sigma = np.sqrt(sigma2)[:, None, :, None]
        delta = axis.x[None, None, :, None] - self.near_x
        density, inner = self._position_density(delta, sigma)
        self.delta = delta
        reach = np.where(
            (self.near_x < axis.low - 3.0 * sigma) | (self.near_x > axis.high + 3.0 * sigma), 0.0, 1.0
        )
        active, level = self.shown(self.near_kind)
        near_height = self.near_height + level
        p = active * self.chance_seen(self.ln_share[:, :, None, None], near_height, self.near_frequency)
        odds = np.where(self.neighbour_ok, p / (1.0 - p), 0.0) * reach
        density = density * self._height_ratio(near_height, self.near_plain)
        claim = odds * density
        others = self.rate[:, None, None] / axis.span + claim.sum(axis=(1, 3))[:, None, :]
        claim = self._one_to_one(claim, others)
        cross = self._shared_lines(claim, odds, sigma, near_height)
        base = self.rate[:, None] / axis.span
        explained = claim.sum(axis=(1, 3)) + cross
        self.total = base + explained
        summed = claim.sum(axis=(1, 3))
        # a shared line is claimed by each of its phases in full
        boost = np.where(summed > 0, explained / np.where(summed > 0, summed, 1.0), 1.0)
        self.claims = claim * (boost / self.total)[:, None, :, None]
        self.explained = explained
        self.background = base / self.total
        self.inner = inner
        self.sigma2 = sigma2

    def _position_density(self, delta: FloatArray, sigma: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the density of a deviation, and the weight that it keeps in least squares."""
        squared = (delta / sigma) ** 2
        core = (1.0 - TAIL_SHARE) * np.exp(-0.5 * squared)
        tail = TAIL_SHARE / TAIL_WIDTH * np.exp(-0.5 * squared / TAIL_WIDTH**2)
        total = core + tail
        inner = (core + tail / TAIL_WIDTH**2) / np.maximum(total, 1e-300)
        return total / (sigma * np.sqrt(2.0 * np.pi)), inner

    def _height_ratio(self, height: FloatArray, plain: BoolArray) -> FloatArray:
        """Return the density of the observed height under the claim over that under the background."""
        if self.axis.ln_intensity is None or not self.use_heights:
            return np.ones_like(height)
        residual = self.observed_heights() - self.ln_share[:, :, None, None] - height
        # a ghost is as high as its parent's line, texture and all, times one ratio
        scale = np.where(plain, self.height_scale[:, :, None, None], 1.0)
        return np.asarray(np.exp(log_height_density(residual / scale)) / scale * max(0.3 - self.floor, 1.0))

    def _one_to_one(self, claim: FloatArray, others: FloatArray) -> FloatArray:
        """Let each predicted line explain one observed line only: the one that needs it most."""
        score = claim / np.maximum(others[..., None] - claim, 1e-300)
        count = self.x_line.shape[2]
        row = np.arange(self.n_sets * self.m).reshape(self.n_sets, self.m, 1, 1) * count
        key = (row + self.index).ravel()
        best = np.zeros(self.n_sets * self.m * count)
        np.maximum.at(best, key, score.ravel())
        keep = score >= best[key].reshape(score.shape)
        # of exactly equal scores the first observed line has the claim
        return np.where(keep, claim, 0.0)

    def _shared_lines(
        self, claim: FloatArray, odds: FloatArray, sigma: FloatArray, heights: FloatArray
    ) -> FloatArray:
        """Return the further density where predicted lines of two members coincide.

        One line with p = 1 - (1 - p1)(1 - p2) has r = r1 + r2 + r1 r2: this is the last term, for a line at
        the centre of the two, weighted by their heights, and as high as both together.
        """
        extra = np.zeros((self.n_sets, self.n))
        if self.m < 2:
            return extra
        best = claim.argmax(axis=3)[..., None]

        def of_best(column: FloatArray) -> FloatArray:
            return np.take_along_axis(column, best, axis=3)[..., 0]

        strongest, r, delta = of_best(claim), of_best(odds), of_best(self.delta)
        height = of_best(heights) + self.ln_share[:, :, None]
        scatter = of_best(np.where(self.near_plain, self.height_scale[:, :, None, None], 1.0))
        width = sigma[:, 0, :, 0]
        for first in range(self.m):
            for second in range(first + 1, self.m):
                close = np.abs(delta[:, first] - delta[:, second]) < self.axis.resolution
                close &= (strongest[:, first] > 0) & (strongest[:, second] > 0)
                if not close.any():
                    continue
                both = np.logaddexp(height[:, first], height[:, second])
                share = np.exp(np.clip(height[:, first] - both, -60.0, 0.0))
                middle = share * delta[:, first] + (1.0 - share) * delta[:, second]
                density, _ = self._position_density(middle, width)
                if self.use_heights and self.axis.ln_intensity is not None:
                    scale = np.minimum(scatter[:, first], scatter[:, second])
                    residual = (self.observed_heights()[:, 0, :, 0] - both) / scale
                    density = (
                        density * np.exp(log_height_density(residual)) / scale * max(0.3 - self.floor, 1.0)
                    )
                extra += np.where(close, r[:, first] * r[:, second] * density, 0.0)
        return extra

    # -- updates ---------------------------------------------------------------------------------

    def normal_equations(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return information matrix and right-hand side of a Gauss-Newton step, and the lines' part of the
        matrix.
        """
        axis = self.axis
        weight = self.claims * self.inner / self.sigma2[:, None, :, None]
        weight = weight * np.where(self.near_plain, 1.0, 0.1)
        slope = axis.slope(self.near_true)
        size = N_SHIFT + self.m
        matrix = np.zeros((self.n_sets, size, size))
        right = np.zeros((self.n_sets, size))
        pull = weight * self.delta

        def total(value: FloatArray) -> FloatArray:
            summed: FloatArray = value.sum(axis=(2, 3))
            return summed

        for i, first in enumerate(self.near_bases):
            weighted = weight * first
            right[:, i] = total(pull * first).sum(axis=1)
            for j in range(i, N_SHIFT):
                matrix[:, i, j] = matrix[:, j, i] = total(weighted * self.near_bases[j]).sum(axis=1)
            matrix[:, i, N_SHIFT:] = total(weighted * slope)
            matrix[:, N_SHIFT:, i] = matrix[:, i, N_SHIFT:]
        right[:, N_SHIFT:] = total(pull * slope)
        own = total(weight * slope**2)
        for member in range(self.m):
            matrix[:, N_SHIFT + member, N_SHIFT + member] = own[:, member]
        of_lines = matrix.copy()
        offset = self.phi - axis.shift_mean
        precision = (SHIFT_TAIL + 1.0) / (SHIFT_TAIL * axis.shift_scale**2 + offset**2)
        drift = self.drift()
        drift_precision = np.where(
            self.unlisted,
            1.0,
            (DRIFT_TAIL + 1.0) / (DRIFT_TAIL * np.maximum(self.scale, 1e-12) ** 2 + drift**2),
        )
        # inside a stated range the prior is flat; it still needs a width for the integral
        flat = ~self.unlisted & (drift == 0) & (self.high > self.low)
        width = np.maximum(self.high - self.low, 1e-9)
        drift_precision = np.where(flat, np.minimum(drift_precision, 4.0 / width**2), drift_precision)
        for at in range(N_SHIFT):
            matrix[:, at, at] += precision[:, at]
            right[:, at] -= precision[:, at] * offset[:, at]
        for member in range(self.m):
            at = N_SHIFT + member
            matrix[:, at, at] += drift_precision[:, member]
            pull = np.where(self.unlisted[:, member], 0.0, drift[:, member])
            right[:, at] -= drift_precision[:, member] * pull
        return matrix, right, of_lines

    def drift(self) -> FloatArray:
        """Return ln a minus the nearest end of the stated range (or the stored value); 0 inside the range."""
        return np.asarray(self.u - np.clip(self.u, self.low, self.high))

    def beyond_drift(self) -> FloatArray:
        """Return what a drift beyond the largest one costs, in nats (n_sets, m)."""
        beyond = np.maximum(np.abs(self.drift()) - self.largest, 0.0)
        return np.asarray(0.5 * (beyond / (DRIFT_EDGE * self.largest)) ** 2)

    def step(self) -> None:
        """Move shifts, lattice constants and the noise scale one step."""
        matrix, right, of_lines = self.normal_equations()
        change = np.linalg.solve(matrix, right[..., None])[..., 0]
        limit, limit_displacement = (0.12, 0.2) if self.axis.is_angle else (0.01, 0.003)
        self.phi[:, 0] += np.clip(change[:, 0], -limit, limit)
        self.phi[:, 1] += np.clip(change[:, 1], -limit_displacement, limit_displacement)
        self.phi[:, 2] += np.clip(change[:, 2], -0.5, 0.5)
        self.u += np.clip(change[:, N_SHIFT:], -3e-3, 3e-3)
        gradient, curvature = self.noise_terms(matrix, of_lines)
        self.ln_sigma -= np.clip(gradient / curvature, -0.7, 0.7)
        self.ln_sigma = np.maximum(self.ln_sigma, np.log(LEAST_NOISE * self.axis.noise_center))
        self.rate = np.clip(self.background.sum(axis=1) + 0.3, BACKGROUND[0], None)

    def noise_terms(self, matrix: FloatArray, of_lines: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return gradient and curvature, in ln sigma, of minus the expected log posterior.

        Fitted parameters take up degrees of freedom: their effective number is the trace of A^-1 A_lines.
        """
        axis = self.axis
        share = np.exp(2.0 * self.ln_sigma)[:, None] * axis.noise_profile**2 / self.sigma2
        weight = self.claims.sum(axis=(1, 3))
        misfit = (self.claims * self.inner * self.delta**2).sum(axis=(1, 3)) / self.sigma2
        fitted = np.trace(np.linalg.solve(matrix, of_lines), axis1=1, axis2=2)
        mean_share = (share * weight).sum(axis=1) / np.maximum(weight.sum(axis=1), 1e-9)
        gradient = (share * (weight - misfit)).sum(axis=1) - fitted * mean_share
        gradient += (self.ln_sigma - np.log(axis.noise_center)) / axis.noise_spread**2
        curvature = (2.0 * share**2 * np.maximum(misfit, 0.3 * weight)).sum(axis=1)
        return gradient, curvature + 1.0 / axis.noise_spread**2

    def centre_shares(self) -> FloatArray:
        """Return each member's share from the heights of the lines that it claims (n_sets, m)."""
        plain = np.where(self.near_plain, self.claims, 0.0)
        weight = plain.sum(axis=(2, 3))
        gap = self.observed_heights() - self.near_height
        gap = np.where(np.isfinite(gap), gap, 0.0)
        centre = (plain * gap).sum(axis=(2, 3)) / np.maximum(weight, 1e-9)
        centre = np.where(weight > 0.2, centre, self.floor)
        return np.clip(centre, self.floor - 0.5, 0.3)

    def observed_heights(self) -> FloatArray:
        """Return ln of the observed heights (n_sets, 1, n, 1), the list's tilt with 1/d² taken off."""
        observed = self.axis.ln_intensity
        assert observed is not None
        return np.asarray(
            observed[None, None, :, None]
            - self.tilt[:, None, None, None] * self.axis.tilt[None, None, :, None]
        )

    def update_tilt(self) -> None:
        """Learn the list's trend of heights with 1/d²: thermal motion, absorption and optics not known
        here.
        """
        plain = np.where(self.near_plain & np.isfinite(self.near_height), self.claims, 0.0)
        residual = self.observed_heights() - self.ln_share[:, :, None, None]
        residual = np.where(plain > 0, residual - self.near_height, 0.0) / self.height_scale[:, :, None, None]
        weight = plain / (1.0 + (residual / (2.0 * HEIGHT_SPREAD[0])) ** 2)
        basis = self.axis.tilt[None, None, :, None]
        change = (weight * residual * basis).sum(axis=(1, 2, 3))
        strength = (weight * basis**2).sum(axis=(1, 2, 3)) + (HEIGHT_SPREAD[0] / TILT_SPREAD) ** 2
        pulled = change - (HEIGHT_SPREAD[0] / TILT_SPREAD) ** 2 * self.tilt
        self.tilt = np.clip(self.tilt + pulled / strength, -3.0 * TILT_SPREAD, 3.0 * TILT_SPREAD)

    def update_shares(self) -> None:
        """Set shares between iterations: from heights directly, else from what is seen and what is not."""
        if self.axis.ln_intensity is None:
            self.set_shares()
        else:
            self.ln_share = self.centre_shares()
            self.use_heights = True
            self.update_tilt()

    def set_shares(self) -> FloatArray:
        """Choose each member's share; return the log of its integral relative to the chosen value (n_sets,
        m).
        """
        axis = self.axis
        plain = np.where(self.near_plain, self.claims, 0.0)
        inside = self.in_range()
        if axis.ln_intensity is None:
            steps = np.broadcast_to(DETECTION_STEPS, (self.n_sets, self.m, len(DETECTION_STEPS)))
            cell = np.log(1.0 / len(DETECTION_STEPS))
        else:
            centre = self.centre_shares()
            steps = centre[..., None] + SHARE_STEPS
            cell = np.log(float(SHARE_STEPS[1] - SHARE_STEPS[0]) / SHARE_RANGE)
        active, level = self.shown(self.kind)
        p = active[:, :, None] * self.chance_seen(
            steps[..., None], (self.height + level)[:, :, None, :], (self.frequency * inside)[:, :, None, :]
        )
        value = np.log1p(-p).sum(axis=3)
        near_p = self.chance_seen(
            steps[:, :, :, None, None], self.near_height[:, :, None], self.near_frequency[:, :, None]
        )
        gain = np.log(np.maximum(near_p / (1.0 - near_p), 1e-30))
        if axis.ln_intensity is not None:
            residual = self.observed_heights()[:, :, None] - steps[:, :, :, None, None]
            residual = residual - self.near_height[:, :, None]
            residual = np.where(np.isfinite(residual), residual, 0.0)
            gain = gain + log_height_density(residual / self.height_scale[:, :, None, None, None])
        value = value + (plain[:, :, None] * gain).sum(axis=(3, 4))
        best = value.argmax(axis=2)
        self.ln_share = np.take_along_axis(steps, best[..., None], axis=2)[..., 0]
        self.use_heights = axis.ln_intensity is not None
        top = value.max(axis=2)
        return np.asarray(np.log(np.exp(value - top[..., None]).sum(axis=2)) + cell)

    # -- evidence --------------------------------------------------------------------------------

    def finish(self) -> Evaluated:
        """Integrate and return."""
        axis = self.axis
        self.predict()
        self.respond()
        share_term = self.set_shares()
        self.respond()
        inside = self.in_range()
        active, level = self.shown(self.kind)
        p = active * self.chance_seen(self.ln_share[..., None], self.height + level, self.frequency * inside)
        unseen = np.log1p(-p).sum(axis=(1, 2))
        rates = BACKGROUND[None, :, None] / axis.span
        levels = np.log(rates + self.explained[:, None, :]).sum(axis=2) - BACKGROUND + BACKGROUND_LN_PRIOR
        log_likelihood = np.logaddexp.reduce(levels, axis=1) + unseen
        matrix, _, of_lines = self.normal_equations()
        _, log_det = np.linalg.slogdet(matrix)
        _, noise_curvature = self.noise_terms(matrix, of_lines)
        prior = log_student(self.phi - axis.shift_mean, axis.shift_scale, SHIFT_TAIL).sum(axis=1)
        drift = self.drift()
        listed = log_student(drift, np.maximum(self.scale, 1e-12), DRIFT_TAIL)
        listed -= self.beyond_drift()
        # a stated range spreads the prior over itself: density 1/(range + the width of its tails)
        width = self.high - self.low
        tails = np.sqrt(3.0) * np.pi / 2.0 * np.maximum(self.scale, 1e-12)
        listed -= np.log1p(width / tails)
        prior += np.where(self.unlisted, 0.0, listed).sum(axis=1)
        noise = (self.ln_sigma - np.log(axis.noise_center)) / axis.noise_spread
        prior += -0.5 * noise**2 - np.log(axis.noise_spread) - 0.5 * LN_2PI
        laplace = 0.5 * (N_SHIFT + 1 + self.m) * LN_2PI - 0.5 * log_det - 0.5 * np.log(noise_curvature)
        evidence = log_likelihood + prior + laplace + share_term.sum(axis=1) + self.ln_odds
        evidence += self.ghost_prior() - 0.5 * (self.tilt / TILT_SPREAD) ** 2
        # a phase that claims hardly a line of its own only mends the heights of others
        each = np.where(self.near_plain, self.claims, 0.0).sum(axis=3)
        others = np.clip(self.claims.sum(axis=(1, 3))[:, None, :] - self.claims.sum(axis=3), 0.0, 1.0)
        own = (each * (1.0 - others)).sum(axis=2)
        lacking = np.maximum(FEWEST_OWN_LINES - own, 0.0)
        evidence -= (np.where(self.unlisted, COST_OF_LACKING, COST_OF_LACKING_LISTED) * lacking).sum(axis=1)
        plain = p * (self.kind == KIND_LINE)
        return Evaluated(
            log_evidence=evidence,
            log_likelihood=log_likelihood,
            phi=self.phi,
            ln_a=self.u,
            ln_sigma=self.ln_sigma,
            ln_share=self.ln_share,
            covariance=np.asarray(np.linalg.inv(matrix), dtype=np.float64),
            background=self.background,
            claims=self.claims,
            claim_line=self.index,
            claim_delta=self.delta,
            expected=plain.sum(axis=2),
            base=self.total,
            background_rate=self.rate,
        )


LARGEST_BATCH: Final = 3_000_000


def evaluate(
    axis: Axis,
    pool: Pool,
    members: IntArray,
    phi: FloatArray,
    ln_a: FloatArray,
    ln_sigma: FloatArray,
    *,
    margin: float,
) -> tuple[Evaluated, IntArray]:
    """Fit and integrate sets of equal size; return the fitted ones and their rows in `members`.

    Sets whose rough evidence after a few iterations lies more than `margin` (nats) below the best are
    dropped.

    Parameters
    ----------
    members : (n_sets, m) int, m >= 1
        Candidates of each set.
    phi, ln_a, ln_sigma : (n_sets, 3), (n_sets, m), (n_sets,)
        Where each fit starts.
    """
    m = members.shape[1]
    cost = m * len(axis.x) * pool.lines.n.shape[1]
    batch = max(1, LARGEST_BATCH // max(cost, 1))
    fits = []
    for start in range(0, len(members), batch):
        rows = slice(start, start + batch)
        fit = _Fit(axis, pool, members[rows], phi[rows], ln_a[rows], ln_sigma[rows])
        fit.iterate(0, N_ROUGH)
        fits.append(fit)
    rough = np.concatenate([fit.rough_evidence() for fit in fits])
    keep = rough > rough.max() - margin
    parts, first = [], 0
    for fit in fits:
        kept = np.flatnonzero(keep[first : first + fit.n_sets])
        first += fit.n_sets
        if len(kept):
            finer = fit.subset(pool, kept)
            finer.iterate(N_ROUGH, N_ITERATIONS)
            parts.append(finer.finish())
    result = parts[0] if len(parts) == 1 else _joined(parts)
    return result, np.flatnonzero(keep)


def _joined(parts: list[Evaluated]) -> Evaluated:
    names = Evaluated.__dataclass_fields__
    return Evaluated(*(np.concatenate([getattr(part, name) for part in parts]) for name in names))
