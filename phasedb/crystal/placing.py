"""Sites of a structure type filled with elements, at the coordinates of a source or the typical ones."""

from __future__ import annotations

import re
from dataclasses import dataclass

from phasedb.crystal.assignment import Assignment, role_sizes
from phasedb.crystal.coordinates import (
    NEAR_TYPICAL,
    Placed,
    Position,
    Setting,
    equivalent_settings,
    evaluate,
    nearest_image,
    source_settings,
)
from phasedb.crystal.phases import Site, Structure
from phasedb.crystal.structure import site_multiplicity
from phasedb.crystal.structure_type import StructureType, TypeSite
from phasedb.errors import InputError


@dataclass(slots=True)
class _Slot:
    """A site being filled: where the type has it, where a source puts it."""

    site: TypeSite
    typical: Position
    position: Position | None = None


def _from_names(
    kind: StructureType, slots: list[_Slot], choice: Assignment, named: dict[str, float]
) -> tuple[Placed, ...]:
    """Return the coordinates that named values (``u=0.2617``) stand for, in the source's own origin."""
    if len(kind.parameters) == 1 and len(named) == 1:  # the only parameter goes by several letters
        named = dict.fromkeys(kind.parameters, next(iter(named.values())))
    unknown = named.keys() - kind.parameters.keys()
    if unknown:
        raise InputError(
            f"{kind.symbol} has no free parameter {', '.join(sorted(unknown))}",
            where="free parameters",
            hint="it has " + (", ".join(kind.parameters) or "none"),
        )
    values = kind.parameters | named
    return tuple(
        Placed(
            ", ".join(sorted(names)),
            next(iter(choice.shares[slot.site.role])),
            evaluate(slot.site.position, values),
        )
        for slot in slots
        if (names := _parameters_of(slot.site) & named.keys())
    )


def _parameters_of(site: TypeSite) -> set[str]:
    return {name for text in site.position for name in re.findall(r"[a-z]+\d?", text)}


def build(
    kind: StructureType,
    choice: Assignment,
    placed: tuple[Placed, ...],
    named: dict[str, float],
    *,
    b_iso: float = 0.5,
) -> Structure:
    """Return the structure of a type with its sites filled.

    Raises
    ------
    InputError
        If a name is no parameter of the type, or a coordinate is far from where the type has it.
    """
    slots = [_Slot(site, evaluate(site.position, kind.parameters)) for site in kind.sites]
    placed = (*placed, *_from_names(kind, slots, choice, named))
    if placed:
        _place(kind.space_group, slots, choice, placed)
    sizes = role_sizes(kind)
    sites = []
    for slot in slots:
        position = slot.position or slot.typical
        count = site_multiplicity(kind.space_group, position)
        part = slot.site.atoms / (count * sizes[slot.site.role])
        species = tuple(
            (symbol, min(part * held, 1.0)) for symbol, held in choice.shares[slot.site.role].items()
        )
        sites.append((species, position))
    return Structure(kind.space_group, _labelled(sites, b_iso), _assumed(kind, slots, choice, named))


def _labelled(rows: list[tuple[tuple[tuple[str, float], ...], Position]], b_iso: float) -> tuple[Site, ...]:
    seen: dict[str, int] = {}
    sites = []
    for species, position in rows:
        name = "/".join(symbol for symbol, _ in species)
        seen[name] = seen.get(name, 0) + 1
        sites.append(Site(f"{name}{seen[name]}", species, position, b_iso))
    return tuple(sites)


def _assumed(
    kind: StructureType, slots: list[_Slot], choice: Assignment, named: dict[str, float]
) -> tuple[str, ...]:
    """Name each free parameter that no source gave, with its value, and the atoms that are left out."""
    assumed = []
    for slot in slots:
        free = _parameters_of(slot.site)
        if slot.position is not None and not free & named.keys():
            continue
        if slot.position is not None and len(kind.parameters) == 1:
            continue
        atoms = "/".join(choice.shares[slot.site.role])
        assumed += [
            f"{name} = {typical:g} ({atoms})"
            for name, typical in kind.parameters.items()
            if name in free - named.keys()
        ]
    if kind.unplaced:
        assumed.append("hydrogen is left out: its sites are not known")
    return tuple(dict.fromkeys(assumed))


def _place(name: str, slots: list[_Slot], choice: Assignment, placed: tuple[Placed, ...]) -> None:
    """Put the source's coordinates on the slots they belong to, in the setting in which they come nearest.

    The type's own origin is tried first (and the other origin choice, where the group has two); other axes
    and origins only if that fails, since they could make a coordinate look more typical than it is.
    """
    best: tuple[float, list[tuple[int, Position]]] | None = None
    for settings in (source_settings(name), equivalent_settings(name)):
        for setting in settings:
            found = _match(name, slots, choice, placed, setting)
            if found is not None and (best is None or found[0] < best[0] - 1e-9):
                best = found
        if best is not None and best[0] <= NEAR_TYPICAL:
            break
    if best is None:
        labels = ", ".join(item.label for item in placed)
        raise InputError(f"no site of the type is left for {labels}", where="free parameters")
    if best[0] > NEAR_TYPICAL:
        raise InputError(
            f"coordinates lie {best[0]:.3f} (fraction of a) from where the type has them",
            where="free parameters",
            hint="another structure type, or another origin?",
        )
    for index, position in best[1]:
        slots[index].position = position


def _match(
    name: str, slots: list[_Slot], choice: Assignment, placed: tuple[Placed, ...], setting: Setting
) -> tuple[float, list[tuple[int, Position]]] | None:
    """Return the largest distance from the typical positions and what goes where, or None."""
    worst = 0.0
    chosen: dict[int, tuple[Position, Position]] = {}
    for item in placed:
        point = setting.apply(item.position)
        candidates = []
        for index, slot in enumerate(slots):
            if item.symbol not in choice.shares[slot.site.role]:
                continue
            if index in chosen and chosen[index][1] != item.position:
                continue
            distance, image = nearest_image(name, point, slot.typical)
            candidates.append((distance, index, image))
        if not candidates:
            return None
        distance, index, image = min(candidates)
        worst = max(worst, distance)
        chosen[index] = (image, item.position)
    return worst, [(index, image) for index, (image, _) in chosen.items()]
