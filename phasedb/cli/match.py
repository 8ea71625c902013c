"""``phasedb match``: which library phases a peak list holds."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json, print_text
from phasedb.cli.matching import MatchOptions, TableOnce, foreign_positions, match_options, run_match
from phasedb.cli.peak_options import PeakOptions, peak_options
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.identify.result import Match
    from phasedb.identify.settings import MatchSettings
    from phasedb.library import Library
    from phasedb.measured.peaklist import PeakList


@click.command(
    epilog=examples(
        "phasedb match blade.csv --radiation Cu --elements Ti,N,Fe",
        "phasedb match rings.csv --unit ring --energy-kv 200 --camera-length 680 --json",
    )
)
@click.argument("peaks_file", metavar="PEAKS", type=click.Path())
@peak_options
@match_options
@click.option("--save", is_flag=True, help="Keep the result in the library.")
@click.option("--figure", metavar="FILE", help="Also draw the lines: .svg, .png or .pdf.")
@json_option
@click.pass_context
def match(
    ctx: click.Context,
    peaks_file: str,
    measured: PeakOptions,
    asked: MatchOptions,
    save: bool,
    figure: str | None,
    as_json: bool,
) -> None:
    """Say which phases of the library a measured peak list holds.

    PEAKS is a text file, JSON or CIF; - reads standard input. The answer names the phases with their
    probability, and accounts for every line: who claims it, or that nothing explains it.
    """
    if figure is not None:
        from phasedb.report.drawing import figure_format

        figure_format(Path(figure))
    if save and asked.as_of is not None:
        raise InputError(
            "a match with the library of another day cannot be saved", hint="leave out --as-of or --save"
        )
    peaks = measured.read(ctx, peaks_file)
    library = open_library(ctx, write=save, as_of=asked.as_of)
    settings = settings_for(ctx, library, peaks, measured, asked)
    with library.reading():  # fingerprint and table of one moment, whoever writes meanwhile
        found = run_match(peaks, TableOnce(library), settings)
    if save:
        from phasedb.cli.records import save_match

        note(f"saved as identification {save_match(library, peaks, settings, found)}")
    if figure is not None:
        from phasedb.report.figures import match_figure

        match_figure(found, Path(figure))
        note(f"figure written to {figure}")
    if as_json:
        from phasedb.report.document import match_document

        print_json(match_document(found))
    else:
        from phasedb.report.text import match_text

        print_text(match_text, found)


def match_with(
    ctx: click.Context, library: Library, peaks: PeakList, measured: PeakOptions, asked: MatchOptions
) -> Match:
    """Return the match of `peaks` against `library` with the given options."""
    return run_match(peaks, TableOnce(library), settings_for(ctx, library, peaks, measured, asked))


def settings_for(
    ctx: click.Context, library: Library, peaks: PeakList, measured: PeakOptions, asked: MatchOptions
) -> MatchSettings:
    """Return the settings that the options ask for, the foreign lines in the unit of `peaks`."""
    settings = asked.settings(library, measured.shift_prior(ctx))
    if asked.foreign is None:
        return settings
    return replace(settings, foreign_positions=foreign_positions(measured.read(ctx, asked.foreign), peaks))
