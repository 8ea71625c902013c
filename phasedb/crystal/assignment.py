"""Which elements of a formula hold which sites of a structure type."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final

from phasedb.crystal.formula import Formula
from phasedb.crystal.structure_type import StructureType

# Pauling electronegativities, ascending: Allred, J. Inorg. Nucl. Chem. 17 (1961) 215 and later additions,
# from memory. Only the order is used: of roles of one size, the earlier is for the more electropositive.
_ASCENDING: Final = (
    "Fr Cs Rb K Ba Ra Na Sr Li Ca La Ac Yb Eu Ce Pr Pm Nd Sm Gd Tb Dy Y Ho Er Tm Lu Pu Am Cm Bk Cf Es Fm"
    " Md No Lr Th Hf Mg Zr Np Sc U Ta Pa Ti Mn Be Nb Al Tl Zn V Cr Cd In Ga Fe Co Si Cu Re Tc Ni Ag Sn Po Hg"
    " Ge Bi B Sb Te Mo As P H D T At Ru Ir Pd Pt Os Rh Pb W Au C Se S I Xe Br Kr N Cl O F He Ne Ar Rn"
)
ELECTRONEGATIVITY_RANK: Final = {symbol: rank for rank, symbol in enumerate(_ASCENDING.split())}

EXACT: Final = 0.005
"""A role is full if its atoms agree with its size within this part."""
LEAST_FILL: Final = 0.3
"""Emptiest role that a formula with decimals may leave (TiC from about 0.47; common practice, no source)."""
MOST_MOVED: Final = 0.5
"""Largest part of a role that a formula with decimals may fill with the other's atoms."""

Shares = dict[str, dict[str, float]]
"""For each role, atoms of each element in the cell."""


@dataclass(frozen=True, slots=True)
class Assignment:
    """A way to fill a type: atoms of the cell for each role, and how many formula units that is."""

    shares: Shares
    formula_units: float


def role_sizes(kind: StructureType) -> dict[str, float]:
    """Return the atoms in the cell that each role holds when full, roles in the order of the type."""
    sizes: dict[str, float] = {}
    for site in kind.sites:
        sizes[site.role] = sizes.get(site.role, 0.0) + site.atoms
    return sizes


def has_decimals(formula: Formula) -> bool:
    """Return whether the formula was written with decimals: it then says a composition, not a ratio."""
    return any(abs(count - round(count)) > 1e-9 for count in formula.composition.values())


def _placements(kind: StructureType, symbols: tuple[str, ...]) -> Iterator[tuple[str, ...]]:
    """Yield each way to give every element one role, none left empty."""
    roles = tuple(role_sizes(kind))

    def allowed(symbol: str, role: str) -> bool:
        return symbol in kind.only.get(role, (symbol,)) and symbol not in kind.never.get(role, ())

    def extend(chosen: tuple[str, ...]) -> Iterator[tuple[str, ...]]:
        left = len(symbols) - len(chosen)
        if len(set(roles) - set(chosen)) > left:
            return
        if not left:
            yield chosen
            return
        for role in roles:
            if allowed(symbols[len(chosen)], role):
                yield from extend((*chosen, role))

    yield from extend(())


def _disorder(kind: StructureType, symbols: tuple[str, ...], placement: tuple[str, ...]) -> int:
    """Count pairs of elements that stand against the order of the roles, electropositive first."""
    order = {role: index for index, role in enumerate(role_sizes(kind))}
    ranked = [
        (order[role], ELECTRONEGATIVITY_RANK[symbol]) for symbol, role in zip(symbols, placement, strict=True)
    ]
    return sum(a_role < b_role and a_rank > b_rank for a_role, a_rank in ranked for b_role, b_rank in ranked)


def assignments(kind: StructureType, formula: Formula) -> list[Assignment]:
    """Return the ways in which a formula can fill a type, the most plausible first; maybe none."""
    composition = {
        symbol: count for symbol, count in formula.composition.items() if symbol not in kind.unplaced
    }
    sizes = role_sizes(kind)
    symbols = tuple(composition)
    if not len(sizes) <= len(symbols) <= 10 or 0 < len(kind.never_mixed & set(symbols)) < len(symbols):
        return []
    found: list[tuple[float, int, int, Assignment]] = []
    loose = has_decimals(formula)
    for index, placement in enumerate(_placements(kind, symbols)):
        counts = dict.fromkeys(sizes, 0.0)
        for symbol, role in zip(symbols, placement, strict=True):
            counts[role] += composition[symbol]
        outcome = _fit(kind, sizes, counts, loose=loose)
        if outcome is None:
            continue
        misfit, scale = outcome
        shares: Shares = {role: {} for role in sizes}
        for symbol, role in zip(symbols, placement, strict=True):
            shares[role][symbol] = scale * composition[symbol]
        if kind.filling == "alloy" and misfit > EXACT:
            _move_excess(sizes, shares)
        found.append((misfit, _disorder(kind, symbols, placement), index, Assignment(shares, scale)))
    best = min((misfit for misfit, *_ in found), default=0.0)
    kept = [item for item in found if item[0] <= best + EXACT]
    return [item[-1] for item in sorted(kept, key=lambda item: item[1:3])]


def _fit(
    kind: StructureType, sizes: dict[str, float], counts: dict[str, float], *, loose: bool
) -> tuple[float, float] | None:
    """Return (misfit, cells per formula unit), or None if the counts do not fit the roles."""
    ratios = {role: counts[role] / size for role, size in sizes.items()}
    fixed = {role: ratio for role, ratio in ratios.items() if role not in kind.most_fill}
    if kind.filling == "alloy":
        scale = sum(sizes.values()) / sum(counts.values())
        misfit = max(abs(ratio * scale - 1.0) for ratio in ratios.values())
        return (misfit, scale) if misfit <= (MOST_MOVED if loose else EXACT) else None
    scale = 1.0 / max(fixed.values())
    misfit = max(1.0 - ratio * scale for ratio in fixed.values())
    if misfit > (1.0 - LEAST_FILL if loose else EXACT):
        return None
    if any(ratios[role] * scale > most for role, most in kind.most_fill.items()):
        return None
    return misfit, scale


def _move_excess(sizes: dict[str, float], shares: Shares) -> None:
    """Let the atoms that a role has too many fill the roles that lack some."""
    surplus = {role: sum(held.values()) - sizes[role] for role, held in shares.items()}
    lacking = sum(-value for value in surplus.values() if value < 0)
    for role, value in surplus.items():
        if value <= 0:
            continue
        total = sizes[role] + value
        moved = {symbol: count * value / total for symbol, count in shares[role].items()}
        for symbol, count in moved.items():
            shares[role][symbol] -= count
            for other, missing in surplus.items():
                if missing < 0:
                    part = count * -missing / lacking
                    shares[other][symbol] = shares[other].get(symbol, 0.0) + part
