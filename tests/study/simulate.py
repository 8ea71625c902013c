"""Measured lists with known truth, from an error model richer than the matcher's own.

Every quantity of the experiment is drawn for each list from `Experiment.draw`; the distributions are stated
there, once. One seed (a tuple of whole numbers) gives one list, always the same.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType, allowed_n, multiplicity
from phasedb.crystal.phases import DRIFT_CLASSES, PhaseTable
from phasedb.crystal.radiation import W_L_ALPHA1_ANGSTROM, d_from_two_theta
from phasedb.errors import InputError
from phasedb.measured.building import build_peak_list
from phasedb.measured.peaklist import PeakList
from study.experiment import Experiment
from study.library import without
from study.physics import (
    lorentz_polarisation,
    march_dollase,
    shift_deg,
    two_theta,
    width_deg,
)
from study.truth import Case, FloatArray, TruePhase, Truth

LEAST_LINES = 3
"""Each phase of a sample leaves at least this many lines in the list: with fewer no one could name it."""


@dataclass(slots=True)
class Lines:
    """Lines on their way to a list: true 2theta, relative intensity and who owns them."""

    two_theta_deg: FloatArray
    intensity: FloatArray
    owners: list[tuple[str, ...]] = field(default_factory=list)

    def add(self, two_theta_deg: FloatArray, intensity: FloatArray, owner: tuple[str, ...]) -> None:
        self.two_theta_deg = np.concatenate([self.two_theta_deg, two_theta_deg])
        self.intensity = np.concatenate([self.intensity, intensity])
        self.owners += [owner] * len(two_theta_deg)

    def pick(self, rows: np.ndarray) -> Lines:
        index = np.flatnonzero(rows) if rows.dtype == bool else rows
        return Lines(self.two_theta_deg[index], self.intensity[index], [self.owners[i] for i in index])


def simulate(
    table: PhaseTable,
    n_phases: int,
    seed: tuple[int, ...],
    *,
    with_intensity: bool = True,
    d_only: bool = False,
    remove: int = 0,
    experiment: Experiment | None = None,
) -> Case:
    """Return a list of a sample of `n_phases` phases of `table`.

    `remove` true phases are taken out of the table that the matcher gets. `experiment` fixes the
    measurement, which is drawn else. Entries recorded far from room temperature are never drawn.
    """
    rng = np.random.default_rng(seed)
    rows = room_temperature_rows(table)
    for _ in range(200):
        setting = experiment or Experiment.draw(rng)
        picked = rng.choice(rows, size=n_phases, replace=False)
        shares = rng.permutation(
            np.concatenate([[1.0], np.exp(rng.uniform(np.log(0.05), 0.0, n_phases - 1))])
        )
        drifts = np.array([draw_drift(table, int(row), rng) for row in picked])
        case = make_list(
            table, picked, table.a_angstrom[picked] * (1.0 + drifts), shares, setting, rng,
            seed=seed, with_intensity=with_intensity, d_only=d_only, remove=remove,
        )  # fmt: skip
        if case is not None and all(phase.lines_seen >= LEAST_LINES for phase in case.truth.phases):
            return case
    raise RuntimeError(f"no list in 200 trials for seed {seed}")


def room_temperature_rows(table: PhaseTable) -> np.ndarray:
    """Return the rows recorded near room temperature (or at none stated)."""
    known = np.isfinite(table.temperature_k)
    return np.flatnonzero(~known | (np.abs(np.where(known, table.temperature_k, 298.0) - 298.0) <= 25.0))


def draw_drift(table: PhaseTable, row: int, rng: np.random.Generator) -> float:
    """Return (true a - stored a) / stored a of a sample of this entry, by its drift class."""
    kind = DRIFT_CLASSES[int(table.drift[row])]
    if kind == "line compound":
        return float(np.clip(2e-4 * rng.standard_t(4), -2e-3, 2e-3))
    low, high = table.a_low_angstrom[row], table.a_high_angstrom[row]
    if np.isfinite(low) and np.isfinite(high):
        return float(rng.uniform(low, high) / table.a_angstrom[row] - 1.0)
    if kind == "alloy" and rng.random() < 0.5:
        return float(8e-4 * rng.standard_normal())
    if rng.random() < 0.5:
        return float(np.clip(rng.laplace(0.0, 0.003), -0.01, 0.01))
    size = min(float(rng.lognormal(np.log(2e-3), 0.8)), 0.01)
    return size if rng.random() < 0.5 else -size


def phase_lines(table: PhaseTable, row: int, rng: np.random.Generator) -> tuple[np.ndarray, FloatArray]:
    """Return N and strength of a phase; one without a structure borrows those of a similar entry."""
    if table.line_start[row] == table.line_start[row + 1]:
        counts = np.diff(table.line_start)
        similar = np.flatnonzero((table.lattice == table.lattice[row]) & (counts > 0))
        if not len(similar):
            return _plain_lines(LATTICE_TYPES[int(table.lattice[row])], float(table.a_angstrom[row]))
        ratio = np.abs(np.log(table.a_angstrom[similar] / table.a_angstrom[row]))
        row = int(rng.choice(similar[np.argsort(ratio)[:12]]))
    part = slice(int(table.line_start[row]), int(table.line_start[row + 1]))
    return table.line_n[part].astype(np.int64), table.line_strength[part]


def _plain_lines(lattice: LatticeType, a: float) -> tuple[np.ndarray, FloatArray]:
    n = allowed_n(lattice, int((2.0 * a) ** 2))
    planes = np.array([multiplicity(lattice, int(value)) for value in n], dtype=float)
    return n, planes * np.exp(-4.0 * n / (2.0 * a) ** 2)


def make_list(
    table: PhaseTable,
    rows: np.ndarray,
    a_true: FloatArray,
    shares: FloatArray,
    setting: Experiment,
    rng: np.random.Generator,
    *,
    seed: tuple[int, ...] = (),
    with_intensity: bool = True,
    d_only: bool = False,
    remove: int = 0,
) -> Case | None:
    """Return the list of a given sample in a given experiment; None if nothing is left in it."""
    lines = Lines(np.empty(0), np.empty(0))
    for row, a, share in zip(rows, a_true, shares, strict=True):
        n, strength = phase_lines(table, int(row), rng)
        add_phase(lines, LATTICE_TYPES[int(table.lattice[row])], n, strength, float(a), float(share),
                  table.name[row], setting, rng)  # fmt: skip
    if not len(lines.intensity):
        return None
    measured = observe(lines, setting, rng, with_intensity=with_intensity, d_only=d_only)
    if measured is None:
        return None
    peaks, owners = measured
    names = [table.name[row] for row in rows]
    phases = tuple(
        TruePhase(
            name=name,
            lattice_type=LATTICE_TYPES[int(table.lattice[row])],
            a_stored=float(table.a_angstrom[row]),
            a_true=float(a),
            drift_class=DRIFT_CLASSES[int(table.drift[row])],
            share=float(share),
            removed=order < remove,
            lines_seen=sum(name in owner for owner in owners),
        )
        for order, (row, name, a, share) in enumerate(zip(rows, names, a_true, shares, strict=True))
    )
    return finish_case(table, peaks, owners, phases, setting, seed)


def finish_case(
    table: PhaseTable,
    peaks: PeakList,
    owners: tuple[tuple[str, ...], ...],
    phases: tuple[TruePhase, ...],
    setting: Experiment,
    seed: tuple[int, ...],
    note: str = "",
) -> Case:
    """Return the case; the removed phases are no longer in its table."""
    angle = two_theta(peaks.d_angstrom, setting.declared.wavelength_angstrom)
    truth = Truth(
        seed=seed,
        phases=phases,
        setting=setting,
        owners=owners,
        shift_at_lines_deg=shift_deg(angle, setting.zero_deg, setting.displacement_mm, setting.radius_mm),
        note=note,
    )
    gone = [phase.name for phase in phases if phase.removed]
    return Case(peaks, without(table, gone) if gone else table, truth)


def add_phase(
    lines: Lines,
    lattice: LatticeType,
    n: np.ndarray,
    strength: FloatArray,
    a: float,
    share: float,
    name: str,
    setting: Experiment,
    rng: np.random.Generator,
) -> None:
    """Add the lines of one cubic phase: strongest line in range `share`, then texture and scatter."""
    d = a / np.sqrt(n)
    angle = two_theta(d, setting.physical_alpha1)
    inside = np.isfinite(angle) & (angle < 165.0)
    n, strength, d, angle = n[inside], strength[inside], d[inside], angle[inside]
    intensity = strength * lorentz_polarisation(angle, setting.monochromator_cos2)
    intensity = intensity * np.exp(-rng.uniform(-0.15, 0.5) / (2.0 * d**2) + setting.tilt * angle / 100.0)
    scale = intensity[(angle > setting.low) & (angle < setting.high)]
    if not len(scale) or not scale.max() > 0.0:
        return
    intensity = share * intensity / scale.max()
    weak = intensity > 1e-4
    n, d, intensity = n[weak], d[weak], intensity[weak]
    axis, r = setting.draw_texture(rng)
    if r != 1.0:
        intensity = intensity * march_dollase(n, lattice, axis, r)
    intensity = intensity * np.exp(setting.intensity_spread * rng.standard_normal(len(n)))
    add_diffracted(lines, d, intensity, name, setting)


def add_diffracted(
    lines: Lines, d: FloatArray, intensity: FloatArray, name: str, setting: Experiment
) -> None:
    """Add the reflections d of one phase as maxima: K-alpha as the width resolves it, and the ghosts."""
    angle = two_theta(d, setting.physical_alpha1)
    keep = np.isfinite(angle)
    d, intensity, angle = d[keep], intensity[keep], angle[keep]
    main, second, resolved = setting.maxima(d)
    lines.add(main, intensity, (name,))
    if setting.monochromatic:
        return
    if setting.lists_alpha2:
        split = (resolved > 0.8) & np.isfinite(second)
        lines.add(second[split], 0.48 * intensity[split], (f"{name}|k_alpha2",))
    for kind, wavelength, ratio in (
        ("k_beta", setting.emission.beta, setting.beta_ratio),
        ("w_l_alpha", W_L_ALPHA1_ANGSTROM, setting.tungsten_ratio),
    ):
        if ratio > 0.0:
            ghost = two_theta(d, wavelength)
            exists = np.isfinite(ghost)
            lines.add(ghost[exists], ratio * intensity[exists], (f"{name}|{kind}",))


def observe(
    lines: Lines, setting: Experiment, rng: np.random.Generator, *, with_intensity: bool, d_only: bool
) -> tuple[PeakList, tuple[tuple[str, ...], ...]] | None:
    """Return the list as the analyst has it, and the owners of its lines: merge, cut, scatter, round."""
    shifted = lines.two_theta_deg + shift_deg(
        lines.two_theta_deg, setting.zero_deg, setting.displacement_mm, setting.radius_mm
    )
    lines = Lines(shifted, lines.intensity, lines.owners)
    lines = lines.pick((shifted > setting.low) & (shifted < setting.high))
    lines = merge(lines, setting)
    if not len(lines.intensity):
        return None
    floor = setting.floor * lines.intensity.max()
    seen = lines.intensity * np.exp(0.25 * rng.standard_normal(len(lines.owners))) > floor
    seen &= rng.random(len(seen)) > setting.lost
    lines = lines.pick(seen)
    if not len(lines.intensity):
        return None
    strongest = lines.intensity.max()
    relative = np.clip(lines.intensity / strongest, setting.floor, 1.0)
    scatter = setting.noise_deg * rng.standard_t(5, len(relative)) * np.sqrt(3.0 / 5.0)
    scatter = scatter * (1.0 + 0.5 * (relative < 4.0 * setting.floor))
    lines.two_theta_deg = lines.two_theta_deg + scatter
    spurious = rng.uniform(setting.low, setting.high, setting.n_spurious)
    height = strongest * np.exp(rng.uniform(np.log(setting.floor), np.log(0.4), setting.n_spurious))
    lines.add(spurious, height, ())
    order = np.argsort(lines.two_theta_deg)
    lines = lines.pick(order)
    lines = lines.pick((lines.two_theta_deg > setting.low) & (lines.two_theta_deg < setting.high))
    return hand_over(lines, setting, rng, with_intensity=with_intensity, d_only=d_only)


def merge(lines: Lines, setting: Experiment) -> Lines:
    """Return lines with those closer than the resolution made one, at their intensity-weighted mean."""
    lines = lines.pick(np.argsort(lines.two_theta_deg))
    width = width_deg(lines.two_theta_deg, setting.fwhm_deg, setting.size_deg)
    groups: list[list[int]] = []
    for row in range(len(width)):
        reach = max(0.02, setting.resolution * width[row])
        if groups and lines.two_theta_deg[row] - lines.two_theta_deg[groups[-1][0]] < reach:
            groups[-1].append(row)
        else:
            groups.append([row])
    merged = Lines(np.empty(0), np.empty(0))
    for group in groups:
        weight = lines.intensity[group]
        total = float(weight.sum())
        owners = [name for row in group if lines.intensity[row] > 0.15 * total for name in lines.owners[row]]
        position = float(weight @ lines.two_theta_deg[group]) / total
        merged.add(np.array([position]), np.array([total]), tuple(dict.fromkeys(owners)))
    return merged


def hand_over(
    lines: Lines, setting: Experiment, rng: np.random.Generator, *, with_intensity: bool, d_only: bool
) -> tuple[PeakList, tuple[tuple[str, ...], ...]] | None:
    """Return what the analyst types in: rounded positions, in 2theta or d, and what else the list carries."""
    wavelength = setting.declared.wavelength_angstrom
    position = lines.two_theta_deg
    fwhm = width_deg(position, setting.fwhm_deg, setting.size_deg) if setting.gives_fwhm else None
    if fwhm is not None:
        fwhm = fwhm * np.exp(0.08 * rng.standard_normal(len(fwhm)))
    limits = (setting.low, setting.high)
    as_d = d_only or setting.as_d
    if as_d:
        position = d_from_two_theta(position, wavelength)
        limits = (
            float(d_from_two_theta(limits[1], wavelength)),
            float(d_from_two_theta(limits[0], wavelength)),
        )
        position = np.round(position, setting.d_decimals)
    elif setting.step_deg > 0.0:
        position = np.round(np.round(position / setting.step_deg) * setting.step_deg, 6)
    inside = (position >= limits[0]) & (position <= limits[1])
    position, lines = position[inside], lines.pick(inside)
    if not len(position):
        return None
    try:
        peaks = build_peak_list(
            position,
            unit="d" if as_d else "two-theta",
            intensity=np.round(100.0 * lines.intensity / lines.intensity.max(), 2).clip(0.01)
            if with_intensity
            else None,
            fwhm=None if fwhm is None or d_only else fwhm[inside],
            fwhm_in_deg=True,
            radiation=None if d_only else setting.declared,
            measured_range=limits if setting.gives_range else None,
            goniometer_radius_mm=setting.radius_mm if setting.gives_radius else None,
            source="simulated",
        )
    except InputError:
        return None
    owners: list[list[str]] = [[] for _ in range(len(peaks))]
    nearest = np.argmin(np.abs(np.log(position[:, None] / peaks.position[None, :])), axis=1)
    for row, target in enumerate(nearest):
        owners[target] += lines.owners[row]
    return peaks, tuple(tuple(dict.fromkeys(owner)) for owner in owners)


def random_list(table: PhaseTable, seed: tuple[int, ...], *, with_intensity: bool = True) -> Case:
    """Return a list of 4 to 25 lines that no phase gave."""
    rng = np.random.default_rng(seed)
    while True:
        setting = Experiment.draw(rng)
        count = int(rng.integers(4, 26))
        height = np.exp(rng.uniform(np.log(setting.floor), 0.0, count))
        angle = np.sort(rng.uniform(setting.low, setting.high, count))
        lines = merge(Lines(angle, height, [()] * count), setting)
        measured = hand_over(lines, setting, rng, with_intensity=with_intensity, d_only=False)
        if measured is not None and len(measured[0]) >= 4:
            return finish_case(table, *measured, (), setting, seed, "random lines")


def sample(
    table: PhaseTable,
    contents: dict[str, tuple[float | None, float]],
    setting: Experiment,
    *,
    seed: int = 1,
    with_intensity: bool = True,
    removed: tuple[str, ...] = (),
) -> Case:
    """Return the list of a stated sample: name -> (a in Å or None for the stored one, share).

    The entries called `removed` are in the sample but not in the table of the case.
    """
    names = sorted(contents, key=lambda name: name not in removed)
    rows = np.array([table.name.index(name) for name in names])
    a_true = np.array(
        [contents[name][0] or table.a_angstrom[row] for name, row in zip(names, rows, strict=True)]
    )
    case = make_list(
        table, rows, a_true, np.array([contents[name][1] for name in names]), setting,
        np.random.default_rng(seed), seed=(seed,), with_intensity=with_intensity, remove=len(removed),
    )  # fmt: skip
    if case is None:
        raise ValueError("this sample leaves no line in the range")
    return case
