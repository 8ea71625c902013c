"""Rows of a batch: what one list's match comes to, as a line of CSV or JSON."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Iterable, Iterator
from typing import Any, Final

from phasedb.errors import PhasedbError
from phasedb.identify.result import Match
from phasedb.report import wording
from phasedb.report.document import match_document, rounded
from phasedb.report.table import printable
from phasedb.report.verdict import WORTH_NAMING

ROW_SCHEMA: Final = "phasedb.batch-row/1"

COLUMNS: Final = (
    "file",
    "status",
    "sample",
    "line_count",
    "unexplained_lines",
    "phases",
    "probabilities",
    "a_angstrom",
    "look_alikes",
    "possible",
    "unlisted_probability",
    "unlisted_lattice_type",
    "unlisted_a_angstrom",
    "nothing_cubic",
    "zero_deg",
    "displacement_mm",
    "noise_deg",
    "cautions",
    "error",
    "sha256",
)
"""Columns of the CSV table; several values in a cell are separated by semicolons."""


def harmless(text: str) -> str:
    """Return a text cell that no spreadsheet takes for a formula: an apostrophe goes before its start.

    >>> harmless("=1+1"), harmless("silver")
    ("'=1+1", 'silver')
    """
    return "'" + text if text.startswith(("=", "+", "-", "@", "\t", "\r")) else text


def matched_row(match: Match, *, full: bool) -> dict[str, Any]:
    """Return what is kept of a match: its whole document if `full`, else the cells of its CSV row."""
    if full:
        return {"status": "matched", "match": match_document(match)}
    named = [phase for phase in match.phases if phase.probability > wording.CLAIMED_FROM]
    possible = [p for p in match.phases if WORTH_NAMING <= p.probability <= wording.CLAIMED_FROM]
    best = match.unlisted.best if match.unlisted.probability >= WORTH_NAMING else None
    return {
        "status": "matched",
        "sample": match.measurement.sample,
        "line_count": match.measurement.line_count,
        "unexplained_lines": sum(not wording.is_explained(line) for line in match.ledger),
        "phases": "; ".join(phase.name for phase in named),
        "probabilities": "; ".join(f"{phase.probability:.4f}" for phase in named),
        "a_angstrom": "; ".join(
            wording.lattice_constant(phase.a_fitted_angstrom, phase.a_fitted_esd_angstrom) for phase in named
        ),
        "look_alikes": "; ".join(dict.fromkeys(name for phase in named for name in phase.look_alikes)),
        "possible": "; ".join(f"{phase.name} {phase.probability:.3f}" for phase in possible),
        "unlisted_probability": rounded(match.unlisted.probability, "probability"),
        "unlisted_lattice_type": "" if best is None else best.lattice_type,
        "unlisted_a_angstrom": (
            "" if best is None else wording.lattice_constant(best.a_angstrom, best.a_esd_angstrom)
        ),
        "nothing_cubic": rounded(match.nothing_cubic, "probability"),
        "zero_deg": rounded(match.shift.zero_deg, "degree"),
        "displacement_mm": rounded(match.shift.displacement_mm, "millimetre"),
        "noise_deg": rounded(match.shift.noise_deg, "degree"),
        "cautions": "; ".join(match.cautions),
        "cells": {phase.name: round(phase.probability, 4) for phase in (*named, *possible)},
    }


def failed_row(error: PhasedbError, *, again: bool = False) -> dict[str, Any]:
    """Return what is kept of a list that could not be matched; `again` if the next run should try it anew."""
    kept = {"what": error.what, "where": error.where, "hint": error.hint}
    return {"status": "failed", "error": kept, **({"again": True} if again else {})}


def error_text(record: dict[str, Any]) -> str:
    """Return a failed record's error in one line; empty for a matched one."""
    error = record.get("error")
    return "" if not error else "; ".join(text for text in error.values() if text)


def csv_lines(records: Iterable[dict[str, Any]]) -> Iterator[str]:
    """Yield the lines of the CSV table, the column names first."""
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")

    def taken() -> str:
        text = buffer.getvalue()
        buffer.seek(0)
        buffer.truncate()
        return text

    writer.writerow(COLUMNS)
    yield taken()
    for record in records:
        values = {**record, "error": error_text(record)}
        cells = [values.get(column) for column in COLUMNS]
        writer.writerow([harmless(printable(cell)) if isinstance(cell, str) else cell for cell in cells])
        yield taken()


def json_lines(records: Iterable[dict[str, Any]]) -> Iterator[str]:
    """Yield one JSON document for each list: ``phasedb.batch-row/1`` with its match or its error."""
    for record in records:
        row = {
            "schema": ROW_SCHEMA,
            "file": record["file"],
            "sha256": record["sha256"],
            "status": record["status"],
            "match": record.get("match"),
            "error": record.get("error"),
        }
        yield json.dumps(row, ensure_ascii=False, allow_nan=False) + "\n"


def phase_cells(record: dict[str, Any]) -> dict[str, float]:
    """Return the probabilities worth showing in the matrix figure, by phase name."""
    if record.get("match") is None:
        return dict(record.get("cells", {}))
    phases = record["match"]["phases"]
    return {p["name"]: p["probability"] for p in phases if p["probability"] >= WORTH_NAMING}
