"""From the evidence of sets to probabilities of phases."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.identify.search import SAME_PLACE, Fitted, Key, Search

KEPT: Final = 14.0  # nats below the best set within which sets count
ALTERNATIVE: Final = 8.0  # nats below a set within which exchanged members count
MOST_COMBINATIONS: Final = 4000
# Share of unexplained lines at which an unlisted index is as often chance as cubic, and how fast it falls
# there (tuned on lists of cubic phases taken out of the library and of non-cubic samples).
TRUST_HALF: Final = 0.135
TRUST_SLOPE: Final = 28.0


@dataclass(frozen=True, slots=True)
class WeightedSet:
    """A set with its posterior probability; `fit` is None for a combination that was not fitted itself.

    `members` are the cubic phases that it holds (zones of other lattices are not among them). Where
    `only_looks_cubic`, the unlisted members of `fit` are
    taken for lines of something that is not cubic, and are not among `members`.
    """

    members: Key
    probability: float
    fit: Fitted | None
    only_looks_cubic: bool = False


@dataclass(frozen=True, slots=True)
class Posterior:
    """Posterior over sets, most probable first; the empty set has no members."""

    sets: tuple[WeightedSet, ...]
    log_total: float

    def chance(self, holds: Callable[[Key], bool]) -> float:
        """Return the probability of the sets for which `holds` is true."""
        return float(sum(item.probability for item in self.sets if holds(item.members)))

    def ln_odds(self, holds: Callable[[Key], bool]) -> float:
        """Return ln of the odds of the sets for which `holds` is true against the rest."""
        yes = self.chance(holds)
        no = float(sum(item.probability for item in self.sets if not holds(item.members)))
        with np.errstate(divide="ignore"):
            return float(np.log(yes) - np.log(no))

    @property
    def nothing(self) -> float:
        return self.chance(lambda key: not key)

    @property
    def best(self) -> Fitted | None:
        """The most probable set that was fitted, or None if it is the empty one."""
        for item in self.sets:
            if item.fit is not None or not item.members:
                return item.fit
        return None


def make_posterior(search: Search, temperature: float) -> Posterior:
    """Return the posterior over all evaluated sets and the combinations of their members.

    `temperature` divides log evidence against the empty set: 1 trusts the model's evidence in full.
    """
    fits = _without_doubles(search, search.sets())
    evidence: dict[Key, float] = {key: fit.log_evidence for key, fit in fits.items()}
    if not search.always:
        evidence[()] = search.empty
    _add_combinations(fits, evidence)
    top = max(evidence.values())
    kept = {key: value for key, value in evidence.items() if value > top - KEPT * max(temperature, 1.0)}
    if not search.always:
        kept[()] = search.empty
    reference = top
    scaled = {key: (value - reference) / temperature for key, value in kept.items()}
    total = float(np.logaddexp.reduce(list(scaled.values())))
    sets: list[WeightedSet] = []
    for key, value in scaled.items():
        probability, fit = float(np.exp(value - total)), fits.get(key)
        cubic = tuple(member for member in key if not search.candidates.is_zone(member))
        unlisted = [member for member in cubic if search.candidates.is_unlisted(member)]
        if not unlisted:
            sets.append(WeightedSet(cubic, probability, fit))
            continue
        trust = _trust_in_cubic(search, fit, unlisted) if fit is not None else 0.5
        rest = tuple(member for member in cubic if member not in unlisted)
        sets.append(WeightedSet(cubic, probability * trust, fit))
        sets.append(WeightedSet(rest, probability * (1.0 - trust), fit, only_looks_cubic=True))
    sets.sort(key=lambda item: (-item.probability, item.members, item.only_looks_cubic))
    return Posterior(tuple(sets), total)


def _trust_in_cubic(search: Search, fit: Fitted, unlisted: list[int]) -> float:
    """Return the chance that unlisted phases of a set are cubic, rather than part of a non-cubic pattern.

    Lines of one zone of a non-cubic lattice, or of one with rational axial ratios, follow a cubic sequence
    exactly. What gives them away is that the same list holds lines that nothing cubic explains.
    """
    batch, row = fit.batch, fit.row
    places = [place for place, member in enumerate(fit.members) if member in unlisted]
    claimed = float((batch.claims[row, places].sum(axis=(0, 2)) > 0.5).sum())
    zones = [place for place, member in enumerate(fit.members) if search.candidates.is_zone(member)]
    left = batch.background[row] + batch.claims[row, zones].sum(axis=(0, 2))
    unexplained = float((left > 0.5).sum())
    share = max(unexplained - 1.0, 0.0) / max(claimed + unexplained, 1.0)
    return float(1.0 / (1.0 + np.exp(TRUST_SLOPE * (share - TRUST_HALF))))


def _without_doubles(search: Search, sets: Iterable[Fitted]) -> dict[Key, Fitted]:
    """Drop sets whose unlisted members came to rest where those of a better set did."""
    candidates = search.candidates
    kept: dict[Key, Fitted] = {}
    seen: dict[tuple[object, ...], list[list[float]]] = {}
    for fit in sorted(sets, key=lambda item: (-item.log_evidence, item.key)):
        listed = tuple(sorted(m for m in fit.members if candidates.entry_of[m] >= 0))
        free = sorted(
            (candidates.lattice_of[m], candidates.pattern_of[m], float(u))
            for m, u in zip(fit.members, fit.ln_a, strict=True)
            if candidates.entry_of[m] < 0
        )
        if not free:
            kept[fit.key] = fit
            continue
        signature = (listed, tuple((lattice, pattern) for lattice, pattern, _ in free))
        places = [u for _, _, u in free]
        others = seen.setdefault(signature, [])
        if any(all(abs(a - b) < SAME_PLACE for a, b in zip(places, other, strict=True)) for other in others):
            continue
        others.append(places)
        kept[fit.key] = fit
    return kept


def _add_combinations(fits: dict[Key, Fitted], evidence: dict[Key, float]) -> None:
    """Add sets that exchange two or more members of a good set, from the exchanges made one at a time."""
    best = max((fit.log_evidence for fit in fits.values()), default=0.0)
    anchors = [fit for fit in fits.values() if fit.log_evidence > best - 3.0 and len(fit.key) > 1]
    anchors.sort(key=lambda fit: (-fit.log_evidence, fit.key))
    for anchor in anchors[:3]:
        slots: list[list[tuple[int, float]]] = []
        for member in anchor.key:
            rest = set(anchor.key) - {member}
            slot = [(member, 0.0)]
            for key, fit in fits.items():
                if len(key) == len(anchor.key) and rest < set(key):
                    other = next(iter(set(key) - rest))
                    change = fit.log_evidence - anchor.log_evidence
                    if other != member and change > -ALTERNATIVE:
                        slot.append((other, change))
            slots.append(sorted(slot, key=lambda item: (-item[1], item[0]))[:20])
        combinations: list[tuple[tuple[int, ...], float]] = [((), anchor.log_evidence)]
        for slot in slots:
            combinations = [
                ((*members, member), value + change)
                for members, value in combinations
                for member, change in slot
                if member not in members and value + change > anchor.log_evidence - ALTERNATIVE
            ][:MOST_COMBINATIONS]
        for members, value in combinations:
            evidence.setdefault(tuple(sorted(members)), value)
