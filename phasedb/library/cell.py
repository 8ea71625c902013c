"""What follows from the cell of an entry, as far as its sites or its formula units are known."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from phasedb.library.entry import Entry

AVOGADRO: Final = 6.02214076e23
"""1/mol, exact in the SI of 2019 (BIPM, SI Brochure, 9th edition)."""


@dataclass(frozen=True, slots=True)
class Nearest:
    """Nearest neighbours of one site: distance in Å, how many, and which elements."""

    site: str
    distance_angstrom: float
    count: float
    to: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Cell:
    """Facts of the cell; None where they are not known.

    Attributes
    ----------
    density_g_cm3 : float or None
        X-ray density.
    atoms, formula_units : float or None
        In one cell.
    packing_fraction, sphere_radius_angstrom : float or None
        For equal spheres that touch.
    nearest : tuple of Nearest
    """

    density_g_cm3: float | None
    atoms: float | None
    formula_units: float | None
    packing_fraction: float | None
    sphere_radius_angstrom: float | None
    nearest: tuple[Nearest, ...]


def cell_of(entry: Entry) -> Cell:
    """Return what follows from the cell of an entry."""
    return _from_formula_units(entry)


def _from_formula_units(entry: Entry) -> Cell:
    """Return the facts that need no sites: Z from the entry, density = Z M / (N_A a³)."""
    from phasedb.crystal.formula import parse_formula

    z = entry.content.formula_units_per_cell
    if z is None:
        return Cell(None, None, None, None, None, ())
    formula = parse_formula(entry.content.formula)
    volume_cm3 = (entry.content.a_angstrom * 1e-8) ** 3
    density = z * formula.molar_mass_g_mol / (AVOGADRO * volume_cm3)
    return Cell(density, z * formula.atoms, z, None, None, ())
