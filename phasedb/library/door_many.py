"""The warnings of `phasedb.library.door` for many new entries at once: sorted arrays instead of queries."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import numpy as np
import sqlalchemy as sa
from numpy.typing import NDArray

from phasedb.crystal.quantity import KX_IN_ANGSTROM
from phasedb.library import door, tables
from phasedb.library.door import Warned
from phasedb.library.preparing import Prepared

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

_FEW: Final = 50
"""So few are asked of the store by windows of a, through its index, without reading everything."""

_WINDOW: Final = 0.012
"""Relative half width of such a window: holds the kX factor and neighbours with esds up to 0.4 % of a."""

_LOOKED_AT: Final = 4
"""How many positions to each side are compared; nearer ones come first, and three are named."""

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class _Columns:
    """Entries of one lattice type, the stored ones first, then the new ones in the order of the file."""

    a: Floats
    esd: Floats
    formula: Ints
    name: list[str]
    formula_text: list[str]
    n_stored: int


def warnings_for_many(connection: Connection, prepared: Sequence[Prepared]) -> list[tuple[Warned, ...]]:
    """Return the warnings of each new entry; those before it in the sequence count as neighbours too."""
    found: list[list[Warned]] = [[] for _ in prepared]
    for lattice in sorted({one.content.lattice_type for one in prepared}):
        places = [i for i, one in enumerate(prepared) if one.content.lattice_type == lattice]
        fresh = [prepared[i] for i in places]
        for number, warned in _neighbours(_columns(_stored(connection, lattice, fresh), fresh), fresh):
            found[places[number]].append(warned)
    return [(*near, *door.physics_warnings(one)) for near, one in zip(found, prepared, strict=True)]


def _stored(connection: Connection, lattice: str, fresh: Sequence[Prepared]) -> Sequence[Any]:
    """Return the rows of the store that the new ones may be compared with."""
    phase = tables.phase.c
    query = (
        sa.select(phase.a_angstrom, phase.a_esd_angstrom, phase.formula_key, phase.name, phase.formula)
        .where(phase.lattice_type == lattice, phase.standing != "withdrawn")
        .order_by(phase.name_key)
    )
    if len(fresh) <= _FEW:
        values = [one.content.a_angstrom for one in fresh]
        query = query.where(
            sa.or_(*(phase.a_angstrom.between(a * (1 - _WINDOW), a * (1 + _WINDOW)) for a in values))
        )
    return connection.execute(query).all()


def _columns(stored: Sequence[Any], fresh: Sequence[Prepared]) -> _Columns:
    numbers: dict[str, int] = {}
    keys = [*(row.formula_key for row in stored), *(one.formula_key for one in fresh)]
    contents = [one.content for one in fresh]
    return _Columns(
        a=np.array([*(row.a_angstrom for row in stored), *(c.a_angstrom for c in contents)], dtype=float),
        esd=np.array(
            [*(row.a_esd_angstrom or 0.0 for row in stored), *(c.a_esd_angstrom or 0.0 for c in contents)],
            dtype=float,
        ),
        formula=np.array([numbers.setdefault(key, len(numbers)) for key in keys], dtype=np.int64),
        name=[*(row.name for row in stored), *(c.name for c in contents)],
        formula_text=[*(row.formula for row in stored), *(c.formula for c in contents)],
        n_stored=len(stored),
    )


def _neighbours(columns: _Columns, fresh: Sequence[Prepared]) -> Iterator[tuple[int, Warned]]:
    """Yield (number of the new entry, warning), by entry, kX slips first, then the nearest."""
    n, a, formula = columns.n_stored, columns.a, columns.formula
    ln_a: Floats = np.log(a)
    by_formula: Floats = 1000.0 * formula + ln_a
    slip = float(np.log(KX_IN_ANGSTROM))
    pairs = _each_once([_beside(ln_a, n, 0.0), _beside(by_formula, n, 0.0)], len(a))
    slips = _each_once([_beside(by_formula, n, move) for move in (slip, -slip)], len(a))
    named: dict[int, list[Warned]] = defaultdict(list)
    one, other = slips.T
    apart = (formula[one] == formula[other]) & _is_kx_apart(a[one] / a[other])
    for i, j in slips[apart].tolist():
        text = door.kx_text(fresh[i - n].content, columns.name[j], a[i] / a[j] - 1.0)
        named[i].append(Warned("kx", text))
    for i, warned in _near(columns, pairs, fresh):
        named[i].extend(warned)
    for i in sorted(named):
        for warning in named[i]:
            yield i - n, warning


def _each_once(pairs: Sequence[Ints], size: int) -> Ints:
    """Return the pairs in order, each once; as single numbers they sort quickly."""
    one, other = np.concatenate(pairs).T
    return np.stack(np.divmod(np.unique(one * size + other), size), axis=1)


def _is_kx_apart(ratio: Floats) -> NDArray[np.bool_]:
    apart = np.minimum(np.abs(ratio * KX_IN_ANGSTROM - 1.0), np.abs(ratio / KX_IN_ANGSTROM - 1.0))
    return apart <= door.KX_WITHIN


def _beside(key: Floats, n_stored: int, offset: float) -> Ints:
    """Return pairs (new, other) that lie next to each other once the new one is moved by `offset`.

    The other is a stored entry, or one that comes before it in the file.
    """
    pairs = []
    numbers = np.arange(len(key))
    for rest, first in ((numbers[:n_stored], 0), (numbers[n_stored:], 1)):
        order = rest[np.argsort(key[rest], kind="stable")]
        at = np.searchsorted(key[order], key[n_stored:] + offset)
        for step in range(-_LOOKED_AT, _LOOKED_AT + first):
            place = at + step
            inside = (place >= 0) & (place < len(order))
            pair = np.stack([numbers[n_stored:][inside], order[place[inside]]], axis=1)
            pairs.append(pair[pair[:, 1] < pair[:, 0]])
    return np.concatenate(pairs)


def _near(columns: _Columns, pairs: Ints, fresh: Sequence[Prepared]) -> Iterator[tuple[int, list[Warned]]]:
    a, esd, formula, n = columns.a, columns.esd, columns.formula, columns.n_stored
    one, other = pairs.T
    difference = a[one] / a[other] - 1.0
    limit = np.maximum(door.NEAR_ESDS * np.hypot(esd[one], esd[other]) / a[one], door.NEAR_RELATIVE)
    same = formula[one] == formula[other]
    close = (np.abs(difference) <= limit) & ~(same & _is_kx_apart(a[one] / a[other]))
    pairs, difference, same = pairs[close], difference[close], same[close]
    if not len(pairs):
        return
    order = np.lexsort((pairs[:, 1], np.abs(difference), ~same, pairs[:, 0]))
    pairs, difference, same = pairs[order], difference[order], same[order]
    stored_a = np.sort(a[:n])
    owners, starts = np.unique(pairs[:, 0], return_index=True)
    ends = np.append(starts[1:], len(pairs))
    reach = door.NEAR_RELATIVE * a[owners]
    in_store = np.searchsorted(stored_a, a[owners] + reach, side="right")
    in_store -= np.searchsorted(stored_a, a[owners] - reach, side="left")
    for i, start, end, count in zip(
        owners.tolist(), starts.tolist(), ends.tolist(), in_store.tolist(), strict=True
    ):
        shown = range(start, min(end, start + door.NAMED_AT_MOST))
        content = fresh[i - n].content
        warned = []
        for p in shown:
            j = int(pairs[p, 1])
            text = door.near_text(
                content,
                columns.name[j],
                columns.formula_text[j],
                float(a[j]),
                float(difference[p]),
                same=bool(same[p]),
            )
            warned.append(Warned("near", text))
        more = max(count, end - start) - len(shown)
        if more > 0:
            warned.append(door.more_near(more))
        yield i, warned
