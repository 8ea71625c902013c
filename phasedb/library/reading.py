"""Reading the phase table for the matcher: columns straight from rows to arrays."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, Final

import numpy as np
import sqlalchemy as sa
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType
from phasedb.crystal.phases import DRIFT_CLASSES, Phase, PhaseTable
from phasedb.library import connect, mapping, tables

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

Lines = tuple[NDArray[np.int32], NDArray[np.float64]]

METHOD: Final = 1
"""Which way of computing line strengths a cached value came from; raise it when the computation changes."""

_NO_LINES: Final[Lines] = (np.zeros(0, dtype=np.int32), np.zeros(0, dtype=np.float64))
_IDS_AT_ONCE: Final = 500  # well below the variable limit of any SQLite in use
_LATTICE_CODE: Final = {name: code for code, name in enumerate(LATTICE_TYPES)}
_DRIFT_CODE: Final = {name: code for code, name in enumerate(DRIFT_CLASSES)}

_P = tables.phase.c
_COLUMNS: Final = (
    _P.id,
    _P.name_key,
    _P.name,
    _P.formula,
    _P.structure_type,
    _P.standing,
    _P.lattice_type,
    _P.a_angstrom,
    _P.a_esd_angstrom,
    _P.temperature_k,
    _P.expansion_per_k,
    _P.drift_class,
    _P.a_min_angstrom,
    _P.a_max_angstrom,
    _P.elements,
    sa.exists().where(tables.tag.c.phase_id == _P.id, tables.tag.c.tag == "starter").label("is_starter"),
    tables.strength_cache.c.n,
    tables.strength_cache.c.strength,
    # an entry with sites but without valid cached lines gets them computed on the fly
    sa.exists().where(tables.site.c.phase_id == _P.id).label("has_sites"),
)
_SELECT: Final = sa.select(*_COLUMNS).select_from(
    tables.phase.outerjoin(
        tables.strength_cache,
        sa.and_(tables.strength_cache.c.phase_id == _P.id, tables.strength_cache.c.method == METHOD),
    )
)


def _usable(*, checked_only: bool) -> sa.ColumnElement[bool]:
    return _P.standing == "checked" if checked_only else _P.standing != "withdrawn"


def read_table(connection: Connection, *, checked_only: bool) -> PhaseTable:
    """Return all entries that can be matched, sorted by name key."""
    query = _SELECT.where(_usable(checked_only=checked_only))
    rows = sorted(connection.execute(query).all(), key=lambda row: str(row.name_key))
    return _table(connection, rows)


def read_within(
    connection: Connection,
    lattice: LatticeType,
    a_low: float,
    a_high: float,
    *,
    centre: float | None,
    limit: int,
    checked_only: bool,
) -> tuple[PhaseTable, int]:
    """Return the nearest `limit` entries of a window of a, through the index on (lattice type, a)."""
    window = sa.and_(
        _P.lattice_type == lattice,
        _P.a_angstrom >= float(a_low),
        _P.a_angstrom <= float(a_high),
        _usable(checked_only=checked_only),
    )
    found = int(
        connection.execute(sa.select(sa.func.count()).select_from(tables.phase).where(window)).scalar_one()
    )
    if not found or limit <= 0:
        return _table(connection, []), found
    # The index alone answers which rows are nearest; only those are then read in full.
    start = float(a_low if centre is None else centre)
    distance = sa.func.abs(_P.a_angstrom - start)
    nearest = sa.select(distance).where(window).order_by(distance).limit(limit).subquery()
    furthest = connection.execute(sa.select(sa.func.max(nearest.c[0]))).scalar_one()
    ids = connection.execute(sa.select(_P.id).where(window, distance <= furthest)).scalars().all()
    rows: list[Any] = []
    for begin in range(0, len(ids), _IDS_AT_ONCE):
        rows += connection.execute(_SELECT.where(_P.id.in_(ids[begin : begin + _IDS_AT_ONCE]))).all()
    rows.sort(key=lambda row: (abs(row.a_angstrom - start), str(row.name_key)))
    return _table(connection, rows[:limit]), found


def _numbers(rows: Sequence[Any], name: str) -> NDArray[np.float64]:
    return np.array([getattr(row, name) for row in rows], dtype=np.float64)  # None becomes NaN


def _table(connection: Connection, rows: Sequence[Any]) -> PhaseTable:
    try:
        return _columns_of(connection, rows)
    except (ValueError, TypeError, KeyError, AttributeError) as error:
        raise connect.damaged_row(error) from error


def _columns_of(connection: Connection, rows: Sequence[Any]) -> PhaseTable:
    lines = [_cached(row) for row in rows]
    missing = [row.id for row, known in zip(rows, lines, strict=True) if known is None and row.has_sites]
    if missing:
        computed = _compute(connection, missing)
        lines = [
            computed.get(row.id) if known is None else known for row, known in zip(rows, lines, strict=True)
        ]
    counts = [0 if known is None else len(known[0]) for known in lines]
    given = [_NO_LINES, *(known for known in lines if known is not None)]
    return PhaseTable(
        name=tuple(row.name for row in rows),
        formula=tuple(row.formula for row in rows),
        structure_type=tuple(row.structure_type or "" for row in rows),
        standing=tuple(row.standing for row in rows),
        lattice=np.array([_LATTICE_CODE[row.lattice_type] for row in rows], dtype=np.int8),
        a_angstrom=_numbers(rows, "a_angstrom"),
        a_esd_angstrom=_numbers(rows, "a_esd_angstrom"),
        temperature_k=_numbers(rows, "temperature_k"),
        expansion_per_k=_numbers(rows, "expansion_per_k"),
        drift=np.array([_DRIFT_CODE[row.drift_class] for row in rows], dtype=np.int8),
        a_low_angstrom=_numbers(rows, "a_min_angstrom"),
        a_high_angstrom=_numbers(rows, "a_max_angstrom"),
        elements=tuple(tuple(row.elements.split()) for row in rows),
        is_starter=np.array([bool(row.is_starter) for row in rows], dtype=np.bool_),
        line_start=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        line_n=np.concatenate([known[0] for known in given]).astype(np.int32),
        line_strength=np.concatenate([known[1] for known in given]).astype(np.float64),
    )


# --- line strengths -------------------------------------------------------------------------------


def lines_of(phase: Phase) -> Lines | None:
    """Return N and line strength of a phase with a structure; None where they cannot be computed."""
    if phase.structure is None:
        return None
    from phasedb.crystal.intensity import line_strengths

    return line_strengths(phase)


def cache_values(phase_id: int, lines: Lines) -> dict[str, Any]:
    """Return the row of table strength_cache."""
    n = np.ascontiguousarray(lines[0], dtype="<i4").tobytes()
    strength = np.ascontiguousarray(lines[1], dtype="<f8").tobytes()
    return {
        "phase_id": phase_id,
        "method": METHOD,
        "n": n,
        "strength": strength,
        "checksum": cache_checksum(n, strength),
    }


def cache_checksum(n: bytes, strength: bytes) -> str:
    return hashlib.sha256(n + strength).hexdigest()


def _cached(row: Any) -> Lines | None:
    if row.n is None:
        return None
    return np.frombuffer(row.n, dtype="<i4"), np.frombuffer(row.strength, dtype="<f8")


def _compute(connection: Connection, ids: list[int]) -> dict[int, Lines | None]:
    found: dict[int, Lines | None] = {}
    for start in range(0, len(ids), _IDS_AT_ONCE):
        chosen = _P.id.in_(ids[start : start + _IDS_AT_ONCE])
        for phase_id, entry in mapping.load_entries(connection, chosen).items():
            found[phase_id] = lines_of(entry.phase())
    return found
