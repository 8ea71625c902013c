"""What a structure type says: space group, sites by role, free parameters with typical values."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

Filling = Literal["compound", "alloy", "solution"]
"""How a formula may leave the ideal one: vacancies, atoms on each other's sites, any mix on one site."""


@dataclass(frozen=True, slots=True)
class TypeSite:
    """One site of a type.

    Attributes
    ----------
    role : str
        Sites of one role are held by the same elements.
    atoms : float
        Atoms in the cell when the role is full; below the site's multiplicity where the type has vacancies.
    position : tuple of str
        Three coordinates: a fraction, or a parameter with a sign or a shift (``-x``, ``y+1/4``).
    """

    role: str
    atoms: float
    position: tuple[str, str, str]


@dataclass(frozen=True, slots=True)
class StructureType:
    """One structure type, or one of its variants.

    Attributes
    ----------
    symbol : str
        Strukturbericht symbol, or a name where there is none.
    prototype : str
    space_group : str
    sites : tuple of TypeSite
        Roles in order from the most electropositive to the most electronegative.
    parameters : dict
        Typical value of each free parameter.
    filling : str
    only : dict
        Elements that a role is confined to.
    never : dict
        Elements that a role cannot hold.
    unplaced : tuple of str
        Elements whose sites are not known; left out of the structure.
    most_fill : dict
        Highest filling of a role, where it is below 1.
    never_mixed : set
        Elements that do not share a site with others.
    """

    symbol: str
    prototype: str
    space_group: str
    sites: tuple[TypeSite, ...]
    parameters: dict[str, float] = field(default_factory=dict)
    filling: Filling = "compound"
    only: dict[str, frozenset[str]] = field(default_factory=dict)
    never: dict[str, frozenset[str]] = field(default_factory=dict)
    unplaced: tuple[str, ...] = ()
    most_fill: dict[str, float] = field(default_factory=dict)
    never_mixed: frozenset[str] = frozenset()


def structure_type(
    symbol: str,
    prototype: str,
    space_group: str,
    sites: str,
    *,
    filling: Filling = "compound",
    only: dict[str, frozenset[str]] | None = None,
    never: dict[str, frozenset[str]] | None = None,
    unplaced: tuple[str, ...] = (),
    most_fill: dict[str, float] | None = None,
    never_mixed: frozenset[str] = frozenset(),
    **parameters: float,
) -> StructureType:
    """Return a type from its sites as text: role, atoms, three coordinates; sites separated by semicolons."""
    rows = [row.split() for row in sites.split(";")]
    return StructureType(
        symbol,
        prototype,
        space_group,
        tuple(TypeSite(row[0], float(row[1]), (row[2], row[3], row[4])) for row in rows),
        parameters,
        filling,
        only or {},
        never or {},
        unplaced,
        most_fill or {},
        never_mixed,
    )
