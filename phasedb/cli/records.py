"""Commands for saved identifications: list and show, sign, repeat."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json, print_text

if TYPE_CHECKING:
    from phasedb.identify.result import Match
    from phasedb.identify.settings import MatchSettings
    from phasedb.library import Library
    from phasedb.library.records import Identification
    from phasedb.measured.peaklist import PeakList


def save_match(library: Library, peaks: PeakList, settings: MatchSettings, found: Match) -> int:
    """Keep a match in the library with all that is needed to repeat it; return its number."""
    from phasedb.identify.kept import settings_to_json
    from phasedb.library.records import save_identification
    from phasedb.measured.kept import peak_list_to_json
    from phasedb.report.document import match_document

    return save_identification(
        library,
        peak_list_to_json(peaks),
        settings_to_json(settings),
        match_document(found, with_axis=True),
    )


# --- list and show


@click.command(
    epilog=examples(
        "phasedb identifications", "phasedb identifications 12", "phasedb identifications 12 --json"
    )
)
@click.argument("number", metavar="[ID]", required=False)
@json_option
@click.pass_context
def identifications(ctx: click.Context, number: str | None, as_json: bool) -> None:
    """List saved matches, or show one as it was found.

    With --json a list has the schema phasedb.identifications/1, one match phasedb.identification/1: the facts
    of the record, the peaks and settings that were used, and the result.
    """
    from phasedb.library import records

    library = open_library(ctx)
    if number is None:
        _list(records.list_identifications(library), as_json)
        return
    found = records.get_identification(library, number)
    if as_json:
        document = {"schema": "phasedb.identification/1", **_facts(found)}
        print_json({**document, "peaks": found.peaks, "settings": found.settings, "result": found.result})
        return
    from phasedb.cli.tables import labelled
    from phasedb.report.stored import match_from_document
    from phasedb.report.text import match_text

    for line in labelled(_labels(found)):
        click.echo(line)
    click.echo()
    print_text(match_text, match_from_document(found.result))


def _facts(found: Identification) -> dict[str, Any]:
    return {
        "id": found.number,
        "uid": found.uid,
        "source": found.source,
        "sample": found.sample,
        "file_sha256": found.file_sha256,
        "made_by": found.made_by,
        "made_at": found.made_at,
        "program_version": found.program_version,
        "library_fingerprint": found.library_fingerprint,
        "history": {"count": found.history_count, "head": found.history_head},
        "claimed": _claimed(found),
        "signatures": [
            {"signed_by": one.signed_by, "signed_at": one.signed_at, "remark": one.remark}
            for one in found.signatures
        ],
    }


def _claimed(found: Identification) -> list[str]:
    """Return the phases that are more likely there than not; of look-alikes only the likeliest."""
    from phasedb.report.repeated import CLAIMED

    named: list[str] = []
    alike: set[str] = set()
    for phase in found.result["phases"]:
        if phase["probability"] > CLAIMED:
            named.append(phase["name"])
        elif phase["group_probability"] > CLAIMED and phase["name"] not in alike:
            named.append(f"{phase['name']} or a look-alike")
        else:
            continue
        alike.update(phase["look_alikes"])
    return named


def _verdict(found: Identification) -> str:
    from phasedb.report.repeated import CLAIMED

    named = _claimed(found)
    if found.result["unlisted"]["probability"] > CLAIMED:
        named.append("an unlisted phase")
    return " + ".join(named) or (
        "nothing cubic" if found.result["nothing_cubic"] > CLAIMED else "no phase for sure"
    )


def _list(found: Any, as_json: bool) -> None:
    if as_json:
        print_json({"schema": "phasedb.identifications/1", "identifications": [_facts(one) for one in found]})
        return
    from phasedb.cli.tables import aligned
    from phasedb.library.showing import when
    from phasedb.report.table import printable

    rows = [
        [
            str(one.number),
            when(one.made_at),
            one.made_by,
            printable(one.sample or one.source),
            _verdict(one),
            ", ".join(signature.signed_by for signature in one.signatures) or "not signed",
        ]
        for one in found
    ]
    if rows:
        for line in aligned(["ID", "when", "by", "sample or file", "found", "signed by"], rows, right=(0,)):
            click.echo(line)
    note(f"{len(rows)} saved match" + ("" if len(rows) == 1 else "es"))


def _labels(found: Identification) -> list[tuple[str, str]]:
    from phasedb.library.showing import when
    from phasedb.report.table import printable

    pairs = [
        (f"identification {found.number}", _verdict(found)),
        ("sample", printable(found.sample)),
        ("list", printable(found.source)),
        ("made", f"by {found.made_by}, {when(found.made_at)}, program {found.program_version}"),
        ("library then", f"history row {found.history_count}, head {found.history_head[:16]}"),
    ]
    pairs += [
        ("signed", f"by {one.signed_by}, {when(one.signed_at)}" + (f": {one.remark}" if one.remark else ""))
        for one in found.signatures
    ]
    return pairs if found.signatures else [*pairs, ("signed", "by nobody yet")]


# --- sign


@click.command(
    epilog=examples(
        'phasedb --by "B. Second" sign 12',
        'phasedb --by "B. Second" sign 12 --remark "compared with the raw scan"',
    )
)
@click.argument("number", metavar="ID")
@click.option("--remark", default="", metavar="TEXT", help="What was looked at; kept with the signature.")
@json_option
@click.pass_context
def sign(ctx: click.Context, number: str, remark: str, as_json: bool) -> None:
    """Sign a saved match as a second person.

    Who made it cannot sign it, and nobody signs twice.
    """
    from phasedb.library import records

    library = open_library(ctx, write=True)
    found = records.sign(library, number, remark=remark)
    if as_json:
        print_json({"schema": "phasedb.signed/1", **_facts(found), "history_head": library.history_head})
        return
    signature = found.signatures[-1]
    click.echo(f"identification {found.number} signed by {signature.signed_by}: {_verdict(found)}")


# --- rerun


@click.command(epilog=examples("phasedb rerun 12", "phasedb rerun 12 --json"))
@click.argument("number", metavar="ID")
@json_option
@click.pass_context
def rerun(ctx: click.Context, number: str, as_json: bool) -> None:
    """Repeat a saved match, with the library as it was then and as it is now.

    Then: the same result is expected, byte for byte, from the same program version; if it is not, that is
    said. Now: what differs, and which entries changed by whom and why. With --json the schema is
    phasedb.rerun/1.
    """
    from phasedb import __version__
    from phasedb.library import records
    from phasedb.report.repeated import compare, repeated_document

    library = open_library(ctx)
    with library.reading():
        found = records.get_identification(library, number)
        changed = [
            _changed_entry(change) for change in records.entry_changes_since(library, found.history_count)
        ]
        today = _again(library, found)
        phase_count, fingerprint = library.phase_count, library.fingerprint
    then = _again(open_library(ctx, as_of=found.history_head), found)
    same_then = _text(then) == found.result_text
    kept = compare(found.result, then, ())
    moved = compare(found.result, today, changed)
    if as_json:
        print_json(
            {
                "schema": "phasedb.rerun/1",
                "id": found.number,
                "program_version": {"then": found.program_version, "now": __version__},
                "then": {"same_bytes": same_then, **repeated_document(kept)},
                "now": {
                    "fingerprint": fingerprint,
                    "phase_count": phase_count,
                    **repeated_document(moved),
                },
                "result": today,
            }
        )
        return
    for line in _lines(found, same_then, kept, moved, phase_count, __version__):
        click.echo(line)


def _again(library: Library, found: Identification) -> dict[str, Any]:
    """Return the document of the same match against `library`."""
    from phasedb.cli.matching import TableOnce, run_match
    from phasedb.identify.kept import settings_from_json
    from phasedb.measured.kept import peak_list_from_json
    from phasedb.report.document import match_document

    peaks, settings = peak_list_from_json(found.peaks), settings_from_json(found.settings)
    return match_document(run_match(peaks, TableOnce(library), settings), with_axis=True)


def _text(document: dict[str, Any]) -> str:
    from phasedb.report.document import document_bytes

    return document_bytes(document).decode("utf-8")


def _changed_entry(change: Any) -> Any:
    from phasedb.library.differences import changed_lines
    from phasedb.report.repeated import ChangedEntry

    before, after = change.before or {}, change.after or {}
    names = dict.fromkeys(document["name"] for document in (before, after) if document)
    return ChangedEntry(
        names=tuple(names),
        change=_kind_of_change(before, after),
        details=tuple(changed_lines(before, after)) if before else (),
        who=change.who,
        at=change.at,
        remark=change.remark,
    )


def _kind_of_change(before: dict[str, Any], after: dict[str, Any]) -> str:
    if not before:
        return "new entry"
    then, now = before["standing"], after["standing"]
    if then != now and "withdrawn" in (then, now):
        return "withdrawn" if now == "withdrawn" else "restored"
    if then != now and now == "checked":
        return "checked"
    return "revised" if then == now else "revised, no longer checked"


def _lines(
    found: Identification, same_then: bool, kept: Any, moved: Any, phase_count: int, version: str
) -> list[str]:
    from phasedb.report.repeated import repeated_lines

    lines = [f"identification {found.number} ({_verdict(found)}), made by {found.made_by}"]
    if same_then:
        lines.append("With the library as it was then: the same result, byte for byte.")
    else:
        lines.append("With the library as it was then: NOT the same bytes.")
        if version != found.program_version:
            lines.append(f"  It was made by program {found.program_version}; this is {version}.")
        lines += [f"  {line}" for line in repeated_lines(kept)] or [
            "  Only digits beyond those shown differ."
        ]
    lines.append("")
    if moved.same:
        lines.append(f"With the library as it is now ({phase_count} entries): the same result.")
    else:
        lines.append(f"With the library as it is now ({phase_count} entries):")
    lines += repeated_lines(moved)
    if not moved.same and not moved.phases:
        lines.append("- no probability moved by as much as 0.005")
    return lines
