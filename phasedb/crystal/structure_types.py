"""From the name of a structure type and a formula to space group and sites."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import Final

from phasedb.crystal.assignment import Assignment, assignments, role_sizes
from phasedb.crystal.coordinates import parse_parameters
from phasedb.crystal.displacement import typical_b_iso
from phasedb.crystal.formula import Formula, parse_formula
from phasedb.crystal.metal_types import METALS_AND_SIMPLE
from phasedb.crystal.phases import Structure
from phasedb.crystal.placing import build
from phasedb.crystal.salt_types import SALTS
from phasedb.crystal.structure import check_structure
from phasedb.crystal.structure_type import StructureType, TypeSite
from phasedb.errors import InputError, UnknownNameError

SPINEL: Final = StructureType(
    "H1_1",
    "MgAl2O4",
    "F d -3 m:2",
    (
        TypeSite("A", 8, ("1/8", "1/8", "1/8")),
        TypeSite("B", 16, ("1/2", "1/2", "1/2")),
        TypeSite("X", 32, ("u", "u", "u")),
    ),
    {"u": 0.2625},
)
STRUCTURE_TYPES: Final = METALS_AND_SIMPLE + SALTS
_INVERSION: Final = {"H1_1": 0.0, "H1_1 (inverse)": 1.0, "H1_1 (partly inverse)": 2 / 3}

_OTHER_NAMES: Final = {
    "Ah": ("simple cubic", "alpha polonium", "polonium"),
    "A1": ("fcc", "ccp", "face-centred cubic", "copper type", "austenite"),
    "A2": ("bcc", "body-centred cubic", "tungsten type", "ferrite"),
    "A4": ("diamond",),
    "A12": ("alpha manganese", "alpha-Mn"),
    "A13": ("beta manganese", "beta-Mn"),
    "B1": ("rock salt", "rocksalt", "halite", "NaCl type"),
    "B2": ("caesium chloride", "cesium chloride", "CsCl type"),
    "B3": ("zinc blende", "zincblende", "sphalerite", "ZnS type"),
    "C1": ("fluorite", "CaF2 type"),
    "C1 (anti)": ("antifluorite", "anti-fluorite", "anti C1", "Li2O type"),
    "C1_b": ("half-Heusler", "half Heusler", "MgAgAs type"),
    "C2": ("pyrite", "FeS2 type"),
    "C3": ("cuprite", "Cu2O type"),
    "C15": ("cubic Laves", "Laves", "MgCu2 type"),
    "D0_2": ("skutterudite",),
    "D0_3": ("BiF3 type", "Fe3Al type"),
    "D2_1": ("CaB6 type", "hexaboride"),
    "D5_3": ("bixbyite", "C-type rare earth oxide", "Mn2O3 type"),
    "D5_3 (anti)": ("antibixbyite", "anti-bixbyite", "anti D5_3", "Mg3N2 type"),
    "D5_4": ("senarmontite", "arsenolite"),
    "D8_2": ("gamma brass",),
    "D8_4": ("M23C6",),
    "D8_9": ("pentlandite",),
    "E2_1": ("perovskite", "cubic perovskite"),
    "E2_1 (anti)": ("antiperovskite", "anti-perovskite", "anti E2_1"),
    "E2_1 (inverse)": ("inverse perovskite", "inverse E2_1"),
    "E8_1": ("pyrochlore",),
    "F0_1": ("ullmannite", "gersdorffite"),
    "H1_1": ("spinel", "normal spinel", "H1_1 (normal)"),
    "H1_1 (inverse)": ("inverse spinel",),
    "H1_1 (partly inverse)": ("partly inverse spinel", "mixed spinel"),
    "defect spinel": ("maghemite",),
    "J1_1": ("K2PtCl6 type",),
    "L1_2": ("Cu3Au type",),
    "L2_1": ("Heusler", "full Heusler", "Cu2MnAl type"),
    "L'1 (Fe4N)": ("L'1", "L'1_0", "Fe4N type"),
    "A15": ("Cr3Si type", "beta tungsten"),
    "B20": ("FeSi type",),
    "B32": ("NaTl type", "Zintl"),
    "alum": ("alpha alum",),
    "G2_1": ("nitrobarite",),
}


def _key(text: str) -> str:
    return re.sub(r"[\s_\-'{}$]+", "", text.casefold()).removesuffix("type").removesuffix("structure")


@lru_cache(maxsize=1)
def _symbols_by_key() -> dict[str, str]:
    symbols = [kind.symbol for kind in STRUCTURE_TYPES] + list(_INVERSION)
    keys = {_key(symbol): symbol for symbol in symbols}
    for symbol, names in _OTHER_NAMES.items():
        for name in names:
            keys.setdefault(_key(name), symbol)
    return keys


def structure_type_symbols() -> tuple[str, ...]:
    """Return the symbols of all known types, sorted."""
    return tuple(sorted(set(_symbols_by_key().values())))


def structure_type_variants(symbol: str) -> tuple[StructureType, ...]:
    """Return the table entries of a type: several where formulas of different shape share it."""
    if symbol in _INVERSION:
        return (SPINEL,)
    return tuple(kind for kind in STRUCTURE_TYPES if kind.symbol == symbol)


def resolve_structure_type(text: str) -> str | None:
    """Return the symbol of a structure type from its symbol or a name of it, None if it is not known.

    Examples
    --------
    >>> resolve_structure_type("rock salt")
    'B1'
    >>> resolve_structure_type("A_h")
    'Ah'
    """
    return _symbols_by_key().get(_key(text))


def structure_from_type(symbol: str, formula: str, *, free_parameters: str | None = None) -> Structure:
    """Return space group and sites of a formula in a structure type.

    Parameters
    ----------
    symbol : str
        Symbol or name of the type.
    formula : str
        Its elements take the sites by stoichiometry, then by electronegativity. Written with decimals
        (``TiC0.85``, ``Fe0.55Al0.45``) it may leave vacancies, or in alloys put atoms on each other's sites.
    free_parameters : str, optional
        Coordinates as the source gives them, in its own origin, or ``u=0.2617``. What is missing gets the
        type's typical value and is named in `Structure.assumed`.

    Raises
    ------
    InputError
        If the type is unknown, the formula cannot fill it, or the coordinates are far from where the type has
        them.

    Examples
    --------
    >>> structure_from_type("B1", "MgO").sites[1].position
    (0.5, 0.5, 0.5)
    """
    resolved = resolve_structure_type(symbol)
    if resolved is None:
        raise UnknownNameError(
            f"structure type {symbol!r} is not known", hint="known: " + ", ".join(structure_type_symbols())
        )
    parsed = parse_formula(formula)
    placed, named = parse_parameters(free_parameters or "")
    failure: InputError | None = None
    for kind, choices in _choices(resolved, parsed, named):
        for choice in choices:
            try:
                structure = build(kind, choice, placed, named, b_iso=typical_b_iso(parsed))
                check_structure(structure)
            except InputError as error:
                failure = failure or error
            else:
                return structure
    raise failure or _misfit(resolved, parsed)


def _choices(
    symbol: str, formula: Formula, named: dict[str, float]
) -> list[tuple[StructureType, list[Assignment]]]:
    if symbol in _INVERSION:
        from phasedb.crystal.spinel import spinel_assignment

        inversion = named.pop("inversion", _INVERSION[symbol])
        if not 0.0 <= inversion <= 1.0:
            raise InputError(f"inversion = {inversion:g}: expected 0 (normal) to 1 (inverse)")
        return [(SPINEL, [spinel_assignment(formula, inversion)])]
    return [(kind, assignments(kind, formula)) for kind in structure_type_variants(symbol)]


def _misfit(symbol: str, formula: Formula) -> InputError:
    variants = structure_type_variants(symbol)
    held = []
    for kind in variants:
        sizes = role_sizes(kind)
        extra = f" and {', '.join(kind.unplaced)}" if kind.unplaced else ""
        held.append(f"{' : '.join(f'{size:g}' for size in sizes.values())} atoms{extra} ({kind.prototype})")
    has = " : ".join(f"{count:g} {symbol}" for symbol, count in formula.composition.items())
    return InputError(
        f"{symbol} holds {' or '.join(held)}; {formula.text} has {has}",
        hint="write decimals where sites are partly empty or mixed, for example TiC0.85 or Fe0.55Al0.45",
    )
