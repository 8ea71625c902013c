"""Entries as JSON: loss-free both ways, history on request, edited files found out."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from running import run

from phasedb.library import Draft, Library
from phasedb.library.chain import row_hash
from phasedb.library.entry import canonical_json

HAND = {"name": "n", "formula": "TiN", "lattice_type": "F", "a_angstrom": 4.2417}


@pytest.fixture
def lived(empty: str, nitride) -> str:
    """A library in which everything has happened to some entry."""
    metals = (
        ("gold", "Au", 4.0786),
        ("silver", "Ag", 4.0862),
        ("copper", "Cu", 3.6150),
        ("nickel", "Ni", 3.5239),
    )
    with Library.open(empty, by="Ann", write=True) as library:
        for name, formula, a in metals:
            library.add(Draft(name, formula, "F", a, structure_type="A1"), accept_warnings=True)
        library.add(nitride, accept_warnings=True)
        library.revise(
            "gold", {"a_angstrom": 4.0785, "remarks": "ä β 相 😀"}, accept_warnings=True, reason="own"
        )
        library.withdraw("silver", reason="=wrong", replaced_by="gold")
        library.withdraw("copper", reason="x")
        library.restore_entry("copper", reason="y")
        library.revise("nickel", {"name": "Nickel, pure", "aliases": ("Ni metal",)}, accept_warnings=True)
    with Library.open(empty, by="Bob", write=True) as library:
        library.check("our nitride", remark="compared")
        library.check("gold")
    return empty


def new_store(tmp_path: Path, name: str = "again.sqlite") -> Path:
    store = tmp_path / name
    assert run("init", "--empty", store=store).code == 0
    return store


def export(store: object, path: Path, *words: str) -> Path:
    assert run("export", path, *words, store=store).code == 0
    return path


def write(path: Path, document: Any) -> Path:
    path.write_text(json.dumps(document, ensure_ascii=False), encoding="utf-8")
    return path


def library_of(*phases: Any) -> dict[str, Any]:
    return {"schema": "phasedb.library/1", "phases": list(phases)}


def audit_faults(store: object) -> list[str]:
    return list(json.loads(run("audit", "--json", store=store).out)["faults"])


# --- round trips


def test_everything_comes_back_and_the_bytes_are_the_same(lived: str, tmp_path: Path) -> None:
    first = export(lived, tmp_path / "1.json")
    again = new_store(tmp_path)
    assert run("import", first, "--json", store=again).json["new"] == 5
    assert export(again, tmp_path / "2.json").read_bytes() == first.read_bytes()
    with Library.open(lived) as one, Library.open(str(again)) as other:
        assert one.entries() == other.entries()
        assert one.fingerprint == other.fingerprint
        assert other.get("our nitride").checked_by == "Bob"
        assert other.get("silver").withdrawn_reason == "=wrong"
    assert audit_faults(again) == []


def test_the_history_is_carried_along_on_request(lived: str, tmp_path: Path) -> None:
    first = export(lived, tmp_path / "1.json", "--with-history")
    told = json.loads(first.read_text(encoding="utf-8"))["history"]
    with Library.open(lived) as library:
        assert [row["hash"] for row in told["rows"]] == [row.hash for row in library.history()]
        assert told["head"] == library.history_head
    again = new_store(tmp_path)
    ran = run("import", first, "--json", store=again).json
    about_entries = [row for row in told["rows"] if row["kind"] == "phase"]
    assert ran["history_rows_carried_over"] == len(about_entries)
    with Library.open(str(again)) as library:
        carried = [json.loads(row.after or "") for row in library.history() if row.action == "carried over"]
        gold = library.history("gold")
    assert {row.pop("library_id") for row in carried} == {told["library_id"]}
    assert carried == about_entries
    assert len([row for row in gold if row.action == "carried over"]) == 3
    assert audit_faults(again) == []


def test_a_history_carried_twice_over_is_kept_once(lived: str, tmp_path: Path) -> None:
    first = export(lived, tmp_path / "1.json", "--with-history")
    second_store, third_store = new_store(tmp_path, "2.sqlite"), new_store(tmp_path, "3.sqlite")
    run("import", first, store=second_store)
    second = export(second_store, tmp_path / "2.json", "--with-history")
    assert run("import", second, store=third_store).code == 0
    with Library.open(str(third_store)) as library:
        rows = [json.loads(r.after or "") for r in library.history() if r.action == "carried over"]
    origins = {row["library_id"] for row in rows}
    assert len(origins) == 2
    assert len({(row["library_id"], row["number"]) for row in rows}) == len(rows)
    again = run("import", first, second, "--json", store=third_store).json
    assert (again["new"], again["history_rows_carried_over"]) == (0, 0)


@pytest.mark.parametrize("words", [(), ("--with-history",)])
def test_importing_twice_changes_not_one_byte(lived: str, tmp_path: Path, words: tuple[str, ...]) -> None:
    first = export(lived, tmp_path / "1.json", *words)
    again = new_store(tmp_path)
    run("import", first, store=again)
    before = again.read_bytes()
    ran = run("import", first, "--json", store=again).json
    assert (ran["new"], ran["already_here"], ran["left_out"]) == (0, 5, [])
    assert again.read_bytes() == before
    assert run("import", first, "--json", store=lived).json["already_here"] == 5


def test_a_library_of_then_can_be_exported_as_it_is_now_only(lived: str, tmp_path: Path) -> None:
    export(lived, tmp_path / "1.csv")
    refused = run("export", tmp_path / "2.csv", "--with-history", store=lived)
    assert refused.code == 2
    assert "only JSON holds the history" in refused.err
    assert not (tmp_path / "2.csv").exists()


# --- edited files


def edited(path: Path, change: Any) -> Path:
    document = json.loads(path.read_text(encoding="utf-8"))
    change(document)
    return write(path.with_name("edited.json"), document)


def rehash(document: dict[str, Any], start: int) -> None:
    """Make the chain look right again from row `start` on, as somebody might who knows how."""
    rows = document["history"]["rows"]
    for index in range(start, len(rows)):
        row = rows[index]
        if index:
            row["previous_hash"] = rows[index - 1]["hash"]
        texts = {k: None if row[k] is None else canonical_json(row[k]) for k in ("before", "after")}
        values = {**row, **texts}
        order = ("number", "at", "who", "login", "host", "program_version", "action", "kind", "key")
        order += ("before", "after", "remark", "previous_hash")
        row["hash"] = row_hash(tuple(values[name] for name in order))


def test_an_edited_history_is_refused(lived: str, tmp_path: Path) -> None:
    first = export(lived, tmp_path / "1.json", "--with-history")
    again = new_store(tmp_path)

    def refuse(change: Any, said: str) -> None:
        ran = run("import", edited(first, change), store=again)
        assert ran.code == 2
        assert said in ran.err
        assert "export again" in ran.err

    refuse(lambda d: d["history"]["rows"][3].update(who="Eve"), "row 4 was changed")
    refuse(lambda d: d["history"]["rows"].pop(3), "row 4 cannot be read")
    refuse(lambda d: d["history"]["rows"].pop(), "its head is not that of its last row")
    refuse(lambda d: d["phases"][0].update(remarks="better"), "is not what it says")
    refuse(lambda d: d["phases"].pop(0), "entries that are not in the file")

    def consistent_lie(document: dict[str, Any]) -> None:
        document["history"]["rows"][3]["who"] = "Eve"
        rehash(document, 3)

    refuse(consistent_lie, "its head is not that of its last row")
    with Library.open(str(again)) as library:
        assert library.history_count == 1


@pytest.mark.parametrize(
    ("change", "column"),
    [
        ({"checked_by": None, "checked_at": None}, "checked_by"),
        ({"checked_by": "ann "}, "checked_by"),
        ({"standing": "draft"}, "checked_by"),
        ({"standing": "good"}, "standing"),
        ({"version": 0}, "version"),
        ({"version": "2"}, "version"),
        ({"uid": "x"}, "uid"),
        ({"entered_by": None, "entered_at": None}, "entered_by"),
        ({"entered_at": "yesterday"}, "entered_at"),
        ({"replaced_by": "0" * 32}, "replaced_by"),
        ({"withdrawn_reason": "x"}, "withdrawn_reason"),
        ({"a_angstrom": "4.2 miles"}, "a_angstrom"),
        ({"a_angstrom": True}, "a_angstrom"),
        ({"a_angstrom": None}, "a_angstrom"),
        ({"a_angstrom": 1e400}, None),
        ({"temperature_K": 10**400}, "temperature_K"),
        ({"sites": "none"}, "sites"),
        ({"sites": [{"label": "x", "species": [["Ti", 1.5]], "position": [0, 0, 0], "b_iso": 0.5}]}, "sites"),
        ({"sites": [{"label": "x", "species": [["Zz", 1]], "position": [0, 0, 0], "b_iso": 0.5}]}, "sites"),
        ({"sites": [{"label": "x", "species": [["Ti", 1]], "position": [0, 0], "b_iso": 0.5}]}, "sites"),
        ({"space_group": "P1"}, "sites"),
        ({"sources": [{"citation": 5}]}, "sources"),
        ({"sources": [{"citation": "x", "kind": "rumour"}]}, "sources"),
        ({"tags": "one"}, "tags"),
        ({"name": "two\nlines\x00"}, "name"),
        ({"remarks": "\ud800"}, "remarks"),
    ],
)
def test_impossible_facts_are_refused(
    empty: str, tmp_path: Path, nitride, change: dict[str, Any], column: str
) -> None:
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(nitride)
    with Library.open(empty, by="Bob", write=True) as library:
        library.check("our nitride")
    phase = json.loads(export(empty, tmp_path / "1.json").read_text(encoding="utf-8"))["phases"][0]
    phase.update(change)
    path = tmp_path / "edited.json"
    path.write_text(json.dumps(library_of(phase)))
    again = new_store(tmp_path)
    ran = run("import", path, store=again)
    assert ran.code == 2
    if column is not None:
        assert f"row 1, column {column}: " in ran.err
    with Library.open(str(again)) as library:
        assert library.history_count == 1


# --- written by hand


def test_an_entry_by_hand_is_a_draft_of_who_brings_it(empty: str, tmp_path: Path) -> None:
    path = write(
        tmp_path / "hand.json", library_of({**HAND, "a_angstrom": "0.42417(2) nm"}, {**HAND, "name": "m"})
    )
    assert run("import", path, store=empty, by="Zoe").code == 0
    shown = run("show", "n", "--json", store=empty).json["phase"]
    assert (shown["a_angstrom"], shown["a_esd_angstrom"]) == (4.2417, 0.0002)
    assert (shown["standing"], shown["entered_by"], shown["version"]) == ("draft", "Zoe", 1)


@pytest.mark.parametrize(
    ("change", "column"),
    [
        ({"a_angstrom": 0.42417}, "a_angstrom"),
        ({"checked_by": "Ann"}, "checked_by"),
        ({"standing": "checked"}, "standing"),
        ({"version": 3}, "version"),
        ({"formula": 5}, "formula"),
        ({"lattice_type": "cubic"}, "lattice_type"),
    ],
)
def test_an_entry_by_hand_cannot_claim_more(
    empty: str, tmp_path: Path, change: dict[str, Any], column: str
) -> None:
    ran = run("import", write(tmp_path / "hand.json", library_of({**HAND, **change})), store=empty)
    assert ran.code == 2
    assert f"row 1, column {column}: " in ran.err


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "the file is empty"),
        ("[]", "expected 'phasedb.library/1'"),
        ("{}", "expected 'phasedb.library/1'"),
        ('{"schema": "phasedb.match/1"}', "expected 'phasedb.library/1'"),
        ('{"schema": "phasedb.library/1"}', "'phases' is not a list"),
        ('{"schema": "phasedb.library/1", "phases": [1, null, "x"]}', "row 3: read 'x', expected an object"),
        ('{"schema": "phasedb.library/1", "phases": [', "not valid JSON"),
        ('{"schema": "phasedb.library/1", "phases": [], "a": NaN}', "expected a finite number"),
        ('{"schema": "phasedb.library/1", "phases": [], "phases": []}', "'phases' twice"),
        ("[" * 100_000, "JSON"),
        ('{"schema": "phasedb.library/1", "phases": [' + "9" * 5000 + "]}", "JSON"),
    ],
)
def test_what_is_not_a_library_gets_a_clear_error(empty: str, tmp_path: Path, text: str, said: str) -> None:
    path = tmp_path / "file.json"
    path.write_text(text)
    ran = run("import", path, store=empty)
    assert ran.code == 2
    assert said in ran.err
    assert "file.json" in ran.err
