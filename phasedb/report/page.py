"""The report of a match: one page that stands alone, with its figures, for a screen or for paper."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any, Final

from phasedb.identify.result import Match
from phasedb.report import drawing, figures, wording
from phasedb.report.axis_figure import Entry, axis_figure
from phasedb.report.cautions import CAUTIONS
from phasedb.report.document import document_bytes, match_document, thinned
from phasedb.report.inline_svg import inline_svg
from phasedb.report.page_rows import line_rows, phase_rows
from phasedb.report.table import printable
from phasedb.report.text import LEAST_SHOWN, candidate_text, candidates_shown, shift_text
from phasedb.report.verdict import verdict

_TEMPLATES: Final = Path(__file__).parent / "templates"
_MOST_ENTRY_MARKS: Final = 4000  # more marks than this are a grey bar, and a large page


@dataclass(frozen=True, slots=True)
class ReportDetails:
    """What a test report needs and only people know; an empty text is named as not given."""

    laboratory: str = ""
    customer: str = ""
    sample: str = ""
    condition: str = ""
    received: str = ""
    measured_on: str = ""
    analyst: str = ""
    instrument: str = ""
    method: str = ""
    deviations: str = ""
    authorised: str = ""


TITLES: Final[dict[str, str]] = {
    "laboratory": "Laboratory",
    "customer": "Customer",
    "sample": "Sample",
    "condition": "Condition and preparation",
    "received": "Received on",
    "measured_on": "Measured on",
    "analyst": "Measured and interpreted by",
    "instrument": "Instrument",
    "method": "Method",
    "deviations": "Deviations from the method",
    "authorised": "Authorised by",
}


@dataclass(frozen=True, slots=True)
class PageFacts:
    """What the page says beside the match itself.

    Attributes
    ----------
    issued : str, the date of the report
    entries : what the axis figure marks
    entry_remark : str, said after their number, such as ``", as the library is now"``
    history_head : str, head of the library's history; empty if not known
    record : str, the saved identification that the page shows; empty if none
    """

    issued: str
    entries: Sequence[Entry] = ()
    entry_remark: str = ""
    history_head: str = ""
    record: str = ""


def report_page(match: Match, details: ReportDetails, facts: PageFacts) -> str:
    """Return the report as one HTML page without any outside reference."""
    from jinja2 import Environment, FileSystemLoader, StrictUndefined

    environment = Environment(
        loader=FileSystemLoader(_TEMPLATES), autoescape=True, undefined=StrictUndefined, trim_blocks=True
    )
    css = (_TEMPLATES / "page.css").read_text(encoding="utf-8")
    script = (_TEMPLATES / "page.js").read_text(encoding="utf-8")
    context = {
        "policy": _policy(css, script),
        "css": css,
        "script": script,
        **_words(match, details, facts),
        **_pictures(match, facts),
    }
    return environment.get_template("match.html").render(context) + "\n"


def _hash(text: str) -> str:
    return "'sha256-" + base64.b64encode(hashlib.sha256(text.encode("utf-8")).digest()).decode("ascii") + "'"


def _policy(css: str, script: str) -> str:
    """Only our own script and style run, and nothing is ever fetched."""
    return (
        f"default-src 'none'; script-src {_hash(script)}; style-src-elem {_hash(css)};"
        " style-src-attr 'unsafe-inline'; base-uri 'none'; form-action 'none'"
    )


def _number(match: Match, details: ReportDetails) -> str:
    """The report's number: the same result and details give the same, any change another."""
    given = "\x00".join(str(getattr(details, column.name)) for column in fields(details))
    digest = hashlib.sha256(document_bytes(match_document(match)) + given.encode("utf-8")).hexdigest()
    return f"{digest[:4]}-{digest[4:8]}-{digest[8:12]}"


def _words(match: Match, details: ReportDetails, facts: PageFacts) -> dict[str, Any]:
    measurement = match.measurement
    marks = figures.phase_marks(match)
    given = [(TITLES[c.name], printable(getattr(details, c.name))) for c in fields(details)]
    blank = [name.lower() for name, value in given if not value]
    unlisted = match.unlisted
    return {
        "title": printable(details.sample or measurement.sample or measurement.source or "Peak list"),
        "number": _number(match, details),
        "issued": facts.issued,
        "record": facts.record,
        "verdict": [printable(sentence) for sentence in verdict(match)],
        "deviation_unit": "degrees 2theta" if wording.in_degrees(match) else "percent of d",
        "position_title": wording.AXIS_TITLES[measurement.position_unit],
        "show_d": measurement.position_unit != "d",
        "show_intensity": any(line.intensity is not None for line in match.ledger),
        "lines": line_rows(match, marks),
        "phases": phase_rows(match, marks, least=LEAST_SHOWN),
        "unlisted": (
            f"Probability {wording.probability(unlisted.probability)} that a cubic phase is present which the"
            f" library lacks; {wording.probability(match.nothing_cubic)} that nothing cubic is present."
        ),
        "candidates": [printable(candidate_text(place)) for place in candidates_shown(match)],
        "bars": _bars(match),
        "shift": printable(shift_text(match.shift)),
        "settings": _settings(match, facts),
        "given": given,
        "blank": ", ".join(blank),
        "cautions": [printable(caution) for caution in (*match.cautions, *CAUTIONS)],
        "entry_count": match.library_phase_count,
        "entry_remark": facts.entry_remark,
    }


def _bars(match: Match) -> str:
    shift = match.shift
    text = ""
    if shift.noise_deg is not None or shift.noise_relative is not None:
        text = "Bars: the scatter of this list's positions, one standard deviation."
    if shift.at_lines_esd_deg is not None:
        text += " Grey band: uncertainty of the shift."
    return text


def _settings(match: Match, facts: PageFacts) -> list[tuple[str, str]]:
    measurement = match.measurement
    assumed = " (assumed from the lines)" if measurement.range_assumed else ""
    unit = wording.UNITS[measurement.position_unit]
    rows = [
        ("Peak list", measurement.source or "-"),
        ("SHA-256 of the list", measurement.sha256 or "-"),
        ("Lines", str(measurement.line_count)),
        ("Measured range", f"{measurement.range_low:g} to {measurement.range_high:g}{unit}{assumed}"),
        ("Radiation", measurement.radiation or "none stated"),
    ]
    if measurement.wavelength_angstrom is not None:
        rows.append(("Wavelength", f"{measurement.wavelength_angstrom:.7f} Å"))
    rows += [(name.replace("_", " "), _value(value)) for name, value in sorted(match.settings.items())]
    rows += [
        ("Library", f"{wording.plural(match.library_phase_count, 'phase')}"),
        ("Library fingerprint", match.library_fingerprint),
    ]
    if facts.history_head:
        rows.append(("Head of the library's history", facts.history_head))
    rows.append(("Program", f"phasedb {match.program_version}"))
    return [(printable(name), printable(value)) for name, value in rows]


def _value(value: Any) -> str:
    if value is None:
        return "not set"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, dict):
        return "; ".join(f"{str(name).replace('_', ' ')} {_value(entry)}" for name, entry in value.items())
    if isinstance(value, (list, tuple)):
        return ", ".join(_value(entry) for entry in value) or "none"
    return str(value)


def _pictures(match: Match, facts: PageFacts) -> dict[str, str]:
    pictures = {"axis_wide": "", "axis_narrow": ""}
    entries = facts.entries
    if len(entries) > _MOST_ENTRY_MARKS:
        entries = entries[:: len(entries) // _MOST_ENTRY_MARKS + 1]
    places = figures.named_places(match)
    with drawing.look():
        for name, size in (("wide", drawing.WIDE), ("narrow", drawing.NARROW)):
            lines = figures.lines_figure(match, size)
            pictures[f"lines_{name}"] = inline_svg(
                lines, f"lines-{name}", "Measured lines and their deviations"
            )
            if match.axis:
                axis = axis_figure([thinned(curve) for curve in match.axis], entries, places, size)
                pictures[f"axis_{name}"] = inline_svg(
                    axis, f"axis-{name}", "Evidence along the lattice-constant axis"
                )
    return pictures
