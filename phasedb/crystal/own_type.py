"""A structure type of the user's own: a space group and its sites as text."""

from __future__ import annotations

import re
from typing import Final

from phasedb.crystal.coordinates import parse_parameters
from phasedb.crystal.displacement import typical_b_iso
from phasedb.crystal.elements import ELEMENTS
from phasedb.crystal.formula import parse_formula
from phasedb.crystal.phases import Site, Structure
from phasedb.crystal.structure import cell_contents, check_structure, space_group
from phasedb.errors import InputError

_SHARES: Final = re.compile(r"([A-Z][a-z]?)(\d*\.\d+|1(?!\d))?")
_SAME_COMPOSITION: Final = 0.01


def _species(label: str, symbol: str) -> tuple[tuple[str, float], ...]:
    """Return the elements of a site: ``Fe0.7Cr0.3`` says shares, ``O2`` is only a label."""
    parts = _SHARES.findall(label)
    if "".join(name + share for name, share in parts) == label and all(name in ELEMENTS for name, _ in parts):
        return tuple((name, float(share or 1.0)) for name, share in parts)
    return ((symbol, 1.0),)


def is_complete(sites: str, formula: str) -> bool:
    """Return whether the text has a place for every element of the formula (not only free parameters)."""
    try:
        placed, named = parse_parameters(sites)
    except InputError:
        return False
    held = {name for item in placed for name, _ in _species(item.label, item.symbol)}
    return bool(placed) and not named and held == set(parse_formula(formula).elements)


def structure_from_sites(space_group_name: str, sites: str, formula: str) -> Structure:
    """Return the structure that a space group and sites give.

    Parameters
    ----------
    space_group_name : str
        Hermann-Mauguin symbol; ``F d -3 m:2`` where there are two origins.
    sites : str
        ``Ti(0,0,0); C0.85(1/2,1/2,1/2); Fe0.7Cr0.3(1/4,1/4,1/4)``.
    formula : str
        What the sites must amount to, within 1 % of the atoms.

    Raises
    ------
    InputError
        If a part cannot be read, or the sites do not amount to the formula.

    Examples
    --------
    >>> len(structure_from_sites("Fm-3m", "Na(0,0,0); Cl(1/2,1/2,1/2)", "NaCl").sites)
    2
    """
    group = space_group(space_group_name)
    placed, named = parse_parameters(sites)
    if named or not placed:
        raise InputError("the sites of the structure are not given", hint="write them like 'Ti(0,0,0)'")
    parsed = parse_formula(formula)
    b_iso = typical_b_iso(parsed)
    structure = Structure(
        group.name,
        tuple(Site(item.label, _species(item.label, item.symbol), item.position, b_iso) for item in placed),
    )
    check_structure(structure)
    contents = cell_contents(structure)
    total = sum(contents.values())
    held = {symbol: count / total for symbol, count in contents.items()}
    for symbol in dict.fromkeys([*parsed.composition, *held]):
        stated = parsed.composition.get(symbol, 0.0) / parsed.atoms
        if abs(held.get(symbol, 0.0) - stated) > _SAME_COMPOSITION:
            raise InputError(
                f"the sites hold {100 * held.get(symbol, 0.0):.1f} % {symbol} atoms, "
                f"{parsed.text} has {100 * stated:.1f} %"
            )
    return structure
