"""Figures of the study, as the design defines them: found, wrong claims, honesty of the probabilities.

A *claim* is a listed or unlisted phase with p > 0.5. It is wrong if the sample does not hold it or a
look-alike of it (`study.oracle`); an unlisted claim is right if the lattice type agrees with a phase of the
sample and a lies within 0.5 %.

*Found in the top n*: the n listed phases of the sample are looked for among the first n of the ranking.
Strict: by name. Counting look-alikes: an entry that cannot be told from a true phase stands for it, and a
second entry of the same group takes no place in the ranking.

*Honesty* is measured on every p >= 0.05. Of an entry: right if the sample holds that very entry; of the
unlisted phase: right if the sample holds a phase that the library lacks, of that lattice type and a. Of a
group (`group_probability`, once for each): right if a phase of the sample, or a look-alike of one, is in it.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from phasedb.identify.result import Match
from study.oracle import Verdict
from study.truth import Case, TruePhase

CLAIM = 0.5
LATTICE_CONSTANT_TOLERANCE = 0.005
LEAST_PROBABILITY = 0.05


@dataclass(frozen=True, slots=True)
class ListScore:
    """What one list adds to the figures. Pairs are (probability, right or not)."""

    seed: tuple[int, ...]
    n_listed: int
    found_strict: int
    found_alike: int
    ceiling: int
    ceiling_probability: float
    right_claims: tuple[str, ...]
    wrong_claims: tuple[str, ...]
    missed: tuple[str, ...]
    pairs_entry: tuple[tuple[float, bool], ...]
    pairs_group: tuple[tuple[float, bool], ...]
    shift_inside: tuple[bool, ...]
    seconds: float
    fault: str = ""

    @classmethod
    def failed(cls, case: Case, fault: str) -> ListScore:
        """Return the score of a list on which the matcher raised an error: nothing found."""
        missed = tuple(phase.name for phase in case.truth.phases if not phase.removed)
        return cls(case.truth.seed, len(missed), 0, 0, 0, 0.0, (), (), missed, (), (), (), 0.0, fault)


def score(case: Case, match: Match, verdicts: Sequence[Verdict], seconds: float) -> ListScore:
    """Return the figures of one list; `verdicts`: the oracle's view of each true phase, in order."""
    truth = case.truth
    listed = [
        (phase, verdict) for phase, verdict in zip(truth.phases, verdicts, strict=True) if not phase.removed
    ]
    present = {phase.name for phase, _ in listed}
    alike = set().union(*(verdict.look_alikes for verdict in verdicts)) | {
        phase.name for phase in truth.phases
    }
    ranking = [result.name for result in match.phases]
    top = set(ranking[: len(listed)])
    stand_ins = found_with_look_alikes(ranking, listed)
    right, wrong = [], []
    entry: list[tuple[float, bool]] = []
    group: list[tuple[float, bool]] = []
    counted: set[str] = set()
    for result in match.phases:
        label = f"{result.name} p={result.probability:.3f}"
        good = result.name in alike
        if result.probability > CLAIM:
            (right if good else wrong).append(label)
        entry.append((result.probability, result.name in present))
        if result.name not in counted:
            group.append((result.group_probability, good or bool(alike & set(result.look_alikes))))
            counted |= {result.name, *result.look_alikes}
    best = match.unlisted.best
    p = match.unlisted.probability
    if best is not None:
        holder = holds_unlisted(truth.phases, best.lattice_type, best.a_angstrom)
        label = f"unlisted {best.lattice_type} {best.a_angstrom:.4f} p={p:.3f}"
        if p > CLAIM:
            (right if holder is not None else wrong).append(label)
        entry.append((p, holder is not None and holder.removed))
        group.append((p, holder is not None and holder.removed))
    elif p > 0.0:
        lacking = any(phase.removed for phase in truth.phases)
        for pairs in (entry, group):
            pairs.append((p, lacking))
    claimed = {name.rsplit(" p=", 1)[0] for name in right}
    missed = tuple(
        phase.name
        for phase, verdict in listed
        if phase.name not in claimed and not verdict.look_alikes & claimed
    )
    return ListScore(
        seed=truth.seed,
        n_listed=len(listed),
        found_strict=sum(phase.name in top for phase, _ in listed),
        found_alike=stand_ins,
        ceiling=sum(verdict.is_first for _, verdict in listed),
        ceiling_probability=sum(verdict.probability for _, verdict in listed),
        right_claims=tuple(right),
        wrong_claims=tuple(wrong),
        missed=missed,
        pairs_entry=_above(entry),
        pairs_group=_above(group),
        shift_inside=shift_inside(case, match),
        seconds=seconds,
    )


def found_with_look_alikes(ranking: Sequence[str], listed: Sequence[tuple[TruePhase, Verdict]]) -> int:
    """Return how many of the sample's phases, or look-alikes of them, are among the first n groups ranked."""
    open_groups = [{phase.name} | verdict.look_alikes for phase, verdict in listed]
    done: set[str] = set()
    found = places = 0
    for name in ranking:
        hits = [members for members in open_groups if name in members]
        if not hits and name in done:
            continue
        places += 1
        if places > len(listed):
            break
        for members in hits:
            found += 1
            done |= members
            open_groups.remove(members)
    return found


def holds_unlisted(phases: Sequence[TruePhase], lattice: str, a: float) -> TruePhase | None:
    """Return the phase of the sample that an unlisted claim agrees with, a removed one first."""
    fitting = [
        phase
        for phase in phases
        if phase.lattice_type == lattice and abs(a / phase.a_true - 1.0) <= LATTICE_CONSTANT_TOLERANCE
    ]
    return max(fitting, key=lambda phase: phase.removed, default=None)


def shift_inside(case: Case, match: Match) -> tuple[bool, ...]:
    """Return, for each line claimed by a true phase, whether the true shift is within 2 esd."""
    shift = match.shift
    if shift.at_lines_deg is None or shift.at_lines_esd_deg is None:
        return ()
    names = {phase.name for phase in case.truth.phases}
    inside = []
    for row, line in enumerate(match.ledger):
        if any(
            claim.name in names and claim.probability > CLAIM and claim.kind == "line"
            for claim in line.claims
        ):
            error = shift.at_lines_deg[row] - case.truth.shift_at_lines_deg[row]
            inside.append(bool(abs(error) <= 2.0 * shift.at_lines_esd_deg[row]))
    return tuple(inside)


def _above(pairs: Sequence[tuple[float, bool]]) -> tuple[tuple[float, bool], ...]:
    return tuple((float(p), bool(right)) for p, right in pairs if p >= LEAST_PROBABILITY)


# --- over many lists ------------------------------------------------------------------------------


def calibration_error(p: NDArray[np.float64], right: NDArray[np.bool_], bins: int = 10) -> float:
    """Return the expected calibration error: mean |stated - seen| over equal-count bins."""
    if not len(p):
        return float("nan")
    order = np.argsort(p, kind="stable")
    parts = [part for part in np.array_split(order, bins) if len(part)]
    return float(sum(len(part) * abs(p[part].mean() - right[part].mean()) for part in parts) / len(p))


def reliability(
    p: NDArray[np.float64], right: NDArray[np.bool_], bins: int = 10
) -> list[tuple[float, float, int]]:
    """Return (mean stated, share right, count) of each equal-count bin."""
    order = np.argsort(p, kind="stable")
    parts = [part for part in np.array_split(order, bins) if len(part)]
    return [(float(p[part].mean()), float(right[part].mean()), len(part)) for part in parts]


def brier(p: NDArray[np.float64], right: NDArray[np.bool_]) -> float:
    """Return the mean squared difference of stated probability and outcome (Brier 1950)."""
    return float(np.mean((p - right) ** 2)) if len(p) else float("nan")


def log_loss(p: NDArray[np.float64], right: NDArray[np.bool_]) -> float:
    """Return the mean negative log probability of what was so; p is kept from 0 and 1 by 1e-6."""
    if not len(p):
        return float("nan")
    kept = np.clip(p, 1e-6, 1.0 - 1e-6)
    return float(-np.mean(np.where(right, np.log(kept), np.log1p(-kept))))


def bootstrap(
    scores: Sequence[ListScore], figure: Callable[[Sequence[ListScore]], float], times: int = 400
) -> tuple[float, float, float]:
    """Return a figure and the ends of its 95 % interval, lists resampled whole."""
    rng = np.random.default_rng(20240)
    values = [
        figure([scores[i] for i in rng.integers(0, len(scores), len(scores))])
        for _ in range(times if scores else 0)
    ]
    finite = np.array([value for value in values if np.isfinite(value)])
    if not len(finite):
        return figure(scores) if scores else float("nan"), float("nan"), float("nan")
    low, high = np.quantile(finite, [0.025, 0.975])
    return figure(scores), float(low), float(high)


def pooled(scores: Sequence[ListScore], kind: str) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    """Return all pairs of one kind (``entry`` or ``group``) as two arrays."""
    pairs = [pair for one in scores for pair in getattr(one, f"pairs_{kind}")]
    return np.array([p for p, _ in pairs], dtype=float), np.array([right for _, right in pairs], dtype=bool)


def share(scores: Sequence[ListScore], field: str) -> float:
    """Return the share of listed phases for which `field` counts."""
    total = sum(one.n_listed for one in scores)
    return sum(getattr(one, field) for one in scores) / total if total else float("nan")


def claimed_share(scores: Sequence[ListScore]) -> float:
    """Return the share of listed phases that were claimed, by themselves or by a look-alike."""
    total = sum(one.n_listed for one in scores)
    missed = sum(len(one.missed) for one in scores)
    return 1.0 - missed / total if total else float("nan")


def wrong_per_list(scores: Sequence[ListScore]) -> float:
    """Return the mean number of wrong claims in a list."""
    return float(np.mean([len(one.wrong_claims) for one in scores])) if scores else float("nan")
