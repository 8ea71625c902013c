"""The solid that an entry describes: cell contents, density, neighbours, packing, spheres in contact."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import pi, sqrt
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.formula import Formula, parse_formula
from phasedb.crystal.lattice import ATOMS_PER_CELL, LatticeType
from phasedb.crystal.phases import Phase, Structure
from phasedb.crystal.structure import cell_atoms, cell_contents, site_multiplicity

FloatArray = NDArray[np.float64]

AVOGADRO_PER_MOL: Final = 6.02214076e23
"""Exact in the SI of 2019 (BIPM, SI Brochure, 9th edition)."""
_A3_TO_CM3: Final = 1e-24

SAME_SHELL: Final = 0.01
"""Neighbours within this part of the shortest distance are one shell (common practice, no source)."""
TOO_CLOSE_ANGSTROM: Final = 1.3
TOO_CLOSE_OF_A: Final = 0.35
"""Partly filled places nearer than this exclude each other: split sites, disorder; the part
of a keeps a cell whose unit was mistyped from losing all its neighbours (common practice)."""

RARE: Final = (0.5, 0.1)
"""A site filled less than this, with less than this part of all atoms, is rare, like carbon in
austenite: it does not decide which atoms touch (common practice, no source)."""

EQUAL_SPHERES: Final[dict[LatticeType, tuple[int, float]]] = {
    "P": (6, pi / 6.0),
    "I": (8, pi * sqrt(3.0) / 8.0),
    "F": (12, pi / (3.0 * sqrt(2.0))),
}
"""Neighbours and filled space for one sphere at each lattice point (52, 68, 74 %)."""
_CONTACT: Final[dict[LatticeType, float]] = {"P": 0.5, "I": sqrt(3.0) / 4.0, "F": sqrt(2.0) / 4.0}


@dataclass(frozen=True, slots=True)
class Neighbours:
    """Nearest neighbours of one site: label, distance (Å), mean number, and the elements there."""

    site: str
    distance_angstrom: float
    count: float
    to: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Solid:
    """What follows from the cell; None where the entry does not say enough.

    Attributes
    ----------
    atoms, formula_units : float or None
        In one cell.
    density_g_cm3 : float or None
        X-ray density Z M / (N_A a³), M from the formula.
    packing_fraction : float or None
        Part of the cell that equal spheres fill when the nearest ones touch.
    sphere_radius_angstrom : float or None
        Radius of those spheres.
    nearest : tuple of Neighbours
        For each site, in the order of the structure.
    """

    atoms: float | None
    formula_units: float | None
    density_g_cm3: float | None
    packing_fraction: float | None
    sphere_radius_angstrom: float | None
    nearest: tuple[Neighbours, ...] = ()


def contact_radius(lattice: LatticeType, a_angstrom: float) -> float:
    """Return the radius (Å) of touching spheres on the lattice points: a/2, sqrt(3) a/4, sqrt(2) a/4."""
    return _CONTACT[lattice] * a_angstrom


def xray_density(formula: Formula, formula_units: float, a_angstrom: float) -> float:
    """Return Z M / (N_A a³) in g/cm³."""
    return formula_units * formula.molar_mass_g_mol / (AVOGADRO_PER_MOL * a_angstrom**3 * _A3_TO_CM3)


def formula_units_from_density(formula: Formula, density_g_cm3: float, a_angstrom: float) -> float:
    """Return Z = rho a³ N_A / M."""
    volume = AVOGADRO_PER_MOL * a_angstrom**3 * _A3_TO_CM3
    return density_g_cm3 * volume / formula.molar_mass_g_mol


def formula_units_of(structure: Structure, formula: Formula) -> float | None:
    """Return the formula units that the sites hold, counted by the elements that have sites."""
    contents = cell_contents(structure)
    placed = sum(count for symbol, count in formula.composition.items() if symbol in contents)
    return sum(contents.values()) / placed if placed else None


def packing_fraction(structure: Structure, a_angstrom: float, radii_angstrom: Mapping[str, float]) -> float:
    """Return the part of the cell that spheres of the given radii (Å, by element) fill.

    Raises
    ------
    KeyError
        If an element of the structure has no radius.
    """
    filled = sum(
        count * 4.0 / 3.0 * pi * radii_angstrom[symbol] ** 3
        for symbol, count in cell_contents(structure).items()
    )
    return filled / a_angstrom**3


def _atoms_of_sites(structure: Structure) -> FloatArray:
    return np.array(
        [
            site_multiplicity(structure.space_group, site.position) * sum(part for _, part in site.species)
            for site in structure.sites
        ]
    )


def _rare_sites(structure: Structure) -> NDArray[np.bool_]:
    atoms = _atoms_of_sites(structure)
    filling = np.array([sum(part for _, part in site.species) for site in structure.sites])
    rare: NDArray[np.bool_] = (filling < RARE[0]) & (atoms < RARE[1] * atoms.sum())
    return rare


def nearest_neighbours(structure: Structure, a_angstrom: float) -> tuple[Neighbours, ...]:
    """Return the nearest neighbours of each site.

    Places that cannot be filled at once (their occupancies sum to at most 1 and they lie within 1.3 Å) do not
    count as neighbours, nor do rare atoms; others count with their occupancy.
    """
    atoms = cell_atoms(structure)
    filling = np.array([sum(part for _, part in site.species) for site in structure.sites])
    occupancy = filling[atoms.site]
    rare = _rare_sites(structure)[atoms.site]
    too_close = min(TOO_CLOSE_ANGSTROM, TOO_CLOSE_OF_A * a_angstrom)
    steps = np.array(list(np.ndindex(3, 3, 3)), dtype=np.float64) - 1.0
    home = int(np.flatnonzero((steps == 0).all(axis=1))[0])
    found = []
    for index, site in enumerate(structure.sites):
        start = int(np.argmax(atoms.site == index))
        offsets = atoms.positions[:, None, :] + steps[None, :, :] - atoms.positions[start]
        distance = a_angstrom * np.sqrt((offsets**2).sum(axis=2))
        distance[start, home] = np.inf
        exclusive = (occupancy + occupancy[start] <= 1.0 + 1e-6)[:, None] & (distance < too_close)
        distance[exclusive | rare[:, None]] = np.inf
        shortest = float(distance.min())
        shell, _ = np.nonzero(distance <= shortest * (1.0 + SAME_SHELL))
        kinds = sorted({int(kind) for kind in atoms.site[shell]})
        symbols = dict.fromkeys(symbol for kind in kinds for symbol, _ in structure.sites[kind].species)
        found.append(Neighbours(site.label, shortest, float(occupancy[shell].sum()), tuple(symbols)))
    return tuple(found)


def solid_of(phase: Phase) -> Solid:
    """Return what follows from the cell of a phase: from its sites, else from its formula units per cell."""
    formula = parse_formula(phase.formula)
    structure = phase.structure
    units = formula_units_of(structure, formula) if structure is not None else None
    if units is None:
        units = phase.formula_units_per_cell
    if units is None:
        return Solid(None, None, None, None, None)
    atoms = units * formula.atoms
    density = xray_density(formula, units, phase.a_angstrom)
    if structure is None:
        return Solid(atoms, units, density, None, None)
    nearest = nearest_neighbours(structure, phase.a_angstrom)
    usual = ~_rare_sites(structure)
    radius = min(near.distance_angstrom for near, kept in zip(nearest, usual, strict=True) if kept) / 2.0
    placed = float(_atoms_of_sites(structure)[usual].sum())
    filled = placed * 4.0 / 3.0 * pi * radius**3 / phase.a_angstrom**3
    return Solid(atoms, units, density, filled, radius, nearest)


def whole_number_step(lattice: LatticeType, formula: Formula) -> tuple[float, int] | None:
    """Return (g, L): Z times g must be a multiple of L, for a formula of whole numbers; else None.

    L is the number of lattice points in the cell and g the largest common factor of the formula: every atom
    comes once for each lattice point.
    """
    counts = [round(count) for count in formula.composition.values()]
    if any(
        abs(count - whole) > 1e-9 for count, whole in zip(formula.composition.values(), counts, strict=True)
    ):
        return None
    return float(np.gcd.reduce(counts)), ATOMS_PER_CELL[lattice]
