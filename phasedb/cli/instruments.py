"""Commands for the lab's instruments, and the lookup that ``--instrument`` uses."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any, Final

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json
from phasedb.cli.completion import complete_phase
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.library import Library
    from phasedb.library.instruments import Instrument
    from phasedb.measured.options import ReadOptions

_KEY: Final = "phasedb.instrument"


def instrument_record(ctx: click.Context, name: str) -> Instrument:
    """Return the stored instrument of that name; read once for each run of a command."""
    from phasedb.library.instruments import get_instrument

    known: dict[str, Instrument] = ctx.meta.setdefault(_KEY, {})
    if name not in known:
        known[name] = get_instrument(open_library(ctx), name)
    return known[name]


@click.group(
    epilog=examples(
        "phasedb instrument add D1 --radiation Cu --goniometer-radius 240",
        "phasedb instrument list",
    )
)
def instrument() -> None:
    """Keep instruments: radiation, radius, and shifts learned from a standard.

    A stored instrument fills in peak options by --instrument NAME, and its shifts guide match, refine, index
    and adopt.
    """


@instrument.command(
    epilog=examples(
        "phasedb instrument add D1 --radiation Cu --goniometer-radius 240",
        "phasedb instrument add D1 --radiation Cu --goniometer-radius 240 --replace "
        "--standard-list si.csv --standard silicon",
    )
)
@click.argument("name")
@click.option("--radiation", metavar="NAME", help="Cu, Co, Mo, Cr, Fe, Ag, Cu-Ka1, Cu-mean.")
@click.option("--wavelength", type=float, metavar="A", help="Wavelength in Å, used literally.")
@click.option("--goniometer-radius", type=float, metavar="MM", help="Goniometer radius in mm.")
@click.option(
    "--geometry", type=click.Choice(("reflection", "transmission")), default="reflection", show_default=True
)
@click.option("--standard-list", metavar="PEAKS", help="A peak list of a standard measured on it.")
@click.option(
    "--standard",
    metavar="NAME",
    shell_complete=complete_phase,
    help="The entry that the standard is; its a is held fixed.",
)
@click.option("--remarks", metavar="TEXT", default="", help="Anything else.")
@click.option("--replace", "replace_old", is_flag=True, help="Enter it anew, as its next version.")
@json_option
@click.pass_context
def add(
    ctx: click.Context,
    name: str,
    radiation: str | None,
    wavelength: float | None,
    goniometer_radius: float | None,
    geometry: Any,
    standard_list: str | None,
    standard: str | None,
    remarks: str,
    replace_old: bool,
    as_json: bool,
) -> None:
    """Enter an instrument, perhaps with what a standard tells of its shifts."""
    from phasedb.library.instruments import Instrument, save_instrument
    from phasedb.measured.options import ReadOptions

    if (radiation is None) == (wavelength is None):
        raise InputError("the radiation is not said once", hint="give --radiation or --wavelength")
    if (standard_list is None) != (standard is None):
        raise InputError(
            "a standard needs its list and its name", hint="give --standard-list and --standard together"
        )
    options = ReadOptions(
        radiation=radiation, wavelength_angstrom=wavelength, goniometer_radius_mm=goniometer_radius
    )
    found = options.resolved_radiation()
    if found is None or found.convention == "electron":
        raise InputError("only X-ray instruments are kept", hint="give --radiation Cu or the like")
    named = found.name if radiation is not None else f"{wavelength!r} A"
    library = open_library(ctx, write=True)
    record = Instrument(name, named, goniometer_radius, geometry, remarks=remarks)
    if standard_list is not None and standard is not None:
        record = _calibrated(library, record, standard_list, standard, options)
    stored = save_instrument(library, record, replace_old=replace_old)
    _show(stored, as_json)


def _calibrated(
    library: Library, record: Instrument, standard_list: str, standard: str, options: ReadOptions
) -> Instrument:
    from phasedb.characterise.calibration import calibrate
    from phasedb.characterise.cells import cell_from_phase
    from phasedb.measured.reading import read_peak_list

    peaks = read_peak_list(standard_list, options)
    entry = library.get(standard)
    found = calibrate(
        peaks,
        cell_from_phase(entry.phase(), peaks.temperature_k),
        a_esd_angstrom=entry.content.a_esd_angstrom,
        transmission=record.geometry == "transmission",
    )
    fit = found.fit
    for caution in fit.cautions:
        note(f"note: {caution}")
    said = (
        f"learned from {len(fit.lines)} lines of {entry.name} in {peaks.source}: "
        f"zero {fit.zero_deg:+.4f} deg, displacement of that mount {fit.displacement_mm:+.4f} mm, "
        f"noise {fit.noise:.4f} deg"
    )
    prior = found.prior
    return replace(
        record,
        zero_deg=round(prior.zero_deg, 6),
        zero_scale_deg=round(prior.zero_scale_deg, 6),
        displacement_mm=prior.displacement_mm,
        displacement_scale_mm=prior.displacement_scale_mm,
        line_width_deg=None if found.line_width_deg is None else round(found.line_width_deg, 5),
        standard=entry.name,
        remarks="; ".join(part for part in (record.remarks, said) if part),
    )


@instrument.command("list", epilog=examples("phasedb instrument list", "phasedb instrument list --json"))
@json_option
@click.pass_context
def list_all(ctx: click.Context, as_json: bool) -> None:
    """List the instruments."""
    from phasedb.library.instruments import list_instruments

    found = list_instruments(open_library(ctx))
    if as_json:
        print_json({"schema": "phasedb.instruments/1", "instruments": [_facts(one) for one in found]})
        return
    if not found:
        note("no instrument is stored; enter one with: phasedb instrument add")
        return
    from phasedb.cli.tables import aligned

    rows = [
        (
            one.name,
            one.radiation,
            _mm(one.goniometer_radius_mm),
            one.geometry,
            _zero(one),
            one.standard or "-",
        )
        for one in found
    ]
    for line in aligned(("name", "radiation", "radius", "geometry", "zero", "standard"), rows):
        click.echo(line)


@instrument.command(epilog=examples("phasedb instrument show D1", "phasedb instrument show D1 --json"))
@click.argument("name")
@json_option
@click.pass_context
def show(ctx: click.Context, name: str, as_json: bool) -> None:
    """Show one instrument."""
    _show(instrument_record(ctx, name), as_json)


def _show(found: Instrument, as_json: bool) -> None:
    if as_json:
        print_json({"schema": "phasedb.instrument/1", "instrument": _facts(found)})
        return
    from phasedb.cli.tables import labelled

    displacement = "-"
    if found.displacement_scale_mm is not None:
        displacement = f"{found.displacement_mm or 0.0:+.3f} ± {found.displacement_scale_mm:.3f} mm"
    rows = [
        ("name", found.name),
        ("radiation", found.radiation),
        ("goniometer radius", _mm(found.goniometer_radius_mm)),
        ("geometry", found.geometry),
        ("zero error", _zero(found)),
        ("displacement", displacement),
        ("line width", "-" if found.line_width_deg is None else f"{found.line_width_deg:.4f} deg"),
        ("standard", f"{found.standard}, {found.calibrated_on}" if found.standard else "none measured"),
        ("remarks", found.remarks or "-"),
        ("version", f"{found.version}, {found.entered_by}, {found.entered_at}"),
    ]
    for line in labelled(rows):
        click.echo(line)


def _facts(found: Instrument) -> dict[str, Any]:
    from dataclasses import asdict

    return asdict(found)


def _mm(value: float | None) -> str:
    return "-" if value is None else f"{value:g} mm"


def _zero(found: Instrument) -> str:
    if found.zero_deg is None or found.zero_scale_deg is None:
        return "-"
    return f"{found.zero_deg:+.4f} ± {found.zero_scale_deg:.4f} deg"
