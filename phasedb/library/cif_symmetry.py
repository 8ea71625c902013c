"""Which cubic space group a CIF block means."""

from __future__ import annotations

import re
from typing import Any, Final

from phasedb.crystal.structure import SpaceGroup, space_group
from phasedb.errors import InputError

MOST_OPERATIONS: Final = 192
_OPERATIONS: Final = (
    "_space_group_symop_operation_xyz",
    "_space_group_symop.operation_xyz",
    "_symmetry_equiv_pos_as_xyz",
    "_symmetry_equiv.pos_as_xyz",
)
_NAMES: Final = (
    "_space_group_name_H-M_alt",
    "_space_group.name_H-M_alt",
    "_space_group_name_H-M_ref",
    "_symmetry_space_group_name_H-M",
    "_symmetry.space_group_name_H-M",
)
_HALL: Final = ("_space_group_name_Hall", "_space_group.name_Hall", "_symmetry_space_group_name_Hall")
_NUMBERS: Final = ("_space_group_IT_number", "_space_group.IT_number", "_symmetry_Int_Tables_number")
_BRAVAIS: Final = ("_space_group_Bravais_type", "_space_group.Bravais_type")


def first(block: Any, *names: str) -> str:
    """Return the first value of the first of `names` that says something, unquoted; empty if none does."""
    from gemmi import cif

    for name in names:
        for raw in block.find_values(name):
            text = str(cif.as_string(raw)).strip() if not cif.is_null(raw) else ""
            if text not in ("", "?", "."):  # some programs quote the marks for unknown
                return text
    return ""


def space_groups_of(block: Any) -> tuple[SpaceGroup, ...]:
    """Return the space groups that a block may mean: one, or both origins where it leaves the choice open.

    Empty if the block says nothing of its symmetry.

    Raises
    ------
    InputError
        If the symmetry cannot be read, is not tabulated, or is not cubic.
    """
    operations = _operations(block)
    if operations:
        return (_by_operations(operations),)
    hall = first(block, *_HALL)
    if hall:
        found = _by_hall(hall)
        if found is not None:
            return (found,)
    name = re.sub(r"\s*:?\s*(?:S|O1)$", ":1", re.sub(r"\s*:?\s*(?:Z|O2)$", ":2", first(block, *_NAMES)))
    number = first(block, *_NUMBERS)
    if not name and number.isdecimal():
        import gemmi

        tabulated = gemmi.find_spacegroup_by_number(int(number)) if 0 < int(number) <= 230 else None
        name = tabulated.hm if tabulated is not None else ""
    if not name:
        return ()
    try:
        return (space_group(name),)
    except InputError as error:
        if "two choices" not in error.what:
            raise
        bare = re.sub(r"\s*:.*$", "", name)
        return (space_group(f"{bare}:2"), space_group(f"{bare}:1"))


def bravais_lattice(block: Any) -> str:
    """Return the letter of a cubic Bravais type (``cF``), else an empty text."""
    text = first(block, *_BRAVAIS)
    return text[1] if re.fullmatch(r"c[PIF]", text) else ""


def _operations(block: Any) -> list[str]:
    from gemmi import cif

    for name in _OPERATIONS:
        values = [str(cif.as_string(raw)) for raw in block.find_values(name) if not cif.is_null(raw)]
        if values and (len(values) > 1 or not first(block, *_NAMES, *_HALL)):
            return values  # a lone 'x,y,z' beside a name is left over from a template
    return []


def _by_operations(texts: list[str]) -> SpaceGroup:
    import gemmi

    if len(texts) > MOST_OPERATIONS:
        raise InputError(f"{len(texts)} symmetry operations: a space group has at most {MOST_OPERATIONS}")
    try:
        operations = gemmi.GroupOps([gemmi.Op(text) for text in texts])
        found = gemmi.find_spacegroup_by_ops(operations)
    except (RuntimeError, ValueError) as error:
        raise InputError(f"the symmetry operations cannot be read: {error}") from None
    if found is None:
        raise InputError(
            f"the {len(texts)} symmetry operations belong to no tabulated setting of a space group",
            hint="transform the structure to a standard setting (International Tables A)",
        )
    return space_group(found.xhm())


def _by_hall(hall: str) -> SpaceGroup | None:
    import gemmi

    try:
        found = gemmi.find_spacegroup_by_ops(gemmi.symops_from_hall(hall))
    except (RuntimeError, ValueError):
        return None
    return None if found is None else space_group(found.xhm())
