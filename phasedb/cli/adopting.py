"""``phasedb adopt``: a characterised unknown becomes an entry."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from phasedb.cli.characterise import lines_left_over
from phasedb.cli.common import examples, json_option, note, open_library, print_json
from phasedb.cli.peak_options import PeakOptions, peak_options
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.characterise.adoption import Unknown
    from phasedb.library import Draft
    from phasedb.measured.peaklist import PeakList

_Command = TypeVar("_Command", bound=Callable[..., Any])

_CONTENT: tuple[tuple[str, dict[str, Any]], ...] = (
    ("--name", {"required": True, "metavar": "N", "help": "Its name in the library."}),
    ("--formula", {"required": True, "metavar": "F", "help": "Like TiN or Ti0.5Al0.5N."}),
    ("--structure", {"metavar": "TYPE", "help": "Structure type, like B1."}),
    ("--free-parameters", {"metavar": "TEXT", "help": "Coordinates, like O(0.26,0.26,0.26)."}),
    ("--density", {"metavar": "D", "help": "Measured density, g/cm³."}),
    ("--formula-units", {"metavar": "Z", "help": "Formula units in the cell."}),
    ("--expansion", {"metavar": "X", "help": "Linear thermal expansion, 1/K."}),
    ("--drift", {"metavar": "CLASS", "help": "line compound, alloy or solid solution."}),
    ("--a-min", {"metavar": "A", "help": "Lower end of the range of a."}),
    ("--a-max", {"metavar": "A", "help": "Upper end of the range of a."}),
    ("--source", {"metavar": "TEXT", "help": "Where it comes from (default: measured here, the file)."}),
    ("--doi", {"metavar": "D", "help": "DOI of the source."}),
    ("--source-kind", {"metavar": "KIND", "help": "Default: measured here."}),
    ("--remarks", {"metavar": "TEXT", "help": "Anything else."}),
)


def _content_options(command: _Command) -> _Command:
    decorated: Any = command
    for flag, attributes in reversed(_CONTENT):
        decorated = click.option(flag, **attributes)(decorated)
    result: _Command = decorated
    return result


@click.command(
    epilog=examples(
        'phasedb adopt unknown.csv --name "blade phase" --formula Ti0.6Zr0.4N --density 5.9 --dry-run',
        'phasedb adopt unknown.csv --name "blade phase" --formula Ti0.6Zr0.4N --lattice F --a 4.39',
    )
)
@click.argument("peaks_file", metavar="PEAKS", type=click.Path())
@_content_options
@click.option("--alias", "aliases", multiple=True, metavar="N", help="Another name; may be repeated.")
@click.option("--tag", "tags", multiple=True, metavar="T", help="A tag; may be repeated.")
@click.option("--lattice", metavar="P|I|F", help="Lattice type, if known: then the list is not indexed.")
@click.option("--a", "a_text", metavar="A", help="Rough lattice constant, with --lattice.")
@click.option("--left-over", is_flag=True, help="Use only the lines that no stored phase claims.")
@click.option("--elements", metavar="Fe,Cr,..", help="What the specimen holds, for --left-over.")
@peak_options
@click.option("--accept-warning", is_flag=True, help="Write in spite of warnings; recorded.")
@click.option("--dry-run", is_flag=True, help="Show what would be entered; write nothing.")
@json_option
@click.pass_context
def adopt(
    ctx: click.Context,
    /,
    peaks_file: str,
    lattice: str | None,
    a_text: str | None,
    left_over: bool,
    elements: str | None,
    measured: PeakOptions,
    accept_warning: bool,
    dry_run: bool,
    as_json: bool,
    **given: Any,
) -> None:
    """Enter a characterised unknown as a draft, with its measurement.

    The list is indexed (unless --lattice and --a are given) and refined; the cell is checked against the
    density, the radii and the neighbours in the library.
    """
    from phasedb.characterise.adoption import characterise_unknown
    from phasedb.characterise.cells import cell_from_values

    peaks = measured.read(ctx, peaks_file)
    if (lattice is None) != (a_text is None):
        raise InputError("a known cell needs lattice type and a", hint="give --lattice and --a together")
    cell = None if lattice is None or a_text is None else cell_from_values(lattice, a_text)
    library = open_library(ctx, write=not dry_run)
    prior = measured.shift_prior(ctx)
    used = lines_left_over(library, peaks, prior, elements) if left_over else peaks
    found = characterise_unknown(used, cell=cell, shift_prior=prior)
    draft = _draft_of(found, peaks, given)
    if dry_run:
        from phasedb.library.adopting import warnings_before

        content, warnings = warnings_before(library, draft)
        head = None
    else:
        from phasedb.library.adopting import adopt as enter
        from phasedb.measured.kept import peak_list_to_json

        outcome = enter(library, draft, peak_list_to_json(peaks), accept_warnings=accept_warning)
        content, warnings, head = outcome.entry.content, outcome.warnings, library.history_head
    texts = [warning.text for warning in warnings]
    if as_json:
        from phasedb.library.entry import content_to_json
        from phasedb.report.adoption import adopt_document

        entry = content_to_json(content)
        print_json(adopt_document(found, used, entry, warnings=texts, written=not dry_run, history_head=head))
        return
    _say_adopted(found, content, texts, dry_run=dry_run)


def _draft_of(found: Unknown, peaks: PeakList, given: dict[str, Any]) -> Draft:
    """Return the draft of what was measured and what the analyst said."""
    from phasedb.crystal.quantity import format_measured
    from phasedb.library.options import draft_from_options
    from phasedb.report.adoption import origin_text

    fit = found.refinement
    said = dict(given)
    said["lattice"] = fit.lattice_type
    said["a_text"] = format_measured(fit.a_angstrom, fit.a_esd_angstrom)
    said["temperature"] = None if peaks.temperature_k is None else f"{peaks.temperature_k:g}"
    if not said["source"] and not said["doi"]:
        said["source"] = f"measured here: {peaks.sample or peaks.source}"
    said["source_kind"] = said["source_kind"] or "measured here"
    said["remarks"] = "; ".join(part for part in (said["remarks"], origin_text(found, peaks)) if part)
    return draft_from_options(said)


def _say_adopted(found: Unknown, content: Draft, warnings: list[str], *, dry_run: bool) -> None:
    from phasedb.cli.tables import labelled
    from phasedb.crystal.quantity import format_measured
    from phasedb.report.adoption import index_sentence

    verb = "would enter" if dry_run else "entered"
    click.echo(
        f"{verb} {content.name!r}: {content.formula}, {content.lattice_type}, "
        f"a = {format_measured(content.a_angstrom, content.a_esd_angstrom)} Å, draft"
    )
    rows = [
        ("index", index_sentence(found) or "the cell was given"),
        ("structure", content.structure_type or "not said: positions only"),
        (
            "density",
            "" if content.measured_density_g_cm3 is None else f"{content.measured_density_g_cm3:g} g/cm³",
        ),
        ("drift class", content.drift_class + (f" ({content.drift_reason})" if content.drift_reason else "")),
        ("source", "; ".join(f"{source.citation} ({source.kind})" for source in content.sources)),
        ("remarks", content.remarks),
    ]
    for line in labelled(rows, indent=2):
        click.echo(line)
    label = "warning" if dry_run else "warning (accepted)"
    for warning in warnings:
        note(f"{label}: {warning}")
    for caution in found.cautions:
        note(f"note: {caution}")
    if dry_run:
        note("nothing was written")
