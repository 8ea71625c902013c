"""Rows of a batch: cells that no spreadsheet runs, and the same facts in CSV as in JSON."""

from __future__ import annotations

import csv
import io
import json

import pytest
from hypothesis import given
from hypothesis import strategies as st
from report.samples import hostile_match, two_phase_match, unlisted_match

from phasedb.errors import InputError
from phasedb.report.batch_table import (
    COLUMNS,
    csv_lines,
    failed_row,
    harmless,
    json_lines,
    matched_row,
    phase_cells,
)
from phasedb.report.document import match_document


def record(match, *, full=False, file="a.csv"):
    return {"file": file, "sha256": "0" * 64, **matched_row(match, full=full)}


def read(records):
    return list(csv.DictReader(io.StringIO("".join(csv_lines(records)))))


def test_a_row_names_the_phases_with_their_numbers():
    row = read([record(two_phase_match())])[0]
    assert list(row) == list(COLUMNS)
    assert row["phases"] == "titanium nitride; alpha iron"
    assert row["probabilities"] == "0.9981; 0.9410"
    assert row["a_angstrom"] == "4.2422(2); 2.8654(2)"
    assert (row["line_count"], row["unexplained_lines"]) == ("16", "2")
    assert row["unlisted_lattice_type"] == "F"
    assert row["error"] == ""


def test_an_unlisted_phase_is_in_the_row():
    row = read([record(unlisted_match())])[0]
    assert (row["phases"], row["unlisted_lattice_type"], row["unlisted_a_angstrom"]) == ("", "F", "4.3871(4)")


def test_a_failed_list_is_a_row_with_its_error():
    failed = {
        "file": "b.csv",
        "sha256": "",
        **failed_row(InputError("no lines", where="b.csv:3", hint="add")),
    }
    rows = read([record(two_phase_match()), failed])
    assert [row["status"] for row in rows] == ["matched", "failed"]
    assert rows[1]["error"] == "no lines; b.csv:3; add"


@pytest.mark.parametrize("start", ["=", "+", "-", "@", "\t", "\r"])
def test_no_text_cell_starts_a_formula(start):
    row = read([record(two_phase_match(), file=start + "1+1.csv")])[0]
    assert row["file"].startswith(("'", "\\"))


@given(st.text())
def test_harmless_only_ever_adds_an_apostrophe(text):
    result = harmless(text)
    assert result in (text, "'" + text)
    assert not result.startswith(("=", "+", "-", "@", "\t", "\r"))


def test_hostile_names_are_harmless_in_every_cell():
    row = read([record(hostile_match())])[0]
    numbers = {"zero_deg", "displacement_mm", "noise_deg"}
    for name, cell in row.items():
        assert name in numbers or not cell.startswith(("=", "+", "-", "@")), name


def test_negative_numbers_stay_numbers():
    import dataclasses

    match = two_phase_match()
    match = dataclasses.replace(match, shift=dataclasses.replace(match.shift, zero_deg=-0.0312))
    assert float(read([record(match)])[0]["zero_deg"]) == -0.0312


def test_a_json_line_holds_the_whole_match():
    match = two_phase_match()
    (line,) = json_lines([record(match, full=True)])
    document = json.loads(line)
    assert document["schema"] == "phasedb.batch-row/1"
    assert document["match"] == match_document(match)
    assert document["error"] is None


def test_the_figure_gets_the_same_cells_from_both_kinds():
    match = two_phase_match()
    short, full = phase_cells(record(match)), phase_cells(record(match, full=True))
    assert set(short) == {"titanium nitride", "alpha iron"}
    assert short == pytest.approx(full, abs=1e-4)
