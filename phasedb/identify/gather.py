"""Which entries of a large library to consider: those near the places that the votes point to.

A small library is read whole. A large one is asked, through its index on (lattice type, a), for the entries
near every place of the ln a axis where an unlisted phase would explain lines; where a window holds more
entries than are read, each one read stands for several.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any, Final, Protocol

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType
from phasedb.crystal.phases import DRIFT_CLASSES, PhaseTable
from phasedb.identify.axis import Axis
from phasedb.identify.entries import DRIFT_SCALE, prepare
from phasedb.identify.search import SAME_PLACE, Search
from phasedb.identify.settings import MatchSettings

FloatArray = NDArray[np.float64]

READ_WHOLE: Final = 3000  # entries: a larger library is asked for windows
WINDOW: Final = 0.0105  # ln a: half width, a little beyond the largest drift
MOST_OF_A_WINDOW: Final = 60
MOST_PLACES: Final = 30
PLACES_OF_EACH_LATTICE: Final = 10
NEAR_BEST: Final = 25.0  # nats: places of sets this good are asked for


class PhaseSource(Protocol):
    """A library that gives its phases whole, or by window of a."""

    @property
    def phase_count(self) -> int: ...
    @property
    def fingerprint(self) -> str: ...
    def table(self, *, checked_only: bool = False) -> PhaseTable: ...
    def within(
        self,
        lattice: LatticeType,
        a_low: float,
        a_high: float,
        *,
        centre: float | None = None,
        limit: int,
        checked_only: bool = False,
    ) -> tuple[PhaseTable, int]: ...


@dataclass(frozen=True, slots=True)
class Gathered:
    """Entries to consider; each stands for `crowd` (n_phases,) entries of the library."""

    table: PhaseTable
    crowd: FloatArray


def gather(axis: Axis, source: PhaseSource, settings: MatchSettings, temperature_k: float | None) -> Gathered:
    """Return the entries of `source` that could matter for the lines of `axis`."""
    if source.phase_count <= READ_WHOLE:
        table = source.table(checked_only=settings.checked_only)
        return Gathered(table, np.ones(len(table)))
    parts: list[PhaseTable] = []
    crowds: list[FloatArray] = []
    for lattice, ln_a in _places(axis, settings, temperature_k):
        found, count = source.within(
            LATTICE_TYPES[lattice],
            float(np.exp(ln_a - WINDOW)),
            float(np.exp(ln_a + WINDOW)),
            centre=float(np.exp(ln_a)),
            limit=MOST_OF_A_WINDOW,
            checked_only=settings.checked_only,
        )
        parts.append(found)
        crowds.append(_crowd(found, count))
    if settings.internal_standard is not None:
        parts.append(_named(source, settings))
        crowds.append(np.ones(len(parts[-1])))
    table = join_tables(parts)
    crowd = np.concatenate([*crowds, np.zeros(0)])
    first = _first_of_each_name(table.name)
    return Gathered(take_rows(table, first), crowd[first])


def _places(axis: Axis, settings: MatchSettings, temperature_k: float | None) -> list[tuple[int, float]]:
    """Return (lattice, ln a) of the places where an unlisted phase would explain lines, best first."""
    nothing = prepare(PhaseTable.from_phases([]), settings, temperature_k)
    search = Search(
        axis,
        nothing,
        settings.most_phases,
        places_of_each_lattice=PLACES_OF_EACH_LATTICE,
        zones_of_each_kind=0,
    )
    search.run()
    fits = sorted(search.sets(), key=lambda fit: (-fit.log_evidence, fit.key))
    best_single = [fit for fit in fits if len(fit.members) == 1][:20]
    good = [fit for fit in fits if fit.log_evidence > fits[0].log_evidence - NEAR_BEST][:60]
    places: list[tuple[int, float]] = []
    for fit in [*good, *best_single]:
        for member, ln_a in zip(fit.members, fit.ln_a.tolist(), strict=True):
            lattice = search.candidates.lattice_of[member]
            for related, offset in _relatives(lattice):
                place = ln_a + offset
                if all(related != known or abs(place - at) > SAME_PLACE for known, at in places):
                    places.append((related, place))
    return places[:MOST_PLACES]


def _relatives(lattice: int) -> list[tuple[int, float]]:
    """Return lattice types whose line sequence holds this one: F without odd lines is P(a/2), I(a) begins as
    P(a/sqrt 2)."""
    double, diagonal = float(np.log(2.0)), 0.5 * float(np.log(2.0))
    return {
        "P": [(0, 0.0), (2, double)],
        "I": [(1, 0.0), (0, 0.0), (0, -diagonal)],
        "F": [(2, 0.0), (0, 0.0), (0, -double)],
    }[LATTICE_TYPES[lattice]]


def _crowd(found: PhaseTable, count: int) -> FloatArray:
    """Return how many entries of the window each one read stands for, as their drift weighs them.

    Those read are the nearest; the rest of the window counts as far as the drift prior reaches: its density
    times the prior's width, shared by those read.
    """
    if count <= len(found) or len(found) == 0:
        return np.ones(len(found))
    scale = np.array([DRIFT_SCALE[name] for name in DRIFT_CLASSES])[found.drift]
    reach = np.minimum(np.sqrt(3.0) * np.pi / 2.0 * scale, 2.0 * WINDOW)
    crowd: FloatArray = np.maximum(count / (2.0 * WINDOW) * reach / len(found), 1.0)
    return crowd


def _named(source: PhaseSource, settings: MatchSettings) -> PhaseTable:
    """Return the internal standard as a table, or none of it: the caller says that it is missing."""
    get: Any = getattr(source, "get", None)
    if get is None:
        return PhaseTable.from_phases([])
    phase = get(settings.internal_standard).phase()
    found, _ = source.within(
        phase.lattice_type,
        phase.a_angstrom * (1 - 1e-9),
        phase.a_angstrom * (1 + 1e-9),
        limit=MOST_OF_A_WINDOW,
        checked_only=settings.checked_only,
    )
    return found


def _first_of_each_name(names: Sequence[str]) -> NDArray[np.int64]:
    return np.array(
        sorted({name: row for row, name in reversed(list(enumerate(names)))}.values()), dtype=np.int64
    )


def take_rows(table: PhaseTable, rows: NDArray[np.int64]) -> PhaseTable:
    """Return some rows of a table, in the order given."""
    counts = np.diff(table.line_start)[rows]
    start = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
    within = np.arange(int(counts.sum())) - np.repeat(start[:-1], counts)
    lines = within + np.repeat(table.line_start[rows], counts)
    columns: dict[str, Any] = {}
    for column in fields(PhaseTable):
        value = getattr(table, column.name)
        if column.name in ("line_n", "line_strength"):
            columns[column.name] = value[lines]
        elif column.name == "line_start":
            columns[column.name] = start
        elif isinstance(value, tuple):
            columns[column.name] = tuple(value[row] for row in rows.tolist())
        else:
            columns[column.name] = value[rows]
    return PhaseTable(**columns)


def join_tables(parts: Sequence[PhaseTable]) -> PhaseTable:
    """Return several tables as one."""
    parts = [*parts, PhaseTable.from_phases([])]
    offset = np.cumsum([0, *(int(part.line_start[-1]) for part in parts)])
    columns: dict[str, Any] = {}
    for column in fields(PhaseTable):
        values = [getattr(part, column.name) for part in parts]
        if column.name == "line_start":
            starts = [value[:-1] + shift for value, shift in zip(values, offset, strict=False)]
            columns[column.name] = np.concatenate([*starts, offset[-1:]]).astype(np.int64)
        elif isinstance(values[0], tuple):
            columns[column.name] = tuple(item for value in values for item in value)
        else:
            columns[column.name] = np.concatenate(values)
    return PhaseTable(**columns)
