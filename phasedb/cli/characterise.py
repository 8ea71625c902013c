"""Commands that characterise a new phase: find lines, index, refine, adopt."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json, print_text
from phasedb.cli.completion import complete_phase
from phasedb.cli.peak_options import PeakOptions, peak_options
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.characterise.cells import StartingCell


@click.command(
    epilog=examples(
        'phasedb refine blade.csv --phase "titanium nitride"',
        "phasedb refine unknown.csv --lattice F --a 4.39 --figure residuals.svg",
    )
)
@click.argument("peaks_file", metavar="PEAKS", type=click.Path())
@click.option("--phase", metavar="NAME", shell_complete=complete_phase, help="A stored phase to start from.")
@click.option("--lattice", metavar="P|I|F", help="Lattice type, if no phase is named.")
@click.option("--a", "a_text", metavar="A", help="Rough lattice constant: 4.39, 0.439 nm.")
@peak_options
@click.option("--figure", metavar="FILE", help="Also draw the residuals: .svg, .png or .pdf.")
@json_option
@click.pass_context
def refine(
    ctx: click.Context,
    peaks_file: str,
    phase: str | None,
    lattice: str | None,
    a_text: str | None,
    measured: PeakOptions,
    figure: str | None,
    as_json: bool,
) -> None:
    """Refine the lattice constant of one phase in a peak list.

    Lines of other phases in the list are left alone. PEAKS may be - for standard input.
    """
    from phasedb.characterise.refinement import refine as refine_lines

    if figure is not None:
        from phasedb.report.drawing import figure_format

        figure_format(Path(figure))
    peaks = measured.read(ctx, peaks_file)
    cell = _starting_cell(ctx, phase, lattice, a_text, peaks.temperature_k)
    found = refine_lines(
        peaks,
        lattice_type=cell.lattice_type,
        a_angstrom=cell.a_angstrom,
        allowed=cell.allowed,
        expansion_per_k=cell.expansion_per_k,
        shift_prior=measured.shift_prior(ctx),
    )
    from phasedb.report.refinement import refine_document, refine_text, residual_figure

    if figure is not None:
        residual_figure(found, peaks, Path(figure))
        note(f"figure written to {figure}")
    if as_json:
        print_json(refine_document(found, peaks))
    else:
        print_text(refine_text, found, peaks)


def _starting_cell(
    ctx: click.Context,
    phase: str | None,
    lattice: str | None,
    a_text: str | None,
    temperature_k: float | None,
) -> StartingCell:
    from phasedb.characterise.cells import cell_from_phase, cell_from_values

    if phase is not None:
        if lattice is not None or a_text is not None:
            raise InputError(
                "--phase already says lattice type and a", hint="leave out --lattice and --a, or --phase"
            )
        return cell_from_phase(open_library(ctx).get(phase).phase(), temperature_k)
    if lattice is None or a_text is None:
        raise InputError(
            "which phase to refine is not said",
            hint="give --phase NAME, or --lattice P|I|F together with --a (rough, Å)",
        )
    return cell_from_values(lattice, a_text)
