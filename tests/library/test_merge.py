"""Merging another lab's library: listed first, all or nothing, with its history."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from running import run

from phasedb.library import Draft, Library


def audit_faults(store: object) -> list[str]:
    return list(json.loads(run("audit", "--json", store=store).out)["faults"])


@pytest.fixture
def other(tmp_path: Path) -> str:
    """Another lab's library: two entries of its own, one of them checked, one withdrawn."""
    path = tmp_path / "other.sqlite"
    with Library.create(path, by="Olga", starter=False) as library:
        library.add(Draft("their carbide", "TaC", "F", 4.4555, a_esd_angstrom=0.0003))
        library.add(Draft("old carbide", "TaC", "F", 4.50))
        library.withdraw("old carbide", reason="kX", replaced_by="their carbide")
    with Library.open(path, by="Pia", write=True) as library:
        library.check("their carbide")
    return str(path)


def test_entries_come_with_standing_replacement_and_history(starter: str, other: str) -> None:
    ran = run("merge", other, "--json", store=starter).json
    assert (ran["new"], ran["clashes"]) == (["old carbide", "their carbide"], [])
    assert ran["history_rows_carried_over"] == 4
    with Library.open(starter) as library:
        carbide, old = library.get("their carbide"), library.get("old carbide")
        assert (carbide.standing, carbide.checked_by, carbide.entered_by) == ("checked", "Pia", "Olga")
        assert (old.standing, old.replaced_by) == ("withdrawn", carbide.uid)
        actions = [row.action for row in library.history("their carbide")]
        assert actions == ["merged", "carried over", "carried over"]
    told = run("history", "their carbide", store=starter).out
    assert "Olga  entered phase 'their carbide'" in told
    assert "Pia  checked phase 'their carbide'" in told
    assert "carried over by A. First" in " ".join(told.split())
    assert audit_faults(starter) == []
    before = Path(starter).read_bytes()
    again = run("merge", other, "--json", store=starter).json
    assert (again["new"], again["already_here"], again["history_rows_carried_over"]) == ([], 2, 0)
    assert Path(starter).read_bytes() == before


def test_a_dry_run_lists_and_writes_nothing(starter: str, other: str) -> None:
    with Library.open(other, by="Olga", write=True) as library:
        library.add(Draft("near gold", "AuCu", "F", 4.0785))
    before = Path(starter).read_bytes()
    ran = run("merge", other, "--dry-run", store=starter)
    assert ran.code == 0
    assert "new: their carbide: TaC, F, 4.4555 Å" in ran.out
    assert "nothing was written" in ran.out
    assert "neighbour: " in ran.err
    assert "'near gold': 4.0785 Å is within" in ran.err
    assert Path(starter).read_bytes() == before


def test_each_entry_gets_its_own_warnings_in_the_history(starter: str, other: str) -> None:
    with Library.open(other, by="Olga", write=True) as library:
        library.add(Draft("near gold", "AuCu", "F", 4.0785), accept_warnings=True)
    run("merge", other, store=starter)
    rows = {
        name: run("history", name, "--json", store=starter).json["rows"][0]
        for name in ("near gold", "old carbide")
    }
    assert "accepted warning: 4.0785 Å is within" in rows["near gold"]["remark"]
    assert "accepted" not in rows["old carbide"]["remark"]


def test_the_same_starter_entries_are_the_same(starter: str, tmp_path: Path) -> None:
    second = tmp_path / "second.sqlite"
    run("init", store=second)
    ran = run("merge", second, "--json", store=starter).json
    assert (ran["new"], ran["already_here"], ran["clashes"]) == ([], 364, [])


def test_clashes_stop_everything_until_a_side_is_chosen(starter: str, other: str) -> None:
    with Library.open(other, by="Olga", write=True) as library:
        library.add(Draft("GOLD", "Au", "F", 4.07))
    before = Path(starter).read_bytes()
    ran = run("merge", other, store=starter)
    assert ran.code == 3
    assert ran.out == ""
    assert "'gold' is in the library with other values (here -> there)" in ran.err
    assert Path(starter).read_bytes() == before
    kept = run("merge", other, "--keep-ours", "--json", store=starter).json
    assert (kept["new"], len(kept["clashes"])) == (["old carbide", "their carbide"], 1)
    with Library.open(starter) as library:
        assert library.get("gold").content.a_angstrom != 4.07


def test_two_copies_that_moved_on(starter: str, made_once: Path, tmp_path: Path) -> None:
    copy = str(tmp_path / "copy.sqlite")
    shutil.copyfile(made_once, copy)
    with Library.open(copy, by="Olga", write=True) as library:
        library.revise("gold", {"remarks": "theirs"})
        library.revise("silver", {"remarks": "theirs"})
    with Library.open(starter, by="Ann", write=True) as library:
        library.revise("silver", {"remarks": "ours"})
        library.revise("copper", {"remarks": "ours"})
    refused = run("merge", copy, store=starter)
    assert refused.code == 3
    assert "'silver' was changed here (version 2) and there (version 2)" in refused.err
    ran = run("merge", copy, "--keep-ours", "--json", store=starter).json
    assert ran["brought_up_to_date"] == ["gold"]
    assert ran["here_in_a_later_state"] == 1  # copper
    with Library.open(starter) as library:
        remarks = [library.get(name).content.remarks for name in ("gold", "silver", "copper")]
    assert remarks[0] == "theirs"
    assert "ours" in remarks[1]
    assert audit_faults(starter) == []


def test_what_cannot_be_merged(starter: str, other: str, tmp_path: Path) -> None:
    assert run("merge", starter, store=starter).code == 2
    assert run("merge", tmp_path / "nothing.sqlite", store=starter).code == 4
    empty = tmp_path / "empty.sqlite"
    empty.touch()
    assert run("merge", empty, store=starter).code == 4
    table = tmp_path / "table.csv"
    table.write_text("name\n")
    assert run("merge", table, store=starter).code == 4
    import sqlite3

    with sqlite3.connect(other) as connection:
        connection.execute("UPDATE phase SET a_angstrom = 4.46 WHERE name = 'their carbide'")
    connection.close()
    ran = run("merge", other, store=starter)
    assert ran.code == 4
    assert "the other library is not whole" in ran.err
    with Library.open(starter) as library:
        assert library.history_count == 365
