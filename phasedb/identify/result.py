"""What a match says: frozen results, made once by the matcher and read by every report."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

from phasedb.crystal.lattice import Hkl, LatticeType

ClaimKind = Literal["line", "k_alpha2", "k_beta", "w_l_alpha", "foreign"]


@dataclass(frozen=True, slots=True)
class MeritF:
    """F_N of Smith & Snyder (1979), J. Appl. Cryst. 12, 60."""

    value: float
    n: int
    mean_abs_delta_two_theta_deg: float
    n_possible: int
    n_possible_in_range: int


@dataclass(frozen=True, slots=True)
class MeritM:
    """M_N of de Wolff (1968), J. Appl. Cryst. 1, 108."""

    value: float
    n: int
    n_possible: int


@dataclass(frozen=True, slots=True)
class PhaseResult:
    """One listed phase and how probable it is that the sample holds it."""

    name: str
    formula: str
    lattice_type: LatticeType
    structure_type: str | None
    standing: str
    probability: float
    group_probability: float
    look_alikes: tuple[str, ...]
    look_alike_count: int
    separated_by: tuple[str, ...]
    expected_by_chance: float
    share: float | None
    log10_odds: float
    a_stored_angstrom: float
    a_fitted_angstrom: float | None
    a_fitted_esd_angstrom: float | None
    relative_shift: float | None
    lines_claimed: int
    lines_expected: float
    absences: Literal["lattice", "space_group", "structure"]
    merit_f: MeritF | None
    merit_m: MeritM | None


@dataclass(frozen=True, slots=True)
class UnlistedCandidate:
    """A cubic phase that the library lacks, at one place of the lattice-constant axis."""

    probability: float
    lattice_type: LatticeType
    a_angstrom: float
    a_esd_angstrom: float | None
    nearest: tuple[tuple[str, float], ...]  # (name, (found - stored)/stored)
    lines_claimed: int
    merit_f: MeritF | None
    merit_m: MeritM | None


@dataclass(frozen=True, slots=True)
class Unlisted:
    """Posterior of the sets that hold an unlisted phase; `best` is None if no place stands out."""

    probability: float
    best: UnlistedCandidate | None
    others: tuple[UnlistedCandidate, ...]


@dataclass(frozen=True, slots=True)
class Shift:
    """The shared shift and noise of the list; None where the quantity does not exist (no wavelength)."""

    zero_deg: float | None
    zero_esd_deg: float | None
    displacement_mm: float | None
    displacement_esd_mm: float | None
    correlation: float | None
    noise_deg: float | None
    noise_relative: float | None
    scale_relative: float | None
    scale_esd_relative: float | None
    goniometer_radius_mm: float | None
    radius_assumed: bool
    at_lines_deg: tuple[float, ...] | None  # total shift at each ledger line, degrees
    at_lines_esd_deg: tuple[float, ...] | None


@dataclass(frozen=True, slots=True)
class Claim:
    """One phase's claim on a measured line. `name` is "unlisted P|I|F a" for an unlisted phase."""

    name: str
    hkl: tuple[Hkl, ...]
    kind: ClaimKind
    delta_two_theta_deg: float | None
    delta_relative: float
    probability: float


@dataclass(frozen=True, slots=True)
class LedgerLine:
    """One measured line and who claims it; `line` is its 1-based rank by position."""

    line: int
    position: float
    corrected_position: float
    two_theta_deg: float | None
    d_angstrom: float
    intensity: float | None
    claims: tuple[Claim, ...]
    unexplained: float


@dataclass(frozen=True, slots=True)
class AxisCurve:
    """Votes along the ln a axis for one lattice type: natural log of evidence against background."""

    lattice_type: LatticeType
    ln_a: tuple[float, ...]
    log_evidence: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class MeasurementInfo:
    source: str
    sha256: str
    wavelength_angstrom: float | None
    radiation: str | None
    line_count: int
    range_low: float
    range_high: float
    range_assumed: bool
    position_unit: str
    sample: str


@dataclass(frozen=True, slots=True)
class Match:
    """The whole answer of one match, made by `phasedb.identify.match`."""

    program_version: str
    settings: dict[str, Any]
    measurement: MeasurementInfo
    library_phase_count: int
    library_fingerprint: str
    phases: tuple[PhaseResult, ...]
    unlisted: Unlisted
    nothing_cubic: float
    shift: Shift
    ledger: tuple[LedgerLine, ...]
    cautions: tuple[str, ...]
    axis: tuple[AxisCurve, ...] = field(default=(), repr=False)
