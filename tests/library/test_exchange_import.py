"""What an import does to a library: all or nothing, every bad row named, nothing twice."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager
from pathlib import Path

import pytest
from running import run

from phasedb.library import Draft, Library

HEAD = "name,formula,lattice_type,a_angstrom,remarks\n"


@pytest.fixture
def table(tmp_path: Path) -> Path:
    path = tmp_path / "table.csv"
    path.write_text(f"{HEAD}iron,Fe,I,2.8665,\nnickel,Ni,F,3.5239,\n")
    return path


def names(store: object) -> list[str]:
    return [phase["name"] for phase in run("list", "--json", store=store).json["phases"]]


def test_one_bad_row_stops_everything_and_all_are_named(empty: str, table: Path, tmp_path: Path) -> None:
    other = tmp_path / "other.csv"
    other.write_text(f"{HEAD}a,Fe,I,bad,\nb,Zz,I,2.9,\nc,Fe,X,2.9,\n")
    before = Path(empty).read_bytes()
    ran = run("import", table, other, store=empty)
    assert ran.code == 2
    assert ran.out == ""
    assert "3 rows of 5 cannot be brought in, and nothing was written" in ran.err
    for row, column in ((2, "a_angstrom"), (3, "formula"), (4, "lattice_type")):
        assert f"{other}, row {row}, column {column}: " in ran.err
    assert Path(empty).read_bytes() == before


def test_bad_rows_are_left_out_on_request_and_listed(empty: str, table: Path) -> None:
    table.write_text(table.read_text() + "a,Fe,I,bad,\nnickel,Ni,F,3.6,\n")
    ran = run("import", table, "--skip-bad", "--json", store=empty)
    document = ran.json
    assert document["new"] == 2
    assert [(row["row"], row["column"]) for row in document["left_out"]] == [(4, "a_angstrom"), (5, "name")]
    assert ran.err.count("left out: ") == 2
    assert names(empty) == ["iron", "nickel"]


def test_only_bad_rows_still_say_so(empty: str, table: Path) -> None:
    table.write_text(f"{HEAD}a,Fe,I,bad,\n")
    assert run("import", table, store=empty).code == 2
    ran = run("import", table, "--skip-bad", "--json", store=empty)
    assert (ran.json["new"], len(ran.json["left_out"])) == (0, 1)


def test_a_second_import_finds_everything_there(empty: str, table: Path) -> None:
    assert "2 entries brought in" in run("import", table, store=empty).out
    before = Path(empty).read_bytes()
    assert run("import", table, store=empty).out == "0 entries brought in, 2 already here\n"
    assert Path(empty).read_bytes() == before


def test_an_entry_revised_since_is_left_as_it_is(empty: str, table: Path) -> None:
    run("import", table, store=empty)
    assert run("revise", "iron", "--a", "2.8670", store=empty).code == 0
    before = Path(empty).read_bytes()
    ran = run("import", table, "--json", store=empty).json
    assert (ran["already_here"], ran["here_in_a_later_state"]) == (1, 1)
    assert Path(empty).read_bytes() == before


def test_other_values_under_a_known_name_are_a_bad_row(empty: str, table: Path) -> None:
    run("import", table, store=empty)
    table.write_text(f"{HEAD}IRON,Fe,I,2.87,\nnew,Co,F,3.54,\n")
    ran = run("import", table, store=empty)
    assert ran.code == 2
    assert "row 2, column name: 'iron' is in the library with other values" in ran.err
    assert "2.8665 -> 2.87" in ran.err
    assert "new" not in names(empty)


def test_a_column_that_is_not_there_contradicts_nothing(starter: str, tmp_path: Path) -> None:
    path = tmp_path / "few columns.csv"
    with Library.open(starter) as library:
        gold = library.get("gold").content
    path.write_text(f"name,formula,lattice_type,a_angstrom,tags\ngold,Au,F,{gold.a_angstrom},\n")
    assert run("import", path, "--json", store=starter).json["already_here"] == 1
    path.write_text(f"name,formula,lattice_type,a_angstrom,tags\ngold,Au,F,{gold.a_angstrom},shiny\n")
    ran = run("import", path, store=starter)
    assert ran.code == 2
    assert "tags: starter -> shiny" in ran.err


def test_names_within_one_import(empty: str, table: Path, tmp_path: Path) -> None:
    other = tmp_path / "other.csv"
    other.write_text(f"{HEAD}iron,Fe,I,2.8665,\nIron,Fe,I,2.9,\n")
    ran = run("import", table, other, store=empty)
    assert ran.code == 2
    assert f"{other}, row 3, column name: {table}, row 2 has the name 'Iron' already" in ran.err
    other.write_text(f"{HEAD}iron,Fe,I,2.8665,\n")
    ran = run("import", table, other, "--json", store=empty).json
    assert (ran["new"], ran["already_here"]) == (2, 1)


def test_aliases_are_names(empty: str, tmp_path: Path) -> None:
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(Draft("iron", "Fe", "I", 2.8665, aliases=("ferrite",)))
    path = tmp_path / "table.csv"
    head = "name,formula,lattice_type,a_angstrom,aliases\n"
    for rows, said in (
        ("Ferrite,Fe,I,2.87,\n", "'Ferrite' belongs to another entry"),
        ("new,Fe,I,2.87,FERRITE\n", "'FERRITE' belongs to another entry"),
        ("one,Ni,F,3.5,two\ntwo,Cu,F,3.6,\n", "row 2 has the name 'two' already"),
        ("one,Ni,F,3.5,\ntwo,Cu,F,3.6,one\n", "'one' belongs to the entry in row 2"),
    ):
        path.write_text(head + rows)
        ran = run("import", path, store=empty)
        assert ran.code == 2
        assert said in ran.err
    assert names(empty) == ["iron"]


def test_history_says_where_each_entry_came_from(empty: str, table: Path) -> None:
    run("import", table, store=empty, by="Zoe")
    row = run("history", "nickel", "--json", store=empty).json["rows"][-1]
    assert (row["action"], row["who"]) == ("imported", "Zoe")
    assert f"from {table}, row 3 (sha256 " in row["remark"]


def test_warnings_are_reported_row_by_row_and_recorded_but_written(empty: str, table: Path) -> None:
    table.write_text(f"{HEAD}a,Fe,I,2.8665,\nb,Fe,I,2.8666,\nc,Fe,I,2.87229,\n")
    ran = run("import", table, "--json", store=empty)
    warned = [(row["row"], row["kind"]) for row in ran.json["warnings"]]
    assert (3, "near") in warned  # b lies within 0.004 % of a
    assert (4, "kx") in warned  # c is 1.00202 times a
    assert ran.err.count("warning: ") == len(warned)
    assert names(empty) == ["a", "b", "c"]
    assert "accepted warning" in run("history", "b", "--json", store=empty).json["rows"][-1]["remark"]


def test_a_withdrawn_row_needs_its_reason_and_finds_its_replacement(empty: str, tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    head = "name,formula,lattice_type,a_angstrom,standing,withdrawn_reason,replaced_by\n"
    path.write_text(f"{head}old,Fe,I,2.9,withdrawn,,\n")
    assert "column withdrawn_reason" in run("import", path, store=empty).err
    path.write_text(f"{head}old,Fe,I,2.9,withdrawn,wrong,nobody\n")
    assert "column replaced_by: its replacement 'nobody'" in run("import", path, store=empty).err
    path.write_text(f"{head}old,Fe,I,2.9,withdrawn,wrong,New\nnew,Fe,I,2.8665,,,\n")
    assert run("import", path, store=empty).code == 0
    assert names(empty) == ["new"]
    assert run("show", "old", "--json", store=empty).json["phase"]["replaced_by"] == "new"
    assert run("import", path, "--json", store=empty).json["already_here"] == 2


def test_a_newer_state_of_an_untouched_entry_is_taken_over(tmp_path: Path, starter: str) -> None:
    first, second = tmp_path / "1.json", tmp_path / "2.json"
    here = tmp_path / "here.sqlite"
    run("init", "--empty", store=here)
    run("export", first, store=starter)
    run("import", first, store=here)
    with Library.open(starter, by="Ann", write=True) as library:
        library.revise("gold", {"remarks": "better"})
    run("export", second, store=starter)
    ran = run("import", second, "--json", store=here).json
    assert (ran["brought_up_to_date"], ran["already_here"]) == (1, 363)
    assert run("show", "gold", "--json", store=here).json["phase"]["remarks"] == "better"
    older = run("import", first, "--json", store=here).json
    assert (older["here_in_a_later_state"], older["brought_up_to_date"]) == (1, 0)
    assert json.loads(run("audit", "--json", store=here).out)["faults"] == []


def test_an_entry_changed_on_both_sides_is_a_bad_row(tmp_path: Path, starter: str) -> None:
    first = tmp_path / "1.json"
    here = tmp_path / "here.sqlite"
    run("init", "--empty", store=here)
    run("export", first, store=starter)
    run("import", first, store=here)
    for store, remark in ((starter, "first"), (starter, "theirs"), (here, "ours")):
        run("revise", "gold", "--remarks", remark, store=store)
    run("export", first, store=starter)
    ran = run("import", first, store=here)
    assert ran.code == 2
    assert "'gold' was changed here (version 2) and there (version 3)" in ran.err
    assert "remarks: ours -> theirs" in ran.err


def test_a_write_between_planning_and_writing_is_not_overlooked(empty: str, tmp_path: Path) -> None:
    """Planning is done before the store is locked; here somebody takes the name right after it."""
    from phasedb.library.exchange_import import BadRowsError, GivenFile, import_files

    table = f"{HEAD}iron,Fe,I,2.8665,\nnickel,Ni,F,3.5239,\n"
    with Library.open(empty, by="Zoe", write=True) as library:
        planned: list[str] = []
        reading = library.reading

        def read_then_lose() -> object:
            if not planned:
                planned.append("once")
                return _after(reading(), lambda: add_iron(empty))
            return reading()

        library.reading = read_then_lose  # type: ignore[method-assign,assignment]
        with pytest.raises(BadRowsError, match="'iron' is in the library with other values"):
            import_files(library, [GivenFile("table.csv", table, "0" * 64, "csv")])
    assert names(empty) == ["iron"]


def add_iron(store: str) -> None:
    with Library.open(store, by="Ann", write=True) as other:
        other.add(Draft("iron", "Fe", "I", 2.87))


@contextmanager
def _after(block: AbstractContextManager[object], then: Callable[[], None]) -> Iterator[object]:
    with block as value:
        yield value
    then()


def test_what_cannot_be_read_is_said(empty: str, tmp_path: Path) -> None:
    folder = tmp_path / "folder.csv"
    folder.mkdir()
    binary = tmp_path / "binary.csv"
    binary.write_bytes(bytes(range(256)))
    for path, said in (
        (tmp_path / "nothing.csv", "no such file"),
        (folder, "this is a folder"),
        (binary, "binary"),
        (tmp_path / "table.xlsx", "expected .csv, .json or .cif"),
        (tmp_path / "noname", "expected .csv, .json or .cif"),
    ):
        ran = run("import", path, store=empty)
        assert ran.code == 2
        assert said in ran.err


def test_a_file_without_rows_is_said(empty: str, table: Path) -> None:
    table.write_text(HEAD)
    ran = run("import", table, store=empty)
    assert ran.code == 0
    assert "there is no row in it" in ran.err


def test_export_replaces_a_file_whole_or_not_at_all(starter: str, tmp_path: Path) -> None:
    path = tmp_path / "out.json"
    path.write_text("old")
    assert run("export", path, store=starter).code == 0
    assert json.loads(path.read_text(encoding="utf-8"))["phase_count"] == 364
    assert [p.name for p in tmp_path.iterdir() if "out" in p.name] == ["out.json"]
    ran = run("export", tmp_path / "no folder" / "out.json", store=starter)
    assert ran.code == 2
    assert "cannot be written" in ran.err
    as_store = Path(starter).with_name("lab.json")
    Path(starter).rename(as_store)
    before = as_store.read_bytes()
    assert run("export", as_store, store=as_store).code == 2
    assert as_store.read_bytes() == before


def test_cif_goes_out_and_comes_back(starter: str, tmp_path: Path) -> None:
    path, again = tmp_path / "all.cif", tmp_path / "again.sqlite"
    assert run("export", path, store=starter).code == 0
    run("init", "--empty", store=again)
    assert run("import", path, "--json", store=again).json["new"] == 364
    assert run("import", path, "--json", store=again).json["already_here"] == 364
    with Library.open(starter) as one, Library.open(str(again)) as other:
        for name in ("silicon", "magnetite"):
            assert one.get(name).content.a_angstrom == other.get(name).content.a_angstrom
            assert len(one.get(name).content.sites) == len(other.get(name).content.sites)
