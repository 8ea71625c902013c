"""A stored phase, and many of them as columns: what the matcher takes instead of a database."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, fields
from typing import Final, Literal, Self, get_args

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType

DriftClass = Literal["line compound", "alloy", "solid solution"]
DRIFT_CLASSES: Final[tuple[DriftClass, ...]] = get_args(DriftClass)
Standing = Literal["draft", "checked", "withdrawn"]
STANDINGS: Final[tuple[Standing, ...]] = get_args(Standing)


@dataclass(frozen=True, slots=True)
class Site:
    """One crystallographic site of the asymmetric unit.

    Attributes
    ----------
    label : str
    species : tuple of (element symbol, occupancy)
        Occupancies are site fractions, 0 to 1 each; their sum may be below 1 (vacancies).
    position : (x, y, z)
        Fractional coordinates of one representative position.
    b_iso : float
        Isotropic displacement parameter B, Å².
    """

    label: str
    species: tuple[tuple[str, float], ...]
    position: tuple[float, float, float]
    b_iso: float = 0.5


@dataclass(frozen=True, slots=True)
class Structure:
    """Space group and sites. `assumed` names each free parameter that is typical of the type, not sourced."""

    space_group: str
    sites: tuple[Site, ...]
    assumed: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Phase:
    """What the library holds of one phase, as far as science needs it."""

    name: str
    formula: str
    lattice_type: LatticeType
    a_angstrom: float
    a_esd_angstrom: float | None = None
    temperature_k: float | None = None
    expansion_per_k: float | None = None
    structure_type: str | None = None
    structure: Structure | None = None
    drift_class: DriftClass = "line compound"
    a_range_angstrom: tuple[float, float] | None = None
    measured_density_g_cm3: float | None = None
    formula_units_per_cell: float | None = None
    standing: Standing = "draft"
    tags: tuple[str, ...] = ()
    elements: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class PhaseTable:
    """Phases as columns (NumPy arrays), in a fixed order that no result depends on.

    Attributes
    ----------
    name, formula, structure_type, standing : tuple of str, length n_phases (structure_type "" if none)
    lattice : (n_phases,) int8, index into LATTICE_TYPES
    a_angstrom : (n_phases,) float64, Å
    a_esd_angstrom : (n_phases,) float64, Å; NaN unknown
    temperature_k : (n_phases,) float64, K; NaN unknown
    expansion_per_k : (n_phases,) float64, 1/K, linear; NaN unknown
    drift : (n_phases,) int8, index into DRIFT_CLASSES
    a_low_angstrom, a_high_angstrom : (n_phases,) float64, Å; NaN without a stated range
    elements : tuple of tuple of str
    is_starter : (n_phases,) bool
    line_start : (n_phases + 1,) int64
        Lines of phase i are line_start[i]:line_start[i+1] in the next two; none if its structure is unknown.
    line_n : (n_lines,) int32, N = h²+k²+l², ascending for each phase
    line_strength : (n_lines,) float64
        Sum over the families of N of multiplicity times |F|² (X-ray, electrons², one cell), without
        Lorentz-polarisation; absences are left out or 0.
    """

    name: tuple[str, ...]
    formula: tuple[str, ...]
    structure_type: tuple[str, ...]
    standing: tuple[str, ...]
    lattice: NDArray[np.int8]
    a_angstrom: NDArray[np.float64]
    a_esd_angstrom: NDArray[np.float64]
    temperature_k: NDArray[np.float64]
    expansion_per_k: NDArray[np.float64]
    drift: NDArray[np.int8]
    a_low_angstrom: NDArray[np.float64]
    a_high_angstrom: NDArray[np.float64]
    elements: tuple[tuple[str, ...], ...]
    is_starter: NDArray[np.bool_]
    line_start: NDArray[np.int64]
    line_n: NDArray[np.int32]
    line_strength: NDArray[np.float64]

    def __post_init__(self) -> None:
        for column in fields(self):
            value = getattr(self, column.name)
            if isinstance(value, np.ndarray):
                value.flags.writeable = False

    def __len__(self) -> int:
        return len(self.name)

    @classmethod
    def from_phases(
        cls,
        phases: Iterable[Phase],
        lines: Sequence[tuple[NDArray[np.int32], NDArray[np.float64]] | None] | None = None,
    ) -> Self:
        """Return the table of `phases`; `lines` gives (N, strength) for each, or None where unknown."""
        rows = list(phases)
        ragged = list(lines) if lines is not None else [None] * len(rows)
        counts = [0 if entry is None else len(entry[0]) for entry in ragged]
        known = [entry for entry in ragged if entry is not None]

        def column(values: Iterable[float | None]) -> NDArray[np.float64]:
            return np.array([np.nan if value is None else value for value in values], dtype=np.float64)

        return cls(
            name=tuple(row.name for row in rows),
            formula=tuple(row.formula for row in rows),
            structure_type=tuple(row.structure_type or "" for row in rows),
            standing=tuple(row.standing for row in rows),
            lattice=np.array([LATTICE_TYPES.index(row.lattice_type) for row in rows], dtype=np.int8),
            a_angstrom=column(row.a_angstrom for row in rows),
            a_esd_angstrom=column(row.a_esd_angstrom for row in rows),
            temperature_k=column(row.temperature_k for row in rows),
            expansion_per_k=column(row.expansion_per_k for row in rows),
            drift=np.array([DRIFT_CLASSES.index(row.drift_class) for row in rows], dtype=np.int8),
            a_low_angstrom=column(row.a_range_angstrom[0] if row.a_range_angstrom else None for row in rows),
            a_high_angstrom=column(row.a_range_angstrom[1] if row.a_range_angstrom else None for row in rows),
            elements=tuple(row.elements for row in rows),
            is_starter=np.array(["starter" in row.tags for row in rows], dtype=np.bool_),
            line_start=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
            line_n=np.concatenate([np.array([], dtype=np.int32), *(entry[0] for entry in known)]),
            line_strength=np.concatenate([np.array([]), *(entry[1] for entry in known)]),
        )
