"""The ideal lines of an entry."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json
from phasedb.cli.completion import complete_phase

if TYPE_CHECKING:
    from phasedb.crystal.line_list import IdealLine
    from phasedb.crystal.phases import Phase
    from phasedb.crystal.radiation import Radiation


@click.command(
    epilog=examples(
        "phasedb lines silicon --radiation Cu-Ka1 --max-two-theta 100",
        "phasedb lines gold --radiation electron --energy-kv 200",
    )
)
@click.argument("name", shell_complete=complete_phase)
@click.option("--radiation", metavar="NAME", help="Cu (default), Co, Mo, Cr, Fe, Ag, Cu-Ka1, electron.")
@click.option("--wavelength", type=float, metavar="A", help="Wavelength in Å, instead of a name.")
@click.option("--energy-kv", type=float, metavar="KV", help="Electron energy in kV.")
@click.option("--monochromator", type=float, metavar="DEG", help="2theta of a crystal before the detector.")
@click.option("--max-two-theta", type=float, metavar="DEG", help="Where to stop (default 150).")
@json_option
@click.pass_context
def lines(
    ctx: click.Context,
    name: str,
    radiation: str | None,
    wavelength: float | None,
    energy_kv: float | None,
    monochromator: float | None,
    max_two_theta: float | None,
    as_json: bool,
) -> None:
    """Print the ideal lines of an entry: d, 2theta, hkl, multiplicity, intensity.

    Intensities run from 0 to 100, for a powder without texture, on K-alpha1 where a doublet is named; they
    are left open for an entry whose structure is not known. The list ends at d = 0.36 Å.
    """
    from phasedb.crystal.line_list import TWO_THETA_MAX_DEG, ideal_lines

    limit = _angle(max_two_theta, "--max-two-theta", TWO_THETA_MAX_DEG)
    beam = _radiation(radiation, wavelength, energy_kv)
    analyser = None if monochromator is None else _angle(monochromator, "--monochromator", 0.0)
    phase = open_library(ctx).get(name).phase()
    found = ideal_lines(phase, beam, two_theta_max_deg=limit, monochromator_two_theta_deg=analyser)
    if as_json:
        print_json(_document(phase, found))
        return
    _print(phase, beam, found)


def _angle(given: float | None, option: str, default: float) -> float:
    from phasedb.errors import InputError

    angle = default if given is None else given
    if not 0.0 < angle <= 180.0:
        raise InputError(f"{option} {angle:g} is not usable: expected above 0, up to 180 degrees")
    return angle


def _radiation(name: str | None, wavelength: float | None, energy_kv: float | None) -> Radiation:
    from phasedb.crystal.radiation import radiation_from_name, radiation_from_wavelength
    from phasedb.errors import InputError

    if name is not None and wavelength is not None:
        raise InputError("--radiation and --wavelength are both given", hint="give one of them")
    if wavelength is not None:
        return radiation_from_wavelength(wavelength)
    if energy_kv is not None and name is None:
        name = "electron"
    return radiation_from_name(name or "Cu", energy_kev=energy_kv)


def _document(phase: Phase, found: tuple[IdealLine, ...]) -> dict[str, Any]:
    return {
        "schema": "phasedb.lines/1",
        "phase": phase.name,
        "lines": [
            {
                "n": line.n,
                "hkl": [list(hkl) for hkl in line.hkl],
                "multiplicity": line.multiplicity,
                "d_angstrom": round(line.d_angstrom, 6),
                "two_theta_deg": round(line.two_theta_deg, 5),
                "intensity": None if line.intensity is None else round(line.intensity, 4),
            }
            for line in found
        ],
    }


def _print(phase: Phase, beam: Radiation, found: tuple[IdealLine, ...]) -> None:
    from phasedb.report.table import Column, output_width, table

    at = f", {phase.temperature_k:g} K" if phase.temperature_k is not None else ""
    click.echo(
        f"{phase.name}: {phase.formula}, {phase.lattice_type}, a = {phase.a_angstrom:.10g} Å{at}; "
        f"{beam.name}, {beam.wavelength_angstrom:.8g} Å"
    )
    if not found:
        note("no line lies in this range")
        return
    columns = [
        Column("2theta", "right"),
        Column("d (Å)", "right"),
        Column("N", "right"),
        Column("hkl", wraps=True),
        Column("multiplicity", "right"),
        Column("intensity", "right"),
    ]
    rows = [
        [
            f"{line.two_theta_deg:.4f}",
            f"{line.d_angstrom:.5f}",
            str(line.n),
            line.hkl_text,
            str(line.multiplicity),
            "" if line.intensity is None else _intensity_text(line.intensity),
        ]
        for line in found
    ]
    click.echo(table(columns, rows, output_width()))
    if phase.structure is None:
        note("intensities are left open: the structure is not known")
    elif phase.structure.assumed:
        note("assumed, typical of the structure type: " + "; ".join(phase.structure.assumed))


def _intensity_text(value: float) -> str:
    return f"{value:.1f}" if value >= 0.05 else f"{value:.2g}"
