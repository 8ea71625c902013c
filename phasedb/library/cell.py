"""What follows from the cell of an entry, as far as its sites or its formula units are known."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from phasedb.crystal.solid import Solid
    from phasedb.library.entry import Entry


def cell_of(entry: Entry) -> Solid:
    """Return what follows from the cell of an entry."""
    from phasedb.crystal.solid import solid_of

    return solid_of(entry.phase())
