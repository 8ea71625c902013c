"""Commands that characterise a new phase: find lines, index, refine, adopt."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from phasedb.cli.common import (
    document_text,
    examples,
    json_option,
    note,
    open_library,
    print_json,
    print_text,
)
from phasedb.cli.completion import complete_phase
from phasedb.cli.peak_options import PeakOptions, peak_options
from phasedb.cli.progress import Progress
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.characterise.cells import StartingCell
    from phasedb.identify.settings import ShiftPrior
    from phasedb.library import Library
    from phasedb.measured.peaklist import PeakList
    from phasedb.measured.scan_result import ScanResult


@click.command(
    epilog=examples(
        "phasedb peaks scan.xy --radiation Cu -o unknown.csv --figure unknown.svg",
        "phasedb peaks scan.cif --json",
    )
)
@click.argument("scan_file", metavar="SCAN", type=click.Path())
@peak_options
@click.option(
    "--false-lines",
    type=click.FloatRange(min=1e-6, max=100.0),
    metavar="X",
    help="Lines that noise alone may give, over the scan (default 0.1).",
)
@click.option("-o", "--output", metavar="FILE", help="Write the list there instead of on stdout.")
@click.option("--figure", metavar="FILE", help="Also draw scan, fit and lines: .svg, .png or .pdf.")
@json_option
@click.pass_context
def peaks(
    ctx: click.Context,
    scan_file: str,
    measured: PeakOptions,
    false_lines: float | None,
    output: str | None,
    figure: str | None,
    as_json: bool,
) -> None:
    """Find the lines of a scan and write a peak list.

    SCAN is text with two or three columns (2theta, counts, perhaps their standard uncertainty) or CIF;
    - reads standard input. The list goes to stdout in a form that match reads.
    """
    from phasedb.measured.list_writing import peaks_document, peaks_text
    from phasedb.measured.peak_finding import FALSE_LINES, find_lines
    from phasedb.measured.scan import read_scan

    if figure is not None:
        from phasedb.report.drawing import figure_format

        figure_format(Path(figure))
    scan = read_scan(scan_file, measured.read_options(ctx))
    with Progress(100, "% of the work") as progress:
        found = find_lines(
            scan,
            false_lines=false_lines or FALSE_LINES,
            progress=lambda share, _: progress.step(round(100 * share) - progress.done),
        )
    text = document_text(peaks_document(found)) if as_json else peaks_text(found)
    if output is not None:
        from phasedb.report.drawing import write_file

        write_file(Path(output), text.encode("utf-8"))
    else:
        click.echo(text, nl=False)
    if figure is not None:
        from phasedb.report.scan_figure import peaks_figure

        peaks_figure(found, Path(figure))
        note(f"figure written to {figure}")
    note(_found_text(found))
    for remark in found.notes:
        note(f"note: {remark}")
    if scan.radiation is None:
        note("note: no radiation is known: give it here or to match, else K-alpha2 lines count as lines")


def _found_text(found: ScanResult) -> str:
    count = len(found.lines)
    return (
        f"{count} line{'' if count == 1 else 's'} in {len(found.scan)} points, "
        f"{found.scan.two_theta_deg[0]:.2f} to {found.scan.two_theta_deg[-1]:.2f} deg; "
        f"noise: {found.noise_origin}; at most {found.false_lines:g} expected from noise alone"
    )


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
    from phasedb.report.refinement import refine_document, refine_text

    if figure is not None:
        from phasedb.report.refine_figure import refine_figure

        refine_figure(found, peaks, Path(figure))
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


@click.command(
    epilog=examples(
        "phasedb index unknown.csv --radiation Cu",
        "phasedb index mixture.csv --left-over --figure axis.svg",
    )
)
@click.argument("peaks_file", metavar="PEAKS", type=click.Path())
@peak_options
@click.option("--left-over", is_flag=True, help="Index only the lines that no stored phase claims.")
@click.option("--elements", metavar="Fe,Cr,..", help="What the specimen holds, for --left-over.")
@click.option("--figure", metavar="FILE", help="Also draw the axis of a: .svg, .png or .pdf.")
@json_option
@click.pass_context
def index(
    ctx: click.Context,
    peaks_file: str,
    measured: PeakOptions,
    left_over: bool,
    elements: str | None,
    figure: str | None,
    as_json: bool,
) -> None:
    """Find lattice type and lattice constant from a peak list alone.

    Every lattice type is tried over the whole axis of a. Cells that the list cannot exclude are named, with
    the line that would decide.
    """
    from phasedb.characterise.indexing import index_lines

    if figure is not None:
        from phasedb.report.drawing import figure_format

        figure_format(Path(figure))
    peaks = measured.read(ctx, peaks_file)
    if left_over:
        peaks = lines_left_over(open_library(ctx), peaks, measured.shift_prior(ctx), elements)
    found = index_lines(peaks, shift_prior=measured.shift_prior(ctx))
    from phasedb.report.indexing import index_document, index_text

    if figure is not None:
        from phasedb.report.axis_figure import index_figure

        index_figure(found, Path(figure))
        note(f"figure written to {figure}")
    if as_json:
        print_json(index_document(found, peaks))
    else:
        print_text(index_text, found, peaks)


def lines_left_over(
    library: Library, peaks: PeakList, prior: ShiftPrior | None, elements: str | None
) -> PeakList:
    """Return the lines that no stored phase claims, in a specimen of these elements (None: not known)."""
    from phasedb.characterise.indexing import left_over
    from phasedb.cli.matching import MatchOptions, TableOnce, run_match

    asked = MatchOptions(
        most_phases=4,
        internal_standard=None,
        foreign=None,
        checked_only=False,
        as_of=None,
        elements=elements,
        unseen=None,
        excluding=None,
        strict_chemistry=False,
        any_temperature=False,
        rank_by="probability",
    )
    with library.reading():
        found = run_match(peaks, TableOnce(library), asked.settings(library, prior))
    return left_over(peaks, found)
