"""Typical isotropic displacement parameters, for structures whose source gives none."""

from __future__ import annotations

from typing import Final

from phasedb.crystal.formula import Formula

# B of elements near room temperature, Å², after Peng, Ren, Dudarev & Whelan, Acta Cryst. A52 (1996) 456 (from
# memory, rounded; those that the paper lacks are estimates from the melting point).
_OF_ELEMENTS: Final = {
    "Li": 4.7, "C": 0.14, "Na": 6.5, "Al": 0.82, "Si": 0.5, "K": 10.0, "Ca": 2.0, "Ti": 0.6, "V": 0.57,
    "Cr": 0.26, "Mn": 0.5, "Fe": 0.33, "Co": 0.35, "Ni": 0.36, "Cu": 0.55, "Ge": 0.6, "Rb": 12.0, "Sr": 3.0,
    "Nb": 0.45, "Mo": 0.22, "Rh": 0.25, "Pd": 0.44, "Ag": 0.73, "Sn": 1.1, "Cs": 15.0, "Ba": 3.0, "La": 1.7,
    "Ce": 1.7, "Eu": 3.0, "Yb": 2.6, "Ta": 0.32, "W": 0.16, "Ir": 0.2, "Pt": 0.32, "Au": 0.62, "Pb": 2.1,
    "Th": 0.73, "Po": 2.0, "Ac": 1.0, "Pu": 1.0, "Ne": 1.5, "Ar": 1.5, "Kr": 2.0, "Xe": 2.0, "N": 2.0,
}  # fmt: skip

# Compounds by their softest bond, Å²: common practice, no source.
_BY_ANION: Final = (
    ({"Cl", "Br", "I"}, 1.6),
    ({"F"}, 0.9),
    ({"S", "Se", "Te", "As", "Sb", "P"}, 0.7),
    ({"O"}, 0.5),
    ({"B", "C", "N", "Si"}, 0.35),
)
_WITH_WATER_OR_AMMONIUM: Final = 2.0
_MOLECULAR: Final = 4.0
_ELSE: Final = 0.6


def typical_b_iso(formula: Formula) -> float:
    """Return a typical B for all atoms of a compound, Å²."""
    elements = set(formula.elements)
    if len(elements) == 1:
        return _OF_ELEMENTS.get(formula.elements[0], _ELSE)
    if elements <= {"H", "D", "C", "N", "O"}:
        return _MOLECULAR
    if elements & {"H", "D"} and elements & {"N", "O"}:
        return _WITH_WATER_OR_AMMONIUM
    for anions, value in _BY_ANION:
        if elements & anions:
            return value
    known = [_OF_ELEMENTS[symbol] for symbol in formula.elements if symbol in _OF_ELEMENTS]
    return min(round(sum(known) / len(known), 2), 1.5) if known else _ELSE
