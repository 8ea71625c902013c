"""Matches built by hand for whatever renders one: simulated lines, invented probabilities."""

from __future__ import annotations

import dataclasses

import numpy as np

from phasedb.crystal.lattice import LATTICE_TYPES, allowed_n, families
from phasedb.crystal.radiation import two_theta_from_d
from phasedb.identify.result import (
    AxisCurve,
    Claim,
    LedgerLine,
    Match,
    MeasurementInfo,
    MeritF,
    MeritM,
    PhaseResult,
    Shift,
    Unlisted,
    UnlistedCandidate,
)

WAVELENGTH = 1.5405929
ZERO, DISPLACEMENT, RADIUS = 0.021, 0.043, 185.0


def shift_at(two_theta):
    return ZERO - 2 * DISPLACEMENT / RADIUS * np.degrees(1) * np.cos(np.radians(two_theta) / 2)


def phase_lines(lattice, a, low, high):
    n = allowed_n(lattice, 120)
    two_theta = two_theta_from_d(a / np.sqrt(n), WAVELENGTH)
    keep = np.isfinite(two_theta) & (two_theta > low) & (two_theta < high)
    return n[keep], two_theta[keep]


def phase_result(name, formula, lattice, a, **changes):
    base = PhaseResult(
        name=name,
        formula=formula,
        lattice_type=lattice,
        structure_type="B1",
        standing="draft",
        probability=0.9981,
        group_probability=0.9990,
        look_alikes=(),
        look_alike_count=0,
        separated_by=(),
        expected_by_chance=0.00042,
        share=0.62,
        log10_odds=4.71,
        a_stored_angstrom=a,
        a_fitted_angstrom=a * 1.00012,
        a_fitted_esd_angstrom=0.00021,
        relative_shift=0.00012,
        lines_claimed=9,
        lines_expected=9.41,
        absences="structure",
        merit_f=MeritF(35.71, 9, 0.0210, 12, 9),
        merit_m=MeritM(88.2, 9, 12),
    )
    return dataclasses.replace(base, **changes)


def axis_curves(two_theta, points=4000):
    """The votes of every line for every allowed N, as a curve for each lattice type."""
    ln_a = np.linspace(np.log(2.5), np.log(13.0), points)
    ln_d = np.log(WAVELENGTH / 2 / np.sin(np.radians(two_theta) / 2))
    curves = []
    for lattice in LATTICE_TYPES:
        n = allowed_n(lattice, 60)
        centres = ln_d[:, None] + 0.5 * np.log(n)[None, :]
        nearest = np.abs(ln_a[None, :, None] - centres[:, None, :]).min(axis=2)
        evidence = np.log1p(40 * np.exp(-0.5 * (nearest / 8e-4) ** 2)).sum(axis=0) - 9.0
        curves.append(AxisCurve(lattice, tuple(ln_a.tolist()), tuple(evidence.tolist())))
    return tuple(curves)


def two_phase_match(seed=7, **changes):
    """Titanium nitride and alpha iron with two lines that nothing explains, from copper K-alpha."""
    rng = np.random.default_rng(seed)
    low, high = 30.0, 120.0
    rows = []
    for name, lattice, a, scale in (
        ("titanium nitride", "F", 4.2417, 100.0),
        ("alpha iron", "I", 2.8665, 64.0),
    ):
        numbers, ideal = phase_lines(lattice, a, low, high)
        for n, x in zip(numbers, ideal, strict=True):
            delta = float(rng.normal(0, 0.012))
            hkl = families(int(n), lattice)
            claim = Claim(name, hkl, "line", delta, -delta / 57 / 2 / np.tan(np.radians(x / 2)), 0.991)
            rows.append((x + delta, scale * float(rng.uniform(0.1, 1.0)), (claim,), 0.009))
    rows.append((58.311, 6.2, (), 1.0))
    rows.append((33.02, 3.1, (), 1.0))
    ghost = Claim("alpha iron", ((1, 1, 0),), "k_beta", 0.018, -0.0002, 0.83)
    rows.append((40.25, 2.0, (ghost,), 0.17))
    rows.sort(key=lambda row: row[0])
    ledger = tuple(
        LedgerLine(
            line=rank,
            position=float(x + shift_at(x)),
            corrected_position=float(x),
            two_theta_deg=float(x + shift_at(x)),
            d_angstrom=float(WAVELENGTH / 2 / np.sin(np.radians(x) / 2)),
            intensity=intensity,
            claims=claims,
            unexplained=unexplained,
        )
        for rank, (x, intensity, claims, unexplained) in enumerate(rows, 1)
    )
    at_lines = tuple(float(shift_at(line.corrected_position)) for line in ledger)
    base = Match(
        program_version="0.1.0",
        settings={"most_phases": 4, "elements": ["Ti", "N", "Fe"], "rank_by": "probability"},
        measurement=MeasurementInfo(
            source="coated_blade.csv",
            sha256="4f" * 32,
            wavelength_angstrom=WAVELENGTH,
            radiation="Cu",
            line_count=len(ledger),
            range_low=low,
            range_high=high,
            range_assumed=False,
            position_unit="two-theta",
            sample="blade 7, coated side",
        ),
        library_phase_count=364,
        library_fingerprint="9c1d" * 16,
        phases=(
            phase_result("titanium nitride", "TiN", "F", 4.2417),
            phase_result(
                "alpha iron",
                "Fe",
                "I",
                2.8665,
                structure_type="A2",
                probability=0.941,
                group_probability=0.9812,
                look_alikes=("iron-chromium (10 % Cr)", "maraging steel"),
                look_alike_count=2,
                separated_by=("the element Cr", "a line beyond 2theta 130 deg"),
                share=0.34,
                relative_shift=-0.00037,
                a_fitted_angstrom=2.86544,
                lines_claimed=6,
                lines_expected=6.2,
                merit_f=MeritF(51.02, 6, 0.0196, 6, 6),
                merit_m=MeritM(143.0, 6, 6),
            ),
            phase_result(
                "iron-chromium (10 % Cr)",
                "Fe0.9Cr0.1",
                "I",
                2.8702,
                probability=0.031,
                group_probability=0.9812,
                look_alikes=("alpha iron", "maraging steel"),
                look_alike_count=2,
                share=None,
                log10_odds=-1.49,
                merit_f=None,
                merit_m=None,
            ),
        ),
        unlisted=Unlisted(
            probability=0.082,
            best=UnlistedCandidate(
                probability=0.06,
                lattice_type="F",
                a_angstrom=4.3874,
                a_esd_angstrom=0.0021,
                nearest=(("vanadium carbide", 0.0526), ("titanium carbide", 0.0139)),
                lines_claimed=2,
                merit_f=None,
                merit_m=None,
            ),
            others=(),
        ),
        nothing_cubic=0.0,
        shift=Shift(
            zero_deg=ZERO,
            zero_esd_deg=0.014,
            displacement_mm=DISPLACEMENT,
            displacement_esd_mm=0.028,
            correlation=0.93,
            noise_deg=0.0124,
            noise_relative=None,
            scale_relative=None,
            scale_esd_relative=None,
            goniometer_radius_mm=RADIUS,
            radius_assumed=False,
            at_lines_deg=at_lines,
            at_lines_esd_deg=tuple(0.004 for _ in at_lines),
        ),
        ledger=ledger,
        cautions=("Starter entries are drafts: nobody here has checked them against their sources.",),
        axis=axis_curves(np.array([line.corrected_position for line in ledger])),
    )
    return dataclasses.replace(base, **changes)


def d_only_match():
    """The same lines as a list of d-spacings without a wavelength: no angles, no shift, no F_N."""
    base = two_phase_match()
    ledger = tuple(
        dataclasses.replace(
            line,
            position=line.d_angstrom,
            corrected_position=line.d_angstrom,
            two_theta_deg=None,
            intensity=None,
            claims=tuple(dataclasses.replace(claim, delta_two_theta_deg=None) for claim in line.claims),
        )
        for line in base.ledger
    )
    return dataclasses.replace(
        base,
        ledger=ledger,
        measurement=dataclasses.replace(
            base.measurement,
            wavelength_angstrom=None,
            radiation=None,
            position_unit="d",
            range_low=0.8,
            range_high=3.0,
            range_assumed=True,
        ),
        phases=tuple(dataclasses.replace(phase, merit_f=None, share=None) for phase in base.phases),
        shift=Shift(
            zero_deg=None,
            zero_esd_deg=None,
            displacement_mm=None,
            displacement_esd_mm=None,
            correlation=None,
            noise_deg=None,
            noise_relative=0.00041,
            scale_relative=0.0012,
            scale_esd_relative=0.0005,
            goniometer_radius_mm=None,
            radius_assumed=False,
            at_lines_deg=None,
            at_lines_esd_deg=None,
        ),
    )


def unlisted_match():
    """Nothing listed is found; a cubic phase that the library lacks explains the lines."""
    base = two_phase_match()
    best = UnlistedCandidate(
        probability=0.91,
        lattice_type="F",
        a_angstrom=4.3871,
        a_esd_angstrom=0.0004,
        nearest=(("titanium carbide", 0.0138), ("vanadium nitride", 0.0597)),
        lines_claimed=8,
        merit_f=MeritF(28.4, 8, 0.0250, 11, 9),
        merit_m=MeritM(61.0, 8, 11),
    )
    other = dataclasses.replace(best, probability=0.03, lattice_type="P", a_angstrom=2.1936)
    name = "unlisted F 4.3871"
    ledger = tuple(
        dataclasses.replace(
            line, claims=tuple(dataclasses.replace(claim, name=name) for claim in line.claims)
        )
        for line in base.ledger
    )
    return dataclasses.replace(
        base, phases=(), unlisted=Unlisted(0.94, best, (other,)), ledger=ledger, library_phase_count=364
    )


def foreign_script_match():
    """Names in scripts that the figures' font lacks."""
    base = two_phase_match()
    names = {"titanium nitride": "氮化钛 (コーティング)", "alpha iron": "حديد"}
    return dataclasses.replace(
        base,
        phases=tuple(dataclasses.replace(p, name=names.get(p.name, p.name)) for p in base.phases),
        ledger=tuple(
            dataclasses.replace(
                line,
                claims=tuple(dataclasses.replace(c, name=names[c.name]) for c in line.claims),
            )
            for line in base.ledger
        ),
    )


def nothing_match():
    base = two_phase_match()
    ledger = tuple(dataclasses.replace(line, claims=(), unexplained=1.0) for line in base.ledger)
    return dataclasses.replace(
        base, phases=(), unlisted=Unlisted(0.021, None, ()), nothing_cubic=0.976, ledger=ledger
    )


HOSTILE = "<script>alert(1)</script>\"'&{{7*7}}$x^2$\x1b[31m"


def hostile_match():
    """Everything that a user may name is an attempt to break out of the page."""
    base = two_phase_match()
    renamed = {
        "titanium nitride": HOSTILE,
        "alpha iron": "=cmd|' /C calc'!A0</style></svg><img src=x onerror=fail()>",
    }
    return dataclasses.replace(
        base,
        measurement=dataclasses.replace(base.measurement, source=HOSTILE, sample=HOSTILE, radiation=HOSTILE),
        settings={HOSTILE: HOSTILE},
        library_fingerprint=HOSTILE,
        phases=tuple(
            dataclasses.replace(
                phase,
                name=renamed.get(phase.name, phase.name),
                formula=HOSTILE,
                structure_type=HOSTILE,
                look_alikes=(HOSTILE,),
                separated_by=(HOSTILE,),
            )
            for phase in base.phases
        ),
        ledger=tuple(
            dataclasses.replace(
                line,
                claims=tuple(
                    dataclasses.replace(claim, name=renamed.get(claim.name, claim.name))
                    for claim in line.claims
                ),
            )
            for line in base.ledger
        ),
        cautions=(HOSTILE,),
    )
