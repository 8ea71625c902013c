"""What the physics of the cell has against an entry: each finding with its numbers and a likely cause."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product
from typing import Final, Literal

from phasedb.crystal.formula import Formula, parse_formula
from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType
from phasedb.crystal.phases import Phase, Structure
from phasedb.crystal.radii import COVALENT, IONIC, METALLIC
from phasedb.crystal.solid import (
    EQUAL_SPHERES,
    Neighbours,
    contact_radius,
    formula_units_from_density,
    formula_units_of,
    nearest_neighbours,
    packing_fraction,
    whole_number_step,
)
from phasedb.crystal.structure import cell_contents, is_partly_occupied, space_group

Kind = Literal["packing", "contact", "density", "structure"]

MOST_FILLED: Final = 0.7405
"""Densest packing of equal spheres, pi / (3 sqrt 2)."""
EIGHT_TO_TWELVE: Final = 0.97
"""Radius with eight neighbours to radius with twelve: Goldschmidt, Z. phys. Chem. 133 (1928) 397."""

# All common practice, no source: chosen so that every starter entry passes (tests/crystal/test_checks.py).
METAL_CONTACT: Final = (0.90, 1.08)
"""Contact distance of a metal or random alloy to twice its mean metallic radius."""
COVALENT_LEAST: Final = 0.70
"""Shortest distance to the sum of covalent radii (a triple bond has 0.74)."""
LARGEST_MOST: Final = 1.30
"""Nearest neighbour of a site to the sum of the largest published radii."""
LEAST_VOLUME_A3: Final = 4.5
"""Smallest volume for each atom other than hydrogen, Å³ (diamond has 5.7)."""
DENSITY_WITHIN: Final = 0.04
"""How far a measured density may put Z from a whole number."""
_NOBLE: Final = frozenset({"He", "Ne", "Ar", "Kr", "Xe", "Rn"})
_LIGHT: Final = frozenset({"H", "D", "T"})


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that does not fit: a short kind for programs, the sentence for people."""

    kind: Kind
    text: str


def findings_of(phase: Phase) -> tuple[Finding, ...]:
    """Return what the physics of the cell has against an entry, worst first; empty if nothing."""
    formula = parse_formula(phase.formula)
    found = []
    if phase.structure is None:
        found += _too_small_without_sites(phase, formula)
    else:
        found += _wrong_lattice(phase, phase.structure)
        found += _metal_contact(phase, phase.structure)
        found += _bond_lengths(phase, phase.structure, formula)
    found += _formula_units(phase, formula)
    return tuple(found)


def _percent(part: float) -> str:
    return f"{100 * part:.0f} %"


def _unit_slip(a: float, ratio: float) -> str:
    """Name the slip of unit that a distance too short or too long by `ratio` suggests."""
    if 0.07 <= ratio <= 0.14:
        return f"{a:g} Å: nm typed as Å?"
    if 70 <= ratio <= 140:
        return f"{a:g} Å: pm typed as Å?"
    return ""


def _wrong_lattice(phase: Phase, structure: Structure) -> list[Finding]:
    lattice = space_group(structure.space_group).lattice_type
    if lattice == phase.lattice_type:
        return []
    named = phase.structure_type or structure.space_group
    return [
        Finding(
            "structure",
            f"{named} ({structure.space_group}) has lattice type {lattice}, "
            f"the entry says {phase.lattice_type}",
        )
    ]


def _mean_metallic_radius(structure: Structure) -> float | None:
    """Return the mean radius of metal atoms on one kind of site with metallic coordination, else None."""
    if len(structure.sites) != 1 or any(symbol not in METALLIC for symbol, _ in structure.sites[0].species):
        return None
    if nearest_neighbours(structure, 1.0)[0].count < EQUAL_SPHERES["P"][0] * 0.9:
        return None  # grey tin is bound like diamond
    shares = structure.sites[0].species
    return sum(part * METALLIC[symbol] for symbol, part in shares) / sum(part for _, part in shares)


def _metal_contact(phase: Phase, structure: Structure) -> list[Finding]:
    radius = _mean_metallic_radius(structure)
    if radius is None:
        return []
    a = phase.a_angstrom
    names = "/".join(symbol for symbol, _ in structure.sites[0].species)
    found = []
    smallest = EIGHT_TO_TWELVE * radius
    filled = packing_fraction(structure, a, dict.fromkeys(cell_contents(structure), smallest))
    if filled > MOST_FILLED:
        found.append(
            Finding(
                "packing",
                f"spheres of {names} (radius {smallest:.3g} Å) would fill {_percent(filled)} of the cell, "
                f"equal spheres fill at most 74.05 %: {_better_lattice(phase, radius) or 'is a right?'}",
            )
        )
    contact = nearest_neighbours(structure, a)[0].distance_angstrom
    ratio = contact / (2.0 * radius)
    if not METAL_CONTACT[0] <= ratio <= METAL_CONTACT[1]:
        low, high = (limit * 2.0 * radius for limit in METAL_CONTACT)
        found.append(
            Finding(
                "contact",
                f"atoms of {names} would touch at {contact:.3g} Å, their radius allows {low:.3g} to "
                f"{high:.3g} Å: {_better_lattice(phase, radius) or 'is a right?'}",
            )
        )
    return found


def _better_lattice(phase: Phase, radius: float) -> str:
    """Name the unit slip or the lattice type that would make the contact distance right."""
    a = phase.a_angstrom
    slip = _unit_slip(a, contact_radius(phase.lattice_type, a) / radius)
    if slip:
        return slip
    low, high = METAL_CONTACT
    fitting = [
        lattice
        for lattice in LATTICE_TYPES
        if lattice != phase.lattice_type and low <= contact_radius(lattice, a) / radius <= high
    ]
    return f"lattice type {' or '.join(fitting)} instead of {phase.lattice_type}?" if fitting else ""


def _radii_sums(first: str, second: str) -> tuple[float, float]:
    """Return the covalent and the largest sum of published radii of two elements, Å."""

    def largest(symbol: str) -> float:
        ions = [radius for (name, _), radius in IONIC.items() if name == symbol]
        return max(COVALENT[symbol], METALLIC.get(symbol, 0.0), *ions)

    return COVALENT[first] + COVALENT[second], largest(first) + largest(second)


def _bond_lengths(phase: Phase, structure: Structure, formula: Formula) -> list[Finding]:
    if _mean_metallic_radius(structure) is not None:
        return []
    nearest = nearest_neighbours(structure, phase.a_angstrom)
    # ammonium's hydrogen is often not placed: its nitrogen then has no bond to judge
    lonely = _NOBLE | ({"N"} if _LIGHT & set(formula.elements) else set())
    short: list[tuple[float, Finding]] = []
    long: list[tuple[float, Finding]] = []
    for site, neighbours in zip(structure.sites, nearest, strict=True):
        symbols = [symbol for symbol, _ in site.species]
        if lonely & set(symbols):
            continue
        sums = [_radii_sums(*pair) for pair in product(symbols, neighbours.to) if not _LIGHT & set(pair)]
        if not sums:
            continue
        least = COVALENT_LEAST * min(covalent for covalent, _ in sums)
        most = LARGEST_MOST * max(largest for _, largest in sums)
        ratio = neighbours.distance_angstrom / max(largest for _, largest in sums)
        if neighbours.distance_angstrom < least:
            short.append((ratio, _bond(phase, neighbours, least, most, ratio)))
        elif neighbours.distance_angstrom > most:
            long.append((-ratio, _bond(phase, neighbours, least, most, ratio)))
    worst = min(short or long, key=lambda item: item[0], default=None)
    return [worst[1]] if worst else []


def _bond(phase: Phase, neighbours: Neighbours, least: float, most: float, ratio: float) -> Finding:
    return Finding(
        "contact",
        f"{neighbours.site} would lie {neighbours.distance_angstrom:.3g} Å from {'/'.join(neighbours.to)}, "
        f"their radii allow {least:.3g} to {most:.3g} Å: "
        f"{_unit_slip(phase.a_angstrom, ratio) or 'is a right, and the structure type?'}",
    )


def _too_small_without_sites(phase: Phase, formula: Formula) -> list[Finding]:
    """Judge the cell by its volume alone: each lattice point carries at least one reduced formula unit."""
    step = whole_number_step(phase.lattice_type, formula)
    if step is None:
        return []
    factor, points = step
    a = phase.a_angstrom
    heavy = sum(count for symbol, count in formula.composition.items() if symbol not in _LIGHT) / factor
    element = formula.elements[0]
    if len(formula.elements) == 1 and element in METALLIC:
        filled = (
            EQUAL_SPHERES[phase.lattice_type][1]
            * (EIGHT_TO_TWELVE * METALLIC[element] / contact_radius(phase.lattice_type, a)) ** 3
        )
        if filled > MOST_FILLED:
            cause = _better_lattice(phase, METALLIC[element]) or "is a right?"
            return [
                Finding(
                    "packing",
                    f"one atom of {element} at each lattice point would fill {_percent(filled)} of the cell, "
                    f"equal spheres fill at most 74.05 %: {cause}",
                )
            ]
        return []
    volume = a**3 / (points * heavy) if heavy else LEAST_VOLUME_A3
    if volume >= LEAST_VOLUME_A3:
        return []
    cause = (
        f"{a:g} Å: nm typed as Å?" if volume < LEAST_VOLUME_A3 / 50 else "is a right, and the lattice type?"
    )
    return [
        Finding(
            "packing",
            f"the cell has at most {volume:.2g} Å³ for each atom (at least {points} formula units), "
            f"the densest solids need {LEAST_VOLUME_A3:g}: {cause}",
        )
    ]


def _formula_units(phase: Phase, formula: Formula) -> list[Finding]:
    """Compare Z from the measured density with what the sites, or the lattice type, allow."""
    density = phase.measured_density_g_cm3
    if density is None:
        return []
    z = formula_units_from_density(formula, density, phase.a_angstrom)
    shown = f"Z = {z:.3g} from density {density:g} g/cm³"
    if phase.structure is not None:
        expected = formula_units_of(phase.structure, formula)
        if any(is_partly_occupied(site) for site in phase.structure.sites) or expected is None:
            return []
        if abs(z / expected - 1.0) <= DENSITY_WITHIN:
            return []
        return [Finding("density", f"{shown}, the sites hold {expected:.4g}: {_density_cause(z / expected)}")]
    step = whole_number_step(phase.lattice_type, formula)
    if step is None:
        return []
    factor, points = step
    multiple = max(round(z * factor / points), 1) * points
    if abs(z * factor / multiple - 1.0) <= DENSITY_WITHIN:
        return []
    return [Finding("density", f"{shown}: {_allowed(phase.lattice_type, factor, points)}")]


def _density_cause(ratio: float) -> str:
    return "a porous specimen, or the wrong formula?" if ratio < 1 else "is a right, and the formula?"


def _allowed(lattice: LatticeType, factor: float, points: int) -> str:
    needed = points / factor
    return f"{lattice} needs a whole number" if needed == 1 else f"{lattice} needs a multiple of {needed:g}"
