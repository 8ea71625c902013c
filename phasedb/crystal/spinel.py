"""Spinels: two kinds of cation sites whose filling is a matter of degree."""

from __future__ import annotations

from itertools import combinations
from typing import Final

from phasedb.crystal.assignment import EXACT, Assignment, Shares, has_decimals
from phasedb.crystal.formula import Formula
from phasedb.errors import InputError

_ANIONS: Final = frozenset({"O", "S", "Se", "Te", "F", "Cl", "Br", "I", "N"})
# Cations in falling preference for the tetrahedral site, after the site energies of Navrotsky & Kleppa,
# J. Inorg. Nucl. Chem. 29 (1967) 2701 (from memory); those not named prefer the octahedral site.
_TETRAHEDRAL: Final = (
    "Si",
    "Ge",
    "Zn",
    "Cd",
    "Li",
    "Ga",
    "In",
    "Mn",
    "Fe",
    "Co",
    "Mg",
    "Cu",
    "Al",
    "Sn",
    "Ti",
    "Ni",
)
TETRAHEDRAL: Final = 8.0
OCTAHEDRAL: Final = 16.0
ANIONS: Final = 32.0
LEAST_CATIONS: Final = 21.2
"""Cations to 32 anions in gamma-Fe2O3 (21.33), the emptiest spinel kept here."""


def _preference(symbol: str) -> int:
    return _TETRAHEDRAL.index(symbol) if symbol in _TETRAHEDRAL else len(_TETRAHEDRAL)


def _normal_tetrahedral(cations: dict[str, float]) -> dict[str, float]:
    """Return what holds the 8 tetrahedral sites of the normal spinel: a whole set of elements if one fits."""
    ordered = sorted(cations, key=_preference)
    for size in range(1, len(ordered)):
        for chosen in combinations(ordered, size):
            if abs(sum(cations[symbol] for symbol in chosen) - TETRAHEDRAL) < EXACT * TETRAHEDRAL:
                return {symbol: cations[symbol] for symbol in chosen}
    held: dict[str, float] = {}
    left = TETRAHEDRAL
    for symbol in ordered:
        taken = min(left, cations[symbol])
        if taken > 0:
            held[symbol] = taken
        left -= taken
    return held


def spinel_assignment(formula: Formula, inversion: float) -> Assignment:
    """Return which atoms hold the sites of a spinel; roles A (tetrahedral), B (octahedral) and X.

    Parameters
    ----------
    formula : Formula
    inversion : float
        Part of the tetrahedral sites that octahedral cations hold: 0 normal, 1 inverse, 2/3 random.

    Raises
    ------
    InputError
        If the formula does not have about 3 cations to 4 anions.
    """
    composition = formula.composition
    total = sum(count for symbol, count in composition.items() if symbol in _ANIONS)
    scale = ANIONS / total if total else 0.0
    cations = {symbol: scale * count for symbol, count in composition.items() if symbol not in _ANIONS}
    held = sum(cations.values())
    full = TETRAHEDRAL + OCTAHEDRAL
    plain = not has_decimals(formula) and abs(held - full) > EXACT * full and abs(held * 3 - 64) > 0.1
    if plain or not LEAST_CATIONS <= held <= full * (1 + EXACT):
        ratio = held / 8 if total else 0.0
        raise InputError(
            f"a spinel holds 3 cations to 4 anions (2.67 with vacancies), {formula.text} has {ratio:.3g} to 4"
        )
    tetrahedral = _normal_tetrahedral(cations)
    octahedral = {symbol: count - tetrahedral.get(symbol, 0.0) for symbol, count in cations.items()}
    in_b = sum(octahedral.values())
    swapped = inversion * TETRAHEDRAL
    a_share = {symbol: count * (1 - inversion) for symbol, count in tetrahedral.items()}
    b_share = {symbol: count * (1 - swapped / in_b) for symbol, count in octahedral.items()}
    for symbol, count in octahedral.items():
        a_share[symbol] = a_share.get(symbol, 0.0) + swapped * count / in_b
    for symbol, count in tetrahedral.items():
        b_share[symbol] = b_share.get(symbol, 0.0) + inversion * count
    anions = {symbol: scale * count for symbol, count in composition.items() if symbol in _ANIONS}
    shares: Shares = {"A": a_share, "B": b_share, "X": anions}
    kept = {role: {s: c for s, c in held.items() if c > 1e-9} for role, held in shares.items()}
    return Assignment(kept, scale)
