"""From space group and sites to the atoms of the cubic cell."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LatticeType, check_lattice_type
from phasedb.crystal.phases import Site, Structure
from phasedb.errors import InputError

FloatArray = NDArray[np.float64]

SAME_POSITION: Final = 1.9371e-3
"""Images of a position nearer than this (fraction of a) are one atom on a special position.

Coordinates are published to three or more decimals; atoms of a 20 Å cell are further apart than 0.04 Å.
Not a round number, so that rounding noise never decides about coordinates that are.
"""

_STEPS_ONTO_SPECIAL: Final = 20
_SETTLED: Final = 1e-13

_TWO_ORIGINS: Final = frozenset({201, 203, 222, 224, 227, 228})


@dataclass(frozen=True, slots=True, eq=False)
class SpaceGroup:
    """Operations of one cubic space group in one setting.

    Attributes
    ----------
    name : str
        Hermann-Mauguin symbol, with ``:1`` or ``:2`` where two origins exist.
    number : int
    lattice_type : {'P', 'I', 'F'}
    rotations : (n, 3, 3) float64
    translations : (n, 3) float64
        Without the centring translations.
    centring : (m, 3) float64
    swaps_indices : bool
        Whether hkl and khl are equivalent (Laue class m-3m; not in m-3).
    """

    name: str
    number: int
    lattice_type: LatticeType
    rotations: FloatArray
    translations: FloatArray
    centring: FloatArray
    swaps_indices: bool


@lru_cache(maxsize=64)
def space_group(name: str) -> SpaceGroup:
    """Return the cubic space group of that Hermann-Mauguin symbol.

    Raises
    ------
    InputError
        If the symbol is unknown, not cubic, or leaves the choice of origin open (six groups have two).
    """
    import gemmi

    text = re.sub(r"\s+", " ", name.strip())
    found = gemmi.find_spacegroup_by_name(text) if 0 < len(text) <= 40 else None
    if found is None:
        raise InputError(f"space group {name!r} is not known", hint="expected a symbol such as Fm-3m or P213")
    if found.number < 195:
        raise InputError(
            f"space group {found.hm} (no. {found.number}) is {found.crystal_system_str()}, not cubic",
            hint="only cubic phases (space groups 195 to 230) are kept",
        )
    if found.number in _TWO_ORIGINS and not re.search(r":\s*[12]$", text):
        raise InputError(
            f"space group {found.hm} has two choices of origin",
            hint=f"write '{found.hm}:2' (origin at the inversion centre) or '{found.hm}:1'",
        )
    operations = found.operations()
    scale = 1.0 / operations.sym_ops[0].DEN
    return SpaceGroup(
        name=found.xhm(),
        number=found.number,
        lattice_type=check_lattice_type(found.centring_type()),
        rotations=scale * np.array([operation.rot for operation in operations.sym_ops], dtype=np.float64),
        translations=scale * np.array([operation.tran for operation in operations.sym_ops], dtype=np.float64),
        centring=scale * np.array(operations.cen_ops, dtype=np.float64),
        swaps_indices=found.laue_str() == "m-3m",
    )


def _keys(points: FloatArray) -> NDArray[np.int64]:
    # Once a point has been moved onto its special position, its images differ by rounding noise (1e-12) or by
    # more than SAME_POSITION, so any grid between tells them apart; the offset keeps edges off round numbers.
    cells = np.floor((points % 1.0) * 1e5 + 0.3719).astype(np.int64) % 100_000
    keys: NDArray[np.int64] = (cells[..., 0] * 100_000 + cells[..., 1]) * 100_000 + cells[..., 2]
    return keys


@lru_cache(maxsize=4096)
def _reduced_orbit(name: str, position: tuple[float, float, float]) -> FloatArray:
    """Return one image of `position` for each set that the centring relates, shape (n, 3), read-only."""
    group = space_group(name)
    point = np.asarray(position, dtype=np.float64)
    # Move the point onto the special position that it is meant to hold: the mean of its images nearby. Once
    # is enough unless some of them lie just outside the limit; each step brings those nearer.
    for _ in range(_STEPS_ONTO_SPECIAL):
        images = group.rotations @ point + group.translations
        shifted = images[:, None, :] + group.centring[None, :, :] - point
        shifted -= np.round(shifted)
        step = shifted[np.abs(shifted).max(axis=2) < SAME_POSITION].mean(axis=0)
        point = point + step
        if np.abs(step).max() < _SETTLED:
            break
    images = group.rotations @ point + group.translations
    smallest = _keys(images[:, None, :] + group.centring[None, :, :]).min(axis=1)
    _, first = np.unique(smallest, return_index=True)
    result: FloatArray = images[np.sort(first)] % 1.0
    result.flags.writeable = False
    return result


def reduced_orbit(name: str, position: Sequence[float]) -> FloatArray:
    """Return the atoms of one site modulo the lattice centring, fractional, shape (n, 3)."""
    x, y, z = (float(value) for value in position)
    return _reduced_orbit(name, (x, y, z))


def orbit(name: str, position: Sequence[float]) -> FloatArray:
    """Return all atoms of one site in the cubic cell, fractional in [0, 1), shape (n, 3)."""
    reduced = reduced_orbit(name, position)
    centring = space_group(name).centring
    points: FloatArray = (centring[:, None, :] + reduced[None, :, :]).reshape(-1, 3) % 1.0
    return points


def site_multiplicity(name: str, position: Sequence[float]) -> int:
    """Return the number of atoms of one site in the cubic cell."""
    return len(reduced_orbit(name, position)) * len(space_group(name).centring)


@dataclass(frozen=True, slots=True, eq=False)
class CellAtoms:
    """Atoms of the whole cell: fractional positions, shape (n, 3), and the index of the site of each."""

    positions: FloatArray
    site: NDArray[np.int64]


def cell_atoms(structure: Structure) -> CellAtoms:
    """Return all atoms of the cubic cell."""
    orbits = [orbit(structure.space_group, site.position) for site in structure.sites]
    counts = [len(points) for points in orbits]
    return CellAtoms(np.concatenate(orbits), np.repeat(np.arange(len(orbits)), counts))


def cell_contents(structure: Structure) -> dict[str, float]:
    """Return the atoms of each element in the cubic cell, occupancies counted."""
    contents: dict[str, float] = {}
    for site in structure.sites:
        count = site_multiplicity(structure.space_group, site.position)
        for symbol, occupancy in site.species:
            contents[symbol] = contents.get(symbol, 0.0) + count * occupancy
    return contents


def is_partly_occupied(site: Site) -> bool:
    """Return whether the site has vacancies (its occupancies sum to less than 1)."""
    return sum(occupancy for _, occupancy in site.species) < 1.0 - 1e-6


def check_structure(structure: Structure, lattice_type: LatticeType | None = None) -> None:
    """Check a structure at the door.

    Raises
    ------
    InputError
        If it has no site, an unknown element, an occupancy, coordinate or B that is not plausible, if two
        sites hold the same place, or if the space group's lattice differs from `lattice_type`.
    """
    from phasedb.crystal.elements import element

    group = space_group(structure.space_group)
    if lattice_type is not None and group.lattice_type != lattice_type:
        raise InputError(
            f"space group {group.name} has lattice type {group.lattice_type}, the phase has {lattice_type}"
        )
    if not structure.sites:
        raise InputError("the structure has no site", hint="give at least one site: element and x, y, z")
    for site in structure.sites:
        where = f"site {site.label!r}"
        if not np.all(np.isfinite(site.position)) or max(map(abs, site.position)) > 10.0:
            raise InputError(f"position {site.position} is not usable: expected fractions of a", where=where)
        if not 0.0 <= site.b_iso <= 50.0:
            raise InputError(f"B = {site.b_iso} Å² is not usable: expected 0 to 50", where=where)
        total = 0.0
        for symbol, occupancy in site.species:
            element(symbol)
            if not 0.0 < occupancy <= 1.0 + 1e-6:
                raise InputError(
                    f"occupancy {occupancy} of {symbol} is not usable: expected above 0, up to 1", where=where
                )
            total += occupancy
        if not 0.0 < total <= 1.005:
            raise InputError(f"occupancies sum to {total:g}: expected above 0, up to 1", where=where)
    _check_distinct(structure)


def _check_distinct(structure: Structure) -> None:
    seen: dict[int, Site] = {}
    for site in structure.sites:
        for key in _keys(orbit(structure.space_group, site.position)):
            other = seen.setdefault(int(key), site)
            filled = sum(occupancy for _, occupancy in (*site.species, *other.species))
            if other is not site and filled > 1.005:
                raise InputError(
                    f"sites {other.label!r} and {site.label!r} hold the same place, filled {filled:g} times",
                    hint="give mixed occupancy as one site with two elements whose shares sum to at most 1",
                )
