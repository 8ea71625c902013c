"""Backups: made in use, proved, put back without losing what was there."""

from __future__ import annotations

import os
import sqlite3
from pathlib import Path

import pytest

from phasedb.errors import ExitCode, RuleRefusedError, StoreError
from phasedb.library import Library
from phasedb.library.audit import audit
from phasedb.library.backup import backup, restore
from phasedb.library.making import put_in_place


def _dump(path) -> str:
    connection = sqlite3.connect(path)
    text = "\n".join(connection.iterdump())
    connection.close()
    return text


def _back_up(store, target):
    return backup(store, Path(target), library_class=Library)


def _restore(store, copy, *, replace=False):
    return restore(str(store), Path(copy), replace=replace, library_class=Library)


def test_a_backup_is_the_same_store(starter, tmp_path):
    copied = _back_up(starter, tmp_path / "deep" / "copy.sqlite")
    assert _dump(copied.path) == _dump(starter)
    assert os.listdir(copied.path.parent) == ["copy.sqlite"]
    with Library.open(copied.path) as library:
        assert copied.proof.history_head == library.history_head


def test_a_backup_while_another_is_in_the_middle_of_a_write(starter, tmp_path):
    other = sqlite3.connect(starter, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    other.execute("UPDATE phase SET remarks = 'not committed'")
    copied = _back_up(starter, tmp_path / "copy.sqlite")
    other.execute("ROLLBACK")
    other.close()
    with Library.open(copied.path) as library:
        assert audit(library).faults == []


def test_a_backup_never_overwrites(starter, tmp_path):
    target = tmp_path / "mine.txt"
    target.write_text("mine")
    with pytest.raises(RuleRefusedError) as error:
        _back_up(starter, target)
    assert error.value.exit_code is ExitCode.REFUSED
    assert target.read_text() == "mine"
    with pytest.raises(RuleRefusedError):
        _back_up(starter, starter)


def test_a_damaged_store_gives_no_backup(starter, tmp_path):
    connection = sqlite3.connect(starter)
    connection.execute("UPDATE phase SET a_angstrom = 9 WHERE name = 'gold'")
    connection.commit()
    connection.close()
    with pytest.raises(StoreError, match="gold"):
        _back_up(starter, tmp_path / "copy.sqlite")
    assert not (tmp_path / "copy.sqlite").exists()


def test_restore_refuses_then_replaces_and_keeps_the_old_one(starter, tmp_path):
    copied = _back_up(starter, tmp_path / "copy.sqlite")
    with Library.open(starter, by="Bob", write=True) as library:
        library.withdraw("gold", reason="x")
    changed = _dump(starter)
    with pytest.raises(RuleRefusedError, match="--replace"):
        _restore(starter, copied.path)
    assert _dump(starter) == changed
    done = _restore(starter, copied.path, replace=True)
    assert _dump(starter) == _dump(copied.path)
    assert _dump(done.kept_aside) == changed
    assert sorted(os.listdir(tmp_path)) == sorted(["copy.sqlite", "starter.sqlite", done.kept_aside.name])


def test_restore_where_nothing_was(starter, tmp_path):
    place = tmp_path / "new" / "library.sqlite"
    done = _restore(place, starter)
    assert done.kept_aside is None
    assert _dump(place) == _dump(starter)


@pytest.mark.parametrize("damage", ["zero", "foreign", "absent", "tampered"])
def test_restore_takes_only_a_whole_library(starter, empty, tmp_path, damage):
    copy = tmp_path / "copy.sqlite"
    if damage == "zero":
        copy.touch()
    elif damage == "foreign":
        copy.write_text("{}")
    elif damage == "tampered":
        copy.write_bytes(Path(starter).read_bytes())
        connection = sqlite3.connect(copy)
        connection.execute("UPDATE phase SET a_angstrom = 9 WHERE name = 'gold'")
        connection.commit()
        connection.close()
    before = Path(empty).read_bytes()
    with pytest.raises(StoreError):
        _restore(empty, copy, replace=True)
    assert Path(empty).read_bytes() == before


def test_restore_over_a_ruined_store(starter, tmp_path):
    copied = _back_up(starter, tmp_path / "copy.sqlite")
    for ruin in (b"", b"not a database at all", Path(starter).read_bytes()[:5000]):
        Path(starter).write_bytes(ruin)
        done = _restore(starter, copied.path, replace=True)
        assert done.kept_aside.read_bytes() == ruin
        assert _dump(starter) == _dump(copied.path)


def test_a_leftover_journal_never_meets_the_restored_store(starter, tmp_path):
    copied = _back_up(starter, tmp_path / "copy.sqlite")
    journal = Path(f"{starter}-journal")
    Path(starter).write_bytes(b"ruined")
    journal.write_bytes(b"\xd9\xd5\x05\xf9\x20\xa1\x63\xd7" + b"\x00" * 600)
    _restore(starter, copied.path, replace=True)
    assert not journal.exists()
    assert _dump(starter) == _dump(copied.path)


def test_restore_waits_for_a_write_and_then_gives_up(starter, tmp_path, monkeypatch):
    from phasedb.library import connect

    copied = _back_up(starter, tmp_path / "copy.sqlite")
    monkeypatch.setattr(connect, "BUSY_SECONDS", 0.1)
    other = sqlite3.connect(starter, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    try:
        with pytest.raises(StoreError, match="another command is writing"):
            _restore(starter, copied.path, replace=True)
    finally:
        other.close()
    assert _dump(starter) == _dump(copied.path)


def test_a_store_that_appears_in_the_meantime_is_not_overwritten(tmp_path):
    finished, place = tmp_path / "finished", tmp_path / "library.sqlite"
    finished.write_text("new")
    place.write_text("somebody else's")
    with pytest.raises(RuleRefusedError):
        put_in_place(finished, place)
    assert place.read_text() == "somebody else's"


def test_the_store_itself_is_no_backup_of_it(starter):
    with pytest.raises(RuleRefusedError, match="itself"):
        _restore(starter, starter, replace=True)
