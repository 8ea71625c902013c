"""``phasedb report``: a self-contained page of a match.

``--json`` tells what was written as ``phasedb.report/1``: file, bytes.
"""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json
from phasedb.cli.match import match_with
from phasedb.cli.matching import MatchOptions, match_options
from phasedb.cli.peak_options import PeakOptions, peak_options
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.crystal.phases import PhaseTable
    from phasedb.identify.result import Match
    from phasedb.library import Library
    from phasedb.report.axis_figure import Entry

_MOST_MARKED = 50_000  # more entries than this are a grey bar, and slow to read

_DETAILS = (
    ("laboratory", "Laboratory and its address."),
    ("customer", "Who asked for the test."),
    ("sample", "The sample's name or number (default: the list's own)."),
    ("condition", "Its condition when received, and how the specimen was prepared."),
    ("received", "When it was received."),
    ("measured_on", "When it was measured."),
    ("analyst", "Who measured and interpreted it."),
    ("equipment", "The instrument, as the report should name it."),
    ("method", "The method or procedure."),
    ("deviations", "Deviations from the method."),
    ("authorised", "Who authorises the report."),
)


def _detail_options(command: Any) -> Any:
    for name, text in reversed(_DETAILS):
        command = click.option(f"--{name.replace('_', '-')}", default="", metavar="TEXT", help=text)(command)
    return command


@click.command(
    epilog=examples(
        "phasedb report blade.csv --radiation Cu -o blade.html --customer 'Nordkai' --analyst 'J. Ode'",
        "phasedb report --identification 12 -o blade.html",
    )
)
@click.argument("peaks_file", metavar="[PEAKS]", type=click.Path(), required=False)
@click.option("--identification", metavar="ID", help="Show a saved identification instead of matching PEAKS.")
@click.option("-o", "--output", metavar="FILE.html", required=True, help="Where to write the page.")
@click.option("--issued", metavar="DATE", help="Date of the report (default: today, UTC).")
@_detail_options
@peak_options
@match_options
@json_option
@click.pass_context
def report(
    ctx: click.Context,
    /,
    peaks_file: str | None,
    identification: str | None,
    output: str,
    issued: str | None,
    measured: PeakOptions,
    asked: MatchOptions,
    as_json: bool,
    **details: str,
) -> None:
    """Write a match as one self-contained HTML page, for a screen or for paper.

    The page holds the verdict, the ledger, figures, the phases, the settings and what a test report needs. It
    needs no network and no other file.
    """
    if (peaks_file is None) == (identification is None):
        raise InputError(
            "a report is of a peak list or of a saved identification, one of them",
            hint="give PEAKS or --identification ID",
        )
    if not Path(output).absolute().parent.is_dir():
        raise InputError("no such folder to write the page in", where=output, hint="choose another -o")
    library = open_library(ctx, as_of=asked.as_of)
    if identification is not None:
        found = saved_match(library, identification)
    else:
        assert peaks_file is not None
        found = match_with(ctx, library, measured.read(ctx, peaks_file), measured, asked)
    page = _page(library, found, details, measured.instrument, issued, identification or "")
    from phasedb.report.drawing import write_file

    content = page.encode("utf-8")
    write_file(Path(output), content)
    if as_json:
        print_json({"schema": "phasedb.report/1", "file": output, "bytes": len(content)})
    else:
        note(f"report written to {output}")


def saved_match(library: Library, identification: str) -> Match:
    """Return a saved identification's match, as it was found then."""
    from phasedb.library.records import get_identification
    from phasedb.report.stored import match_from_document

    return match_from_document(get_identification(library, identification).result)


def _page(
    library: Library,
    found: Match,
    details: dict[str, str],
    instrument: str | None,
    issued: str | None,
    record: str,
) -> str:
    from phasedb.report.page import PageFacts, ReportDetails, report_page

    given = {("instrument" if name == "equipment" else name): text for name, text in details.items()}
    given["instrument"] = given["instrument"] or instrument or ""
    given["sample"] = given["sample"] or found.measurement.sample
    changed = library.fingerprint != found.library_fingerprint
    many = library.phase_count > _MOST_MARKED
    facts = PageFacts(
        issued=issued or datetime.now(UTC).date().isoformat(),
        entries=() if many else _entries(library.table()),
        entry_remark=" are too many to show" if many else ", as the library is now" if changed else "",
        history_head=library.history_head,
        record=record,
    )
    return report_page(found, ReportDetails(**given), facts)


def _entries(table: PhaseTable) -> list[Entry]:
    from phasedb.crystal.lattice import LATTICE_TYPES
    from phasedb.report.axis_figure import Entry

    return [
        Entry(name, LATTICE_TYPES[lattice], a)
        for name, lattice, a in zip(
            table.name, table.lattice.tolist(), table.a_angstrom.tolist(), strict=True
        )
    ]
