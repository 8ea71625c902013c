"""Warnings at the door: what looks wrong with a new value, with the numbers and the likely cause."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import sqlalchemy as sa

from phasedb.crystal.quantity import KX_IN_ANGSTROM
from phasedb.library import tables
from phasedb.library.entry import Draft, Entry
from phasedb.library.preparing import Prepared, entry_of

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

NEAR_RELATIVE: Final = 5e-4
NEAR_ESDS: Final = 3.0
KX_WITHIN: Final = 3e-4
"""How near two values' ratio must come to the kX factor to be called a slip of unit."""

_P = tables.phase.c
NAMED_AT_MOST: Final = 3
_CHANGES_THAT_COUNT: Final = (
    "formula",
    "lattice_type",
    "a_angstrom",
    "a_esd_angstrom",
    "structure_type",
    "free_parameters",
    "sites",
    "formula_units_per_cell",
    "measured_density_g_cm3",
)


@dataclass(frozen=True, slots=True)
class Warned:
    """One warning: a short kind for programs, the sentence for people."""

    kind: str
    text: str


def accepted_text(warnings: Sequence[Warned]) -> str:
    """Return how the history records warnings that were accepted."""
    return "; ".join(f"accepted warning: {warning.text}" for warning in warnings)


def warnings_for(
    connection: Connection, prepared: Prepared, *, own_id: int | None = None, before: Entry | None = None
) -> tuple[Warned, ...]:
    """Return the warnings of a new or changed entry.

    A change is judged only if it touches what the warnings are about, so that an accepted warning is not
    asked for again with each later remark.
    """
    content = prepared.content
    if before is not None and all(
        getattr(content, name) == getattr(before.content, name) for name in _CHANGES_THAT_COUNT
    ):
        return ()
    return (
        *_neighbours(connection, prepared, own_id),
        *physics_warnings(prepared),
    )


def nearness(a: float, esd: float | None, other: float, other_esd: float | None) -> tuple[float, float]:
    """Return the relative difference (other to a) and the limit under which two values count as close."""
    combined = math.hypot(esd or 0.0, other_esd or 0.0)
    return a / other - 1.0, max(NEAR_ESDS * combined / a, NEAR_RELATIVE)


def _neighbours(connection: Connection, prepared: Prepared, own_id: int | None) -> list[Warned]:
    content = prepared.content
    a, esd = content.a_angstrom, content.a_esd_angstrom
    # the widest window that any comparison needs, with stored esds up to 0.4 % of a
    margin = NEAR_ESDS * (esd or 0.0) / a + 0.012
    query = sa.select(
        _P.id, _P.name, _P.a_angstrom, _P.a_esd_angstrom, _P.formula_key, _P.standing, _P.formula
    ).where(
        _P.lattice_type == content.lattice_type,
        _P.a_angstrom >= a * (1 - margin),
        _P.a_angstrom <= a * (1 + margin),
        _P.standing != "withdrawn",
    )
    if own_id is not None:
        query = query.where(_P.id != own_id)
    rows = connection.execute(query).all()
    found = []
    near = []
    for row in rows:
        difference, limit = nearness(a, esd, row.a_angstrom, row.a_esd_angstrom)
        same = row.formula_key == prepared.formula_key
        if same and _is_kx_apart(difference):
            found.append(Warned("kx", kx_text(content, row.name, difference)))
        elif abs(difference) <= limit:
            near.append((not same, abs(difference), difference, row))
    named = sorted(near, key=lambda item: (item[0], item[1], item[3].name))[:NAMED_AT_MOST]
    for other, _, difference, row in named:
        text = near_text(content, row.name, row.formula, row.a_angstrom, difference, same=not other)
        found.append(Warned("near", text))
    if len(near) > NAMED_AT_MOST:
        found.append(more_near(len(near) - NAMED_AT_MOST))
    return found


def more_near(count: int) -> Warned:
    return Warned("near", f"{count} more {'entry lies' if count == 1 else 'entries lie'} as close")


def _is_kx_apart(difference: float) -> bool:
    ratio = 1.0 + difference
    return min(abs(ratio * KX_IN_ANGSTROM - 1.0), abs(ratio / KX_IN_ANGSTROM - 1.0)) <= KX_WITHIN


def kx_text(content: Draft, other: str, difference: float) -> str:
    side = "below" if difference < 0 else "above"
    slip = (
        "kX typed as Å?" if difference < 0 else "is the stored value in kX, or was this one converted twice?"
    )
    return (
        f"{content.a_angstrom:.10g} is {abs(difference):.2%} {side} {other!r}, same formula: {slip}".replace(
            "%", " %"
        )
    )


def near_text(content: Draft, other: str, formula: str, a: float, difference: float, *, same: bool) -> str:
    likely = "the same phase entered twice?" if same else "line positions alone will not tell them apart"
    return (
        f"{content.a_angstrom:.10g} Å is within {100 * abs(difference):.3f} % of {other!r} "
        f"({formula}, {content.lattice_type}, {a:.10g} Å): {likely}"
    )


def physics_warnings(prepared: Prepared) -> list[Warned]:
    """Return what the physics of the cell has against the values; needs no store."""
    from phasedb.crystal.checks import findings_of

    found = []
    if prepared.structure_problem:
        found.append(
            Warned(
                "structure",
                f"the structure type {prepared.content.structure_type} cannot hold "
                f"{prepared.content.formula}: {prepared.structure_problem}",
            )
        )
    phase = entry_of(prepared, uid="", by="", at="").phase()
    found += [Warned(finding.kind, finding.text) for finding in findings_of(phase)]
    return found
