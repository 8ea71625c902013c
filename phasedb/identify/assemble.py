"""From a finished search to a `Match`: what each phase claims, how it fits, and what to be careful about."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any, Final, cast

import numpy as np
from numpy.typing import NDArray

from phasedb import __version__
from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType, families
from phasedb.identify.axis import KIND_ALPHA2, KIND_BETA, KIND_LINE, KIND_TUNGSTEN, Axis
from phasedb.identify.chance import expected_by_chance
from phasedb.identify.entries import Entries
from phasedb.identify.foreign import ForeignLines
from phasedb.identify.likelihood import N_SHIFT
from phasedb.identify.lookalikes import Reading, find_look_alikes, what_separates
from phasedb.identify.merit import merit_f, merit_m, possible_lines
from phasedb.identify.posterior import Posterior, WeightedSet
from phasedb.identify.result import (
    Claim,
    ClaimKind,
    LedgerLine,
    Match,
    MeasurementInfo,
    MeritF,
    MeritM,
    PhaseResult,
    Shift,
    Unlisted,
    UnlistedCandidate,
)
from phasedb.identify.search import SAME_PLACE, Fitted, Search
from phasedb.identify.settings import MatchSettings
from phasedb.measured.peaklist import PeakList

FloatArray = NDArray[np.float64]

REPORTED: Final = 0.01  # phases at least this probable are in the result
FEWEST_REPORTED: Final = 5
CLAIMED: Final = 0.5
RIVAL: Final = 0.05  # of an entry's probability: entries above it were not told from it by their a
LEDGER_SETS: Final = 24
ODDS_LIMIT: Final = 99.0
MOST_LOOK_ALIKES_NAMED: Final = 20
_KINDS: Final[dict[int, ClaimKind]] = {
    KIND_LINE: "line",
    KIND_ALPHA2: "k_alpha2",
    KIND_BETA: "k_beta",
    KIND_TUNGSTEN: "w_l_alpha",
}


class Assembler:
    """Turns one finished search into its `Match`."""

    def __init__(
        self,
        peaks: PeakList,
        settings: MatchSettings,
        search: Search,
        posterior: Posterior,
        foreign: ForeignLines,
        *,
        phase_count: int,
        fingerprint: str,
        cautions: list[str],
    ) -> None:
        self.peaks = peaks
        self.settings = settings
        self.search = search
        self.axis: Axis = search.axis
        self.entries: Entries = search.entries
        self.posterior = posterior
        self.foreign = foreign
        self.phase_count = phase_count
        self.fingerprint = fingerprint
        self.cautions = cautions
        self.places: list[tuple[int, float]] = []  # of the unlisted phases, once they are found
        self.fitted_sets = [item for item in posterior.sets if item.fit is not None][:LEDGER_SETS]

    # -- whole -----------------------------------------------------------------------------------

    def match(self) -> Match:
        phases = self._phases()
        unlisted = self._unlisted()
        return Match(
            program_version=__version__,
            settings=self._settings(),
            measurement=self._measurement(),
            library_phase_count=self.phase_count,
            library_fingerprint=self.fingerprint,
            phases=phases,
            unlisted=unlisted,
            nothing_cubic=self.posterior.nothing,
            shift=self._shift(),
            ledger=self._ledger(),
            cautions=tuple(self.cautions),
            axis=self.search.axis_curves(),
        )

    def _settings(self) -> dict[str, Any]:
        values = asdict(self.settings)
        foreign = values.pop("foreign_positions")
        values["foreign_line_count"] = 0 if foreign is None else len(foreign)
        values["elements"] = None if self.settings.elements is None else list(self.settings.elements)
        values["unseen"] = list(self.settings.unseen)
        values["excluding"] = list(self.settings.excluding)
        values["temperature_k"] = self.peaks.temperature_k
        values["goniometer_radius_mm"] = self.peaks.goniometer_radius_mm
        return values

    def _measurement(self) -> MeasurementInfo:
        peaks = self.peaks
        radiation = peaks.radiation
        return MeasurementInfo(
            source=peaks.source,
            sha256=peaks.sha256,
            wavelength_angstrom=None if radiation is None else radiation.wavelength_angstrom,
            radiation=None if radiation is None else radiation.name,
            line_count=len(peaks),
            range_low=peaks.range_low,
            range_high=peaks.range_high,
            range_assumed=peaks.range_assumed,
            position_unit=peaks.unit,
            sample=peaks.sample,
        )

    # -- phases ----------------------------------------------------------------------------------

    def _members_of(self, index: int) -> list[int]:
        return [m for m, entry in enumerate(self.search.candidates.entry_of) if entry == index]

    def _best_fit_with(self, member: int) -> Fitted | None:
        for item in self.posterior.sets:
            if member in item.members and item.fit is not None:
                return item.fit
        return None

    def _phases(self) -> tuple[PhaseResult, ...]:
        candidates = self.search.candidates
        chance: dict[int, float] = {}
        for item in self.posterior.sets:
            for member in item.members:
                if candidates.entry_of[member] >= 0:
                    chance[member] = chance.get(member, 0.0) + item.probability
        order = sorted(chance, key=lambda m: (-chance[m], self._name(m).casefold(), self._name(m)))
        reported = [m for m in order if chance[m] >= REPORTED]
        reported += [m for m in order[:FEWEST_REPORTED] if m not in reported and chance[m] > 1e-6]
        numbers = {candidates.entry_of[m]: m for m in chance}
        results = [result for m in reported if (result := self._phase(m, chance[m], numbers)) is not None]
        if self.settings.rank_by == "merit":
            results.sort(key=lambda r: (-(r.merit_f.value if r.merit_f else 0.0), r.name.casefold()))
        else:
            # equal to the digits that are printed: the better figure of merit first
            results.sort(
                key=lambda r: (
                    -round(r.probability, 6),
                    -(r.merit_f.value if r.merit_f else 0.0),
                    r.name.casefold(),
                )
            )
        return tuple(results)

    def _name(self, member: int) -> str:
        index = self.search.candidates.entry_of[member]
        return self.entries.table.name[int(self.entries.rows[index])]

    def _reading(self, fit: Fitted, place: int) -> Reading:
        covariance = fit.batch.covariance[fit.row]
        return Reading(
            ln_a=float(fit.ln_a[place]),
            ln_a_esd=float(np.sqrt(max(covariance[N_SHIFT + place, N_SHIFT + place], 0.0))),
            sigma=float(np.exp(fit.ln_sigma)),
            ln_share=float(fit.batch.ln_share[fit.row, place]),
        )

    def _phase(self, member: int, probability: float, numbers: dict[int, int]) -> PhaseResult | None:
        fit = self._best_fit_with(member)
        if fit is None:
            return None
        candidates, entries, table = self.search.candidates, self.entries, self.entries.table
        index = candidates.entry_of[member]
        row = int(entries.rows[index])
        place = fit.members.index(member)
        reading = self._reading(fit, place)
        alike = find_look_alikes(self.axis, entries, index, reading, self._rivals(probability, numbers))
        group = {member, *(numbers[other] for other in alike if other in numbers)}
        # entries that explain the lines about as well come first among the look-alikes
        alike.sort(
            key=lambda other: (-self._chance_of(numbers.get(other)), table.name[int(entries.rows[other])])
        )
        separated = [
            text for other in alike[:2] for text in what_separates(self.axis, entries, index, other, reading)
        ]
        ln_odds = self.posterior.ln_odds(lambda key: member in key) - np.log(entries.crowd[index])
        claims = fit.batch.claims[fit.row, place].sum(axis=1)
        n, delta, d = self._claimed_lines(fit, place)
        lattice = LATTICE_TYPES[int(entries.lattice[index])]
        a_fitted = float(np.exp(reading.ln_a))
        stored = float(np.exp(entries.ln_a[index]))
        f, m = self._merits(lattice, a_fitted, n, delta, d, self._structure_n(index))
        return PhaseResult(
            name=table.name[row],
            formula=table.formula[row],
            lattice_type=lattice,
            structure_type=table.structure_type[row] or None,
            standing=table.standing[row],
            probability=probability / float(entries.crowd[index]),
            group_probability=self.posterior.chance(lambda key: not group.isdisjoint(key)),
            look_alikes=tuple(
                table.name[int(entries.rows[other])] for other in alike[:MOST_LOOK_ALIKES_NAMED]
            ),
            look_alike_count=round(float(entries.crowd[[index, *alike]].sum())) - 1,
            separated_by=tuple(dict.fromkeys(separated)),
            expected_by_chance=expected_by_chance(
                self.axis, entries, fit, member, int(entries.lattice[index]), phase_count=self.phase_count
            ),
            share=self._share(fit, claims),
            log10_odds=float(np.clip(ln_odds / np.log(10.0), -ODDS_LIMIT, ODDS_LIMIT)),
            a_stored_angstrom=float(table.a_angstrom[row]),
            a_fitted_angstrom=a_fitted,
            a_fitted_esd_angstrom=a_fitted * reading.ln_a_esd,
            relative_shift=a_fitted / stored - 1.0,
            lines_claimed=len(n),
            lines_expected=float(fit.batch.expected[fit.row, place]),
            absences="structure" if entries.has_structure(index) else "lattice",
            merit_f=f,
            merit_m=m,
        )

    def _rivals(self, probability: float, numbers: dict[int, int]) -> set[int]:
        """Return entries (by index) that explain the list nearly as well as one of this probability."""
        least = RIVAL * probability
        return {index for index, member in numbers.items() if self._chance_of(member) >= least}

    def _chance_of(self, member: int | None) -> float:
        return 0.0 if member is None else self.posterior.chance(lambda key: member in key)

    def _structure_n(self, index: int) -> NDArray[np.integer] | None:
        if not self.entries.has_structure(index):
            return None
        n, strength = self.entries.pattern(index)
        return np.asarray(n[strength > 1e-6 * strength.max()])

    def _share(self, fit: Fitted, claims: FloatArray) -> float | None:
        if self.axis.ln_intensity is None:
            return None
        height = np.exp(self.axis.ln_intensity)
        claimed = 1.0 - fit.batch.background[fit.row]
        total = float((height * claimed).sum())
        return float((height * np.minimum(claims, 1.0)).sum()) / total if total > 0 else 0.0

    def _claimed_lines(self, fit: Fitted, place: int) -> tuple[NDArray[np.int64], FloatArray, FloatArray]:
        """Return N, observed minus predicted (x) and shift-corrected d of the lines a phase claims."""
        row = fit.row
        claims = fit.batch.claims[row, place]
        best = claims.argmax(axis=1)
        observed = np.arange(len(best))
        member = fit.members[place]
        lines = self.search.candidates.pool.lines
        which = fit.batch.claim_line[row, place][observed, best]
        plain = lines.kind[member][which] == KIND_LINE
        use = (claims.sum(axis=1) > CLAIMED) & plain
        n = lines.n[member][which][use]
        delta = fit.batch.claim_delta[row, place][observed, best][use]
        corrected = self._corrected_x(fit)[use]
        # d on the wavelength of the list: the prediction, which knows of blends, plus the deviation
        true = self.axis.positions(lines.half_ln_n[member][which][use], np.array(float(fit.ln_a[place])))
        d = np.exp(self.axis.ln_d(np.where(np.isfinite(true), true + delta, corrected)))
        order = np.argsort(n, kind="stable")
        return n[order], delta[order], d[order]

    def _corrected_x(self, fit: Fitted | None) -> FloatArray:
        x = self.axis.x - self._shift_at_lines(fit)
        return np.clip(x, 0.05, 179.9) if self.axis.is_angle else x

    def _shift_at_lines(self, fit: Fitted | None) -> FloatArray:
        phi = self.axis.shift_mean if fit is None else fit.phi
        # the doublet's offset is part of where a peak lies, not of the instrument's shift
        return self.axis.shift(self.axis.x, np.array([phi[0], phi[1], 0.0]))

    def _merits(
        self,
        lattice: LatticeType,
        a: float,
        n: NDArray[np.int64],
        delta: FloatArray,
        d: FloatArray,
        structure_n: NDArray[np.integer] | None,
    ) -> tuple[MeritF | None, MeritM | None]:
        if len(n) == 0:
            return None, None
        possible = possible_lines(lattice, int(n[-1]), structure_n)
        x = self.axis.positions(0.5 * np.log(possible), np.array(np.log(a)))
        inside = possible[np.nan_to_num(x, nan=np.inf) >= self.axis.low]
        first = int(inside[0]) if len(inside) else 1
        f = merit_f(n, delta, possible, n_first_in_range=first) if self.axis.is_angle else None
        return f, merit_m(n, d, a, possible)

    # -- unlisted --------------------------------------------------------------------------------

    def _unlisted(self) -> Unlisted:
        candidates = self.search.candidates
        probability = self.posterior.chance(lambda key: any(candidates.is_unlisted(m) for m in key))
        places: list[tuple[int, float, float, Fitted, int]] = []  # lattice, ln a, probability, fit, place
        for item in self.posterior.sets:
            if item.fit is None or item.only_looks_cubic:
                continue
            for place, member in enumerate(item.fit.members):
                if not candidates.is_unlisted(member):
                    continue
                lattice, ln_a = candidates.lattice_of[member], float(item.fit.ln_a[place])
                for number, known in enumerate(places):
                    if known[0] == lattice and abs(known[1] - ln_a) < SAME_PLACE:
                        places[number] = (*known[:2], known[2] + item.probability, *known[3:])
                        break
                else:
                    places.append((lattice, ln_a, item.probability, item.fit, place))
        places.sort(key=lambda entry: (-entry[2], entry[0], entry[1]))
        self.places = [(lattice, ln_a) for lattice, ln_a, *_ in places]
        shown = [self._place(*entry) for entry in places[:6] if entry[2] > 1e-4]
        best = shown[0] if shown else None
        return Unlisted(probability, best, tuple(shown[1:]))

    def _place(
        self, lattice: int, ln_a: float, probability: float, fit: Fitted, place: int
    ) -> UnlistedCandidate:
        a = float(np.exp(ln_a))
        name = LATTICE_TYPES[lattice]
        n, delta, d = self._claimed_lines(fit, place)
        f, m = self._merits(name, a, n, delta, d, None)
        return UnlistedCandidate(
            probability=probability,
            lattice_type=name,
            a_angstrom=a,
            a_esd_angstrom=a * self._reading(fit, place).ln_a_esd,
            nearest=self._nearest(lattice, ln_a),
            lines_claimed=len(n),
            merit_f=f,
            merit_m=m,
        )

    def _nearest(self, lattice: int, ln_a: float) -> tuple[tuple[str, float], ...]:
        entries = self.entries
        same = np.flatnonzero(entries.lattice == lattice)
        gap = np.abs(entries.ln_a[same] - ln_a)
        nearest = same[np.argsort(gap, kind="stable")[:3]]
        return tuple(
            (
                entries.table.name[int(entries.rows[index])],
                float(np.exp(ln_a - entries.ln_a[index]) - 1.0),
            )
            for index in nearest
        )

    # -- shift and ledger ------------------------------------------------------------------------

    def _shift(self) -> Shift:
        fit = self.posterior.best
        axis = self.axis
        empty = fit is None
        covariance = np.zeros((2, 2)) if fit is None else fit.batch.covariance[fit.row][:2, :2]
        esd = np.sqrt(np.maximum(np.diag(covariance), 0.0))
        sigma = None if fit is None else float(np.exp(fit.ln_sigma))
        angle = axis.is_angle
        known = angle and not empty
        basis = axis.displacement_basis(axis.x)
        variance = covariance[0, 0] + 2.0 * basis * covariance[0, 1] + basis**2 * covariance[1, 1]
        correlation = float(covariance[0, 1] / (esd[0] * esd[1])) if known and esd.all() else None
        phi = None if fit is None else fit.phi
        return Shift(
            zero_deg=float(phi[0]) if known and phi is not None else None,
            zero_esd_deg=float(esd[0]) if known else None,
            displacement_mm=float(phi[1]) if known and phi is not None else None,
            displacement_esd_mm=float(esd[1]) if known else None,
            correlation=correlation,
            noise_deg=sigma if angle else None,
            noise_relative=None if angle else sigma,
            scale_relative=float(phi[0]) if not angle and phi is not None else None,
            scale_esd_relative=float(esd[0]) if not angle and not empty else None,
            goniometer_radius_mm=axis.radius_mm if angle else None,
            radius_assumed=angle and self.peaks.goniometer_radius_mm is None,
            at_lines_deg=self._at_every_line(self._shift_at_lines(fit)) if known else None,
            at_lines_esd_deg=self._at_every_line(np.sqrt(np.maximum(variance, 0.0))) if known else None,
        )

    def _at_every_line(self, values: FloatArray) -> tuple[float, ...]:
        """Return values known at the lines that were matched at every line of the list, foreign ones too."""
        place = -np.log(self.peaks.d_angstrom)
        return tuple(map(float, np.interp(place, place[self.foreign.kept], values)))

    def _ledger(self) -> tuple[LedgerLine, ...]:
        best = self.posterior.best
        weights = np.array([item.probability for item in self.fitted_sets])
        empty = sum(i.probability for i in self.posterior.sets if not i.members and i.fit is None)
        covered = float(weights.sum()) + empty
        corrected = self._corrected_x(best)
        lines = []
        kept = self.foreign.kept
        for observed in range(len(self.axis.x)):
            claims, unexplained = self._claims_on(observed, weights, covered, empty)
            lines.append((int(kept[observed]), claims, unexplained, float(corrected[observed])))
        lines += [
            (number, (self.foreign.claim(number),), 0.0, float("nan"))
            for number in map(int, self.foreign.taken)
        ]
        lines.sort(key=lambda entry: entry[0])
        return tuple(self._ledger_line(*entry) for entry in lines)

    def _claims_on(
        self, observed: int, weights: FloatArray, covered: float, empty: float
    ) -> tuple[tuple[Claim, ...], float]:
        total: dict[tuple[str, ClaimKind, int], float] = {}
        first: dict[tuple[str, ClaimKind, int], tuple[float, tuple[tuple[int, int, int], ...]]] = {}
        unexplained = empty
        pool = self.search.candidates.pool.lines
        for item, weight in zip(self.fitted_sets, weights, strict=True):
            fit = cast("Fitted", item.fit)
            unexplained += weight * float(fit.batch.background[fit.row, observed])
            for place, member in enumerate(fit.members):
                claims = fit.batch.claims[fit.row, place, observed]
                if self._is_unexplained(item, member):
                    unexplained += weight * float(claims.sum())
                    continue
                for slot in np.flatnonzero(claims > 1e-3):
                    line = int(fit.batch.claim_line[fit.row, place, observed, slot])
                    kind = int(pool.kind[member, line])
                    n = int(pool.n[member, line])
                    key = (self._label(fit, place), _KINDS[kind], n)
                    total[key] = total.get(key, 0.0) + weight * float(claims[slot])
                    if key not in first:
                        lattice = LATTICE_TYPES[self.search.candidates.lattice_of[member]]
                        delta = float(fit.batch.claim_delta[fit.row, place, observed, slot])
                        first[key] = (delta, families(n, lattice))
        claims_made = []
        for key, value in sorted(total.items(), key=lambda entry: (-entry[1], entry[0])):
            chance = value / covered
            if chance < 0.01:
                continue
            delta, hkl = first[key]
            slope = abs(float(self.axis.slope(self.axis.x[observed : observed + 1])[0]))
            claims_made.append(
                Claim(
                    name=key[0],
                    hkl=hkl,
                    kind=key[1],
                    delta_two_theta_deg=delta if self.axis.is_angle else None,
                    delta_relative=-delta / slope if self.axis.is_angle else -delta,
                    probability=min(chance, 1.0),
                )
            )
        return tuple(claims_made), min(unexplained / covered, 1.0)

    def _is_unexplained(self, item: WeightedSet, member: int) -> bool:
        """Return whether what a member claims counts as unexplained: it is not cubic."""
        candidates = self.search.candidates
        return candidates.is_zone(member) or (item.only_looks_cubic and candidates.is_unlisted(member))

    def _label(self, fit: Fitted, place: int) -> str:
        member = fit.members[place]
        if self.search.candidates.entry_of[member] >= 0:
            return self._name(member)
        lattice = LATTICE_TYPES[self.search.candidates.lattice_of[member]]
        # the same unlisted phase has the same name in every set: that of the best set with it
        ln_a = float(fit.ln_a[place])
        for known, at in self.places:
            if LATTICE_TYPES[known] == lattice and abs(at - ln_a) < SAME_PLACE:
                ln_a = at
                break
        return f"unlisted {lattice} {np.exp(ln_a):.2f}"

    def _ledger_line(
        self, number: int, claims: tuple[Claim, ...], unexplained: float, corrected_x: float
    ) -> LedgerLine:
        peaks = self.peaks
        position = float(peaks.position[number])
        d_measured = float(peaks.d_angstrom[number])
        d = (
            d_measured
            if not np.isfinite(corrected_x)
            else float(np.exp(self.axis.ln_d(np.array([corrected_x]))[0]))
        )
        two_theta = None if peaks.two_theta_deg is None else float(peaks.two_theta_deg[number])
        return LedgerLine(
            line=number + 1,
            position=position,
            corrected_position=self._in_unit(position, d_measured, d, corrected_x),
            two_theta_deg=two_theta,
            d_angstrom=d,
            intensity=None if peaks.intensity is None else float(peaks.intensity[number]),
            claims=claims,
            unexplained=unexplained,
        )

    def _in_unit(self, position: float, d_measured: float, d: float, corrected_x: float) -> float:
        """Return the corrected position in the list's own unit."""
        unit = self.peaks.unit
        if unit == "two-theta" and self.axis.is_angle:
            return corrected_x if np.isfinite(corrected_x) else position
        if unit == "d":
            return d
        # Q and ring radius are, to the size of a shift, inversely proportional to d; so is a small 2theta
        return position * d_measured / d
