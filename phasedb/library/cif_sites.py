"""Atom sites and formula of a CIF block."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Any, Final

from phasedb.crystal.assignment import ELECTRONEGATIVITY_RANK
from phasedb.crystal.displacement import typical_b_iso
from phasedb.crystal.elements import ELEMENTS
from phasedb.crystal.formula import Formula, parse_formula
from phasedb.crystal.phases import Site, Structure
from phasedb.crystal.quantity import parse_measured
from phasedb.crystal.structure import SpaceGroup, cell_contents, check_structure, site_multiplicity
from phasedb.errors import InputError
from phasedb.library.cif_symmetry import first

MOST_SITES: Final = 500
MOST_ATOMS: Final = 4000
"""In one cell: larger structures are no phases of this library, and would take minutes."""
_SAME_COMPOSITION: Final = 0.01
_OVERFULL: Final = 1.005
_B_RANGE: Final = (0.0, 50.0)

Position = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class AtomRow:
    """One row of the atom loop; `b_iso` is None where the file gives none that is plausible."""

    label: str
    symbol: str
    occupancy: float
    position: Position
    b_iso: float | None


def value_of(text: str, what: str) -> float:
    """Return the number of a CIF value (an esd in brackets is dropped)."""
    read = parse_measured(text, what=what)
    if read.unit:
        raise InputError(f"{what} {text!r} is not a number")
    return read.value


def _column(block: Any, size: int, name: str) -> list[str]:
    from gemmi import cif

    for full in (f"_atom_site_{name}", f"_atom_site.{name}"):
        values = [
            "" if cif.is_null(raw) else str(cif.as_string(raw)).strip() for raw in block.find_values(full)
        ]
        if len(values) == size:
            return values
    return [""] * size


def _element_of(text: str, label: str) -> str:
    """Return the element of a type symbol (``Fe3+``) or, without one, of a label (``FE1``)."""
    letters = re.match(r"[A-Za-z]{1,2}", text or label)
    for size in (2, 1):
        symbol = letters.group()[:size].capitalize() if letters else ""
        if symbol in ELEMENTS and len(symbol) == size:
            return symbol
    raise InputError(f"atom {label!r} ({text or 'no type symbol'}) names no element")


def atom_rows(block: Any, notes: list[str]) -> list[AtomRow]:
    """Return the atoms of a block; dummies and empty sites are left out.

    Raises
    ------
    InputError
        If a value cannot be read, or there are more than 500 rows.
    """
    from gemmi import cif

    found = list(block.find_values("_atom_site_label")) or list(block.find_values("_atom_site.label"))
    labels = [str(cif.as_string(raw)) for raw in found]
    size = len(labels)
    if size > MOST_SITES:
        raise InputError(f"{size} atom sites: at most {MOST_SITES} are read")
    if not size:
        return []
    axes = [_column(block, size, f"fract_{axis}") for axis in "xyz"]
    types = _column(block, size, "type_symbol")
    occupancies = _column(block, size, "occupancy")
    flags = _column(block, size, "calc_flag")
    rows = []
    for i, label in enumerate(labels):
        if flags[i] == "dum":
            continue
        if not all(axis[i] for axis in axes):
            notes.append(f"atom {label} has no coordinates and was left out")
            continue
        x, y, z = (value_of(axis[i], f"coordinate of {label}") for axis in axes)
        occupancy = value_of(occupancies[i], f"occupancy of {label}") if occupancies[i] else 1.0
        if occupancy == 0.0:
            continue
        b_iso = _b_iso(block, size, i, label)
        rows.append(AtomRow(label, _element_of(types[i], label), occupancy, (x, y, z), b_iso))
    return rows


def _b_iso(block: Any, size: int, row: int, label: str) -> float | None:
    b_text = _column(block, size, "B_iso_or_equiv")[row]
    u_text = _column(block, size, "U_iso_or_equiv")[row]
    if b_text:
        value = value_of(b_text, f"B of {label}")
    elif u_text:
        value = 8.0 * math.pi**2 * value_of(u_text, f"U of {label}")
    else:
        return None
    return value if _B_RANGE[0] < value <= _B_RANGE[1] else None


def _merged(rows: list[AtomRow], b_else: float) -> tuple[Site, ...]:
    """Return the sites, elements with the same coordinates on one site."""
    places: dict[Position, list[AtomRow]] = {}
    for row in rows:
        places.setdefault(row.position, []).append(row)
    sites = []
    for position, members in places.items():
        species: dict[str, float] = {}
        for row in members:
            species[row.symbol] = species.get(row.symbol, 0.0) + row.occupancy
        total = sum(species.values())
        if 1.0 < total <= _OVERFULL:  # rounding of published occupancies
            species = {symbol: part / total for symbol, part in species.items()}
        b_iso = next((row.b_iso for row in members if row.b_iso is not None), b_else)
        sites.append(Site(members[0].label, tuple(species.items()), position, b_iso))
    return tuple(sites)


def structure_of(
    groups: tuple[SpaceGroup, ...], rows: list[AtomRow], stated: Formula | None, notes: list[str]
) -> tuple[Structure | None, Formula | None]:
    """Return the structure, in the origin that fits the formula, and the formula.

    Raises
    ------
    InputError
        If the sites are not plausible, or fit neither or both of two origins.
    """
    if not rows or not groups:
        if not rows:
            notes.append("no atom sites: read without a structure")
        return None, stated
    sites = _merged(rows, 0.5 if stated is None else typical_b_iso(stated))
    candidates = []
    for group in groups:
        count = sum(site_multiplicity(group.name, site.position) for site in sites)
        if count > MOST_ATOMS:
            raise InputError(f"{count} atoms in the cell: at most {MOST_ATOMS} are kept")
        structure = Structure(group.name, sites)
        contents = cell_contents(structure)
        candidates.append((_distance(contents, stated), structure, contents))
    fitting = [item for item in candidates if item[0] <= _SAME_COMPOSITION]
    if len(candidates) > 1 and len(fitting) != 1:
        raise InputError(
            f"space group {groups[0].name.split(':')[0]} has two origins, and the file does not say which",
            hint="give the symmetry operations",
        )
    distance, structure, contents = fitting[0] if fitting else candidates[0]
    check_structure(structure)
    if stated is None:
        return structure, formula_of(contents)
    if distance > _SAME_COMPOSITION:
        notes.append(f"the sites hold {formula_of(contents).text}, the formula says {stated.text}")
    return structure, stated


def _distance(contents: dict[str, float], formula: Formula | None) -> float:
    """Return the largest difference of atomic fractions between the cell and the formula."""
    if formula is None:
        return 0.0
    total = sum(contents.values())
    return max(
        abs(contents.get(symbol, 0.0) / total - formula.composition.get(symbol, 0.0) / formula.atoms)
        for symbol in {*contents, *formula.composition}
    )


def formula_of(contents: dict[str, float]) -> Formula:
    """Return the reduced formula of the contents of a cell."""
    whole = {symbol: round(count) for symbol, count in contents.items()}
    if all(abs(contents[symbol] - count) < 1e-3 for symbol, count in whole.items()):
        divisor = math.gcd(*whole.values())
        counts = {symbol: f"{count // divisor}" for symbol, count in whole.items()}
    else:
        least = min(contents.values())
        counts = {
            symbol: f"{count / least:.4f}".rstrip("0").rstrip(".") for symbol, count in contents.items()
        }
    return parse_formula(_in_order(counts))


def _in_order(counts: dict[str, str]) -> str:
    """Return a formula text, electropositive elements first; with carbon and hydrogen those first."""
    if {"C", "H"} <= counts.keys():
        order = ["C", "H", *sorted(counts.keys() - {"C", "H"})]
    else:
        order = sorted(counts, key=lambda symbol: ELECTRONEGATIVITY_RANK.get(symbol, 0))
    return "".join(symbol + ("" if counts[symbol] == "1" else counts[symbol]) for symbol in order)


def stated_formula(block: Any, notes: list[str]) -> Formula | None:
    """Return the formula that the block states; None, with a remark, if it cannot be read.

    A sum formula is put in the usual order: ``Al2 Mg O4`` reads MgAl2O4.
    """
    structural = first(block, "_chemical_formula_structural", "_chemical_formula.structural")
    text = first(block, "_chemical_formula_sum", "_chemical_formula.sum")
    try:
        if not text:
            return parse_formula(structural) if structural else None
        formula = parse_formula(re.sub(r"\s+", "", text))
        if structural and _same(structural, formula):
            return parse_formula(structural)
    except InputError as error:
        notes.append(f"{error.what}; the formula was taken from the sites")
        return None
    return parse_formula(_in_order({symbol: f"{count:.6g}" for symbol, count in formula.composition.items()}))


def _same(text: str, formula: Formula) -> bool:
    try:
        return parse_formula(text).reduced == formula.reduced
    except InputError:
        return False
