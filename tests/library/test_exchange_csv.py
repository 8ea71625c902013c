"""Tables of entries: what is read, what is refused with its place, what comes back after a round trip."""

from __future__ import annotations

import csv
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from running import run

from phasedb.library import Library
from phasedb.library.exchange_csv import COLUMNS, guarded, read_csv, unguarded
from phasedb.library.exchange_rows import BadRow, Candidate

HEAD = "name,formula,lattice_type,a_angstrom"


def rows_of(text: str) -> tuple[list[Candidate | BadRow], list[str]]:
    notes: list[str] = []
    return list(read_csv(text, "table.csv", notes)), notes


def only(text: str) -> Candidate | BadRow:
    rows, _ = rows_of(text)
    assert len(rows) == 1
    return rows[0]


def test_a_row_becomes_a_checked_draft() -> None:
    row = only(
        "name,formula,lattice_type,a_angstrom,temperature_K,thermal_expansion_per_k,drift_class,structure_type\n"
        "our nitride,TiN,F,0.42417(2) nm,298,9.4e-6,solid solution,rock salt\n"
    )
    assert isinstance(row, Candidate)
    content = row.prepared.content
    assert (content.a_angstrom, content.a_esd_angstrom) == (4.2417, 0.0002)
    assert (content.temperature_k, content.expansion_per_k) == (298.0, 9.4e-6)
    assert (content.drift_class, content.structure_type) == ("solid solution", "B1")
    assert len(content.sites) == 2


@pytest.mark.parametrize(
    ("column", "value", "reason"),
    [
        ("name", "", "missing"),
        ("name", "x" * 201, "201 characters"),
        ("name", "a\u202eb", "cannot be seen"),
        ("formula", "Xx2", "unknown element"),
        ("formula", "", "missing"),
        ("lattice_type", "C", "'C'"),
        ("a_angstrom", "four", "not a number"),
        ("a_angstrom", "0.42417", "nm typed by mistake"),
        ("a_angstrom", "424.17", "pm typed by mistake"),
        ("a_angstrom", "nan", "not a number"),
        ("a_angstrom", "-4.2", "not possible"),
        ("a_angstrom", "4,2417", "decimal point"),
        ("a_esd_angstrom", "3", "esd of a"),
        ("temperature_K", "-5", "temperature"),
        ("temperature_K", "25 C", "unit"),
        ("thermal_expansion_per_k", "9.4", "thermal expansion"),
        ("formula_units_per_cell", "0", "formula units"),
        ("drift_class", "wobbly", "drift class"),
        ("measured_density_g_cm3", "5000", "density"),
        ("a_min_angstrom", "4.1", "both ends"),
        ("source_kind", "rumour", "source kind"),
        ("standing", "approved", "expected draft, checked or withdrawn"),
        ("remarks", "bell \x07", "control character"),
        ("remarks", "x" * 1_000_000, "1000000 characters"),
    ],
)
def test_a_bad_value_is_reported_with_row_column_and_reason(column: str, value: str, reason: str) -> None:
    fields = {"name": "n", "formula": "TiN", "lattice_type": "F", "a_angstrom": "4.2417", "source": "own"}
    fields[column] = value
    text = f"{','.join(fields)}\n" + ",".join(f'"{cell}"' for cell in fields.values()) + "\n"
    row = only(text)
    assert isinstance(row, BadRow)
    assert (row.file, row.row, row.column) == ("table.csv", 2, column)
    assert reason in row.reason


def test_rows_are_counted_as_a_spreadsheet_counts_them() -> None:
    rows, _ = rows_of(f'{HEAD},remarks\na,Fe,I,2.87,"two\nlines"\n\nb,Fe,I,bad,\n,,,,\nc,Fe,I,2.87\n')
    kinds = [(type(row).__name__, row.row) for row in rows]
    assert kinds == [("Candidate", 2), ("BadRow", 4), ("BadRow", 6)]
    assert "the row has 4 cells, the header 5" in rows[2].reason


def test_a_quotation_mark_that_is_not_closed_is_a_bad_row() -> None:
    rows, _ = rows_of(f'{HEAD}\na,Fe,I,2.87\nb,"Fe,I,2.87\nc,Fe,I,2.87\n')
    assert isinstance(rows[0], Candidate)
    assert isinstance(rows[1], BadRow)
    assert rows[1].row == 3
    assert "quotation marks" in rows[1].reason


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "lacks name, formula, lattice_type, a_angstrom"),
        ("\n\n", "lacks"),
        ("name,formula,a_angstrom\n", "lacks lattice_type"),
        (f"{HEAD},name\n", "name twice"),
        ("4.2,5.3\n1,2\n", "lacks"),
    ],
)
def test_a_table_without_a_usable_header_is_refused(text: str, said: str) -> None:
    with pytest.raises(ValueError, match="header row") as error:
        rows_of(text)
    assert said in str(error.value)
    assert "table.csv, row 1" in str(error.value)


def test_unknown_columns_are_left_out_and_named() -> None:
    rows, notes = rows_of(f"{HEAD},price\na,Fe,I,2.87,5\n")
    assert isinstance(rows[0], Candidate)
    assert notes == ["table.csv: columns not known and left out: 'price'"]


@pytest.mark.parametrize("delimiter", [",", ";", "\t"])
def test_delimiters_that_spreadsheets_write(delimiter: str) -> None:
    row = only(f"{HEAD}\na,Fe,I,2.8665\n".replace(",", delimiter))
    assert isinstance(row, Candidate)
    assert row.prepared.content.a_angstrom == 2.8665


def test_header_names_in_any_case_and_with_a_bom(empty: str, tmp_path: Path) -> None:
    path = tmp_path / "table.CSV"
    path.write_bytes(f"\ufeff{HEAD.upper()}\r\nEisen \u03b1,Fe,I,2.8665\r\n".encode())
    assert run("import", path, store=empty).code == 0
    path.write_bytes(f"{HEAD}\nnickel,Ni,F,3.5239\n".encode("utf-16"))
    assert run("import", path, store=empty).code == 0
    names = [phase["name"] for phase in run("list", "--json", store=empty).json["phases"]]
    assert names == ["Eisen \u03b1", "nickel"]


# --- harmless cells


@given(st.text())
def test_guarding_is_undone_on_reading(text: str) -> None:
    assert unguarded(guarded(text)) == text


@given(st.text(alphabet="'=+-@\t\r01.eE(", min_size=1))
def test_a_guarded_cell_is_a_number_or_starts_harmlessly(text: str) -> None:
    cell = guarded(text)
    try:
        float(cell)
    except ValueError:
        assert cell[0] not in "=+-@\t\r"


@pytest.mark.parametrize("risky", ["=1+1", "+1-1", "-2+3+cmd|' /C calc'!A0", "@SUM(1)", "'=1", "''+x"])
def test_names_that_are_formulas_go_out_harmlessly_and_come_back(
    empty: str, tmp_path: Path, risky: str
) -> None:
    with Library.open(empty, by="Ann", write=True) as library:
        from phasedb.library import Draft

        library.add(Draft(risky, "Fe", "I", 2.87, remarks=risky, tags=(risky,)), accept_warnings=True)
    out, again = tmp_path / "out.csv", tmp_path / "again.sqlite"
    assert run("export", out, store=empty).code == 0
    with out.open(newline="", encoding="utf-8") as stream:
        cells = [cell for row in csv.reader(stream) for cell in row]
    assert not [cell for cell in cells if cell.startswith(("=", "+", "-", "@"))]
    run("init", "--empty", store=again)
    assert run("import", out, store=again).code == 0
    with Library.open(str(again)) as library:
        content = library.get(risky).content
        assert (content.name, content.remarks, content.tags) == (risky, risky, (risky,))


# --- round trips


def test_a_table_comes_back_the_same(starter: str, tmp_path: Path) -> None:
    first, second, again = tmp_path / "1.csv", tmp_path / "2.csv", tmp_path / "again.sqlite"
    with Library.open(starter, by="Bob", write=True) as library:
        library.withdraw("gold", reason="=not ours", replaced_by="silver")
    assert run("export", first, store=starter).code == 0
    assert first.read_text(encoding="utf-8").splitlines()[0] == ",".join(COLUMNS)
    run("init", "--empty", store=again)
    ran = run("import", first, "--json", store=again).json
    assert (ran["new"], ran["left_out"]) == (364, [])
    run("export", second, store=again)
    assert second.read_bytes() == first.read_bytes()
    with Library.open(str(again)) as library:
        gold = library.get("gold")
        assert (gold.standing, gold.withdrawn_reason) == ("withdrawn", "=not ours")
        assert gold.replaced_by == library.get("silver").uid
        assert library.phase_count == 363


def test_a_checked_entry_comes_as_a_draft_and_that_is_said(empty: str, tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    path.write_text(f"{HEAD},standing\na,Fe,I,2.8665,checked\n")
    ran = run("import", path, store=empty)
    assert ran.code == 0
    assert "comes as a draft" in ran.err
    assert run("show", "a", "--json", store=empty).json["phase"]["standing"] == "draft"


def test_what_a_table_cannot_hold_is_said(empty: str, tmp_path: Path, nitride) -> None:
    from dataclasses import replace

    from phasedb.library import Source

    sources = (*nitride.sources, Source("b"), Source("c"))
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(replace(nitride, sources=sources))
    ran = run("export", tmp_path / "out.csv", store=empty)
    assert "a table does not hold ('our nitride')" in ran.err
    assert "a JSON export holds all" in ran.err


def test_lengths_that_read_as_another_unit_keep_theirs(empty: str, tmp_path: Path) -> None:
    table, out = tmp_path / "table.csv", tmp_path / "out.csv"
    table.write_text(f"{HEAD}\nsmall,Fe,P,1.2 Å\nlarge,Fe,P,170 Å\n", encoding="utf-8")
    assert run("import", table, store=empty).code == 0
    assert run("export", out, store=empty).code == 0
    assert run("import", out, "--json", store=empty).json["already_here"] == 2
