"""How single values of a match are written, the same in the terminal, on a page and in a figure."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

from phasedb.crystal.lattice import Hkl
from phasedb.crystal.quantity import format_measured
from phasedb.identify.result import Claim, LedgerLine, Match, MeritF, MeritM, PhaseResult

POSITION_TITLES: Final[dict[str, str]] = {
    "two-theta": "2theta, deg",
    "d": "d, Å",
    "q": "Q, 1/Å",
    "ring": "ring radius, mm",
}
AXIS_TITLES: Final[dict[str, str]] = {
    "two-theta": "2θ, degrees",
    "d": "d, Å",
    "q": "Q, 1/Å",
    "ring": "ring radius, mm",
}
UNITS: Final[dict[str, str]] = {"two-theta": "°", "d": " Å", "q": " Å⁻¹", "ring": " mm"}
KIND_WORDS: Final[dict[str, str]] = {
    "line": "",
    "k_alpha2": "K-alpha2 of",
    "k_beta": "K-beta of",
    "w_l_alpha": "W L-alpha of",
    "foreign": "foreign:",
}
LATTICE_WORDS: Final[dict[str, str]] = {"P": "primitive", "I": "body-centred", "F": "face-centred"}
CLAIMED_FROM: Final = 0.5
"""A listed or unlisted phase, or a claim on a line, counts above this probability."""


def probability(value: float) -> str:
    """Return a probability in words that never claim certainty.

    >>> [probability(p) for p in (0.99999, 0.9981, 0.5, 0.0312, 0.0004)]
    ['> 0.999', '0.998', '0.500', '0.031', '< 0.001']
    """
    if value > 0.999:
        return "> 0.999"
    if value < 0.001:
        return "< 0.001"
    return f"{value:.3f}"


def chance(value: float) -> str:
    """Return an expected number of chance matches, two digits.

    >>> [chance(v) for v in (12.3, 0.62, 0.0042, 1e-9)]
    ['12', '0.62', '0.0042', '< 0.0001']
    """
    if value < 1e-4:
        return "< 0.0001"
    if value < 1:
        return f"{value:.2g}"
    return f"{value:.0f}" if value >= 10 else f"{value:.1f}"


def percent(relative: float | None, digits: int = 3) -> str:
    """Return a relative difference in percent with its sign; a dash if unknown.

    >>> percent(-0.00371), percent(None)
    ('-0.371 %', '-')
    """
    return "-" if relative is None else f"{100 * relative:+.{digits}f} %"


def lattice_constant(a_angstrom: float | None, esd_angstrom: float | None) -> str:
    """Return a in Å with its standard uncertainty, ``4.2417(2)``; without one, at most five decimals."""
    if a_angstrom is None:
        return "-"
    if esd_angstrom is None:
        return f"{a_angstrom:.5f}".rstrip("0")
    return format_measured(a_angstrom, esd_angstrom)


def merit_f(merit: MeritF | None) -> str:
    """Return F_N as published: ``F9 = 35.7 (0.0210, 12)``: value (mean |delta 2theta| in deg, N possible)."""
    if merit is None:
        return "-"
    delta = f"{merit.mean_abs_delta_two_theta_deg:.4f}"
    return f"F{merit.n} = {merit.value:.1f} ({delta}, {merit.n_possible})"


def merit_m(merit: MeritM | None) -> str:
    """Return M_N: ``M9 = 88.2``."""
    return "-" if merit is None else f"M{merit.n} = {merit.value:.1f}"


def hkl_text(hkls: Sequence[Hkl]) -> str:
    """Return families as text: ``311``, ``333/511``; indices over 9 are spaced.

    >>> hkl_text([(3, 3, 3), (5, 1, 1)]), hkl_text([(10, 2, 0)])
    ('333/511', '10 2 0')
    """
    return "/".join((" " if max(hkl) > 9 else "").join(str(index) for index in hkl) for hkl in hkls)


def claimant(claim: Claim) -> str:
    """Return who claims a line: the phase's name, or ``K-beta of`` it."""
    if claim.kind == "foreign" and claim.name == "foreign":
        return "foreign line"
    words = KIND_WORDS[claim.kind]
    return f"{words} {claim.name}" if words else claim.name


def position(value: float, unit: str) -> str:
    """Return a position with the digits that its unit deserves."""
    return f"{value:.3f}" if unit in ("two-theta", "ring") else f"{value:.4f}"


def deviation(claim: Claim) -> str:
    """Return observed minus calculated after the shift: degrees 2theta, or percent of d."""
    if claim.delta_two_theta_deg is not None:
        return f"{claim.delta_two_theta_deg:+.3f}"
    return f"{100 * claim.delta_relative:+.3f} %"


def in_degrees(match: Match) -> bool:
    """Return whether the deviations of a match are in degrees 2theta; in percent of d otherwise."""
    claims = [claim for line in match.ledger for claim in line.claims]
    if claims:
        return any(claim.delta_two_theta_deg is not None for claim in claims)
    return match.shift.noise_deg is not None or match.measurement.position_unit == "two-theta"


def is_explained(line: LedgerLine) -> bool:
    """Return whether some claim on the line is more probable than none."""
    return line.unexplained < CLAIMED_FROM and bool(line.claims)


def groups(phases: Sequence[PhaseResult]) -> list[list[PhaseResult]]:
    """Return the phases by groups of look-alikes, in rank order of each group's first."""
    found: list[list[PhaseResult]] = []
    for phase in phases:
        for group in found:
            if any(phase.name in member.look_alikes or member.name in phase.look_alikes for member in group):
                group.append(phase)
                break
        else:
            found.append([phase])
    return found


def listing(names: Sequence[str], joiner: str = "and") -> str:
    """Return names as a sentence lists them.

    >>> listing(["silver"]), listing(["a", "b", "c"], "or")
    ('silver', 'a, b or c')
    """
    if len(names) < 2:
        return "".join(names)
    return f"{', '.join(names[:-1])} {joiner} {names[-1]}"


def plural(count: int, word: str) -> str:
    """Return ``1 line``, ``3 lines``."""
    return f"{count} {word}" if count == 1 else f"{count} {word}s"
