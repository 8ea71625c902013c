"""The commands that keep the store: audit, backup, restore, upgrade."""

from __future__ import annotations

import json
import shutil
import sqlite3
from pathlib import Path

import pytest
from running import run

OLD = Path(__file__).parent.parent / "library" / "data" / "store_0001.sql"


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    path = tmp_path_factory.mktemp("library") / "made.sqlite"
    assert run("init", store=path).code == 0
    return path


@pytest.fixture
def store(made, tmp_path):
    path = tmp_path / "library.sqlite"
    shutil.copyfile(made, path)
    return path


def _sql(path, statement):
    connection = sqlite3.connect(path)
    connection.execute(statement)
    connection.commit()
    connection.close()


def test_audit_prints_length_and_head(store):
    done = run("audit", store=store)
    assert done.code == 0
    document = run("audit", "--json", store=store).json
    assert document["whole"] is True
    assert document["history"]["count"] == 365
    assert document["history"]["head"] in done.out
    head = document["history"]["head"]
    run("withdraw", "gold", "--reason", "x", store=store)
    assert run("audit", "--expect", head, "--json", store=store).json["rows_since_expected"] == 1
    cut = run("audit", "--expect", "ab" * 32, store=store)
    assert cut.code == 4
    assert "not in the history" in cut.out
    assert run("audit", "--expect", "xyz", store=store).code == 2


def test_audit_that_finds_damage_exits_4(store):
    _sql(store, "UPDATE phase SET a_angstrom = 4.1 WHERE name = 'gold'")
    done = run("audit", store=store)
    assert done.code == 4
    assert "a_angstrom: 4.07825 -> 4.1" in done.out
    assert done.err.startswith("error: the audit found")
    document = json.loads(run("audit", "--json", store=store).out)
    assert document["whole"] is False
    assert any("gold" in fault for fault in document["faults"])


def test_backup_and_restore(store, tmp_path):
    copy = tmp_path / "copy.sqlite"
    made = run("backup", copy, "--json", store=store).json
    assert run("backup", copy, store=store).code == 3
    run("withdraw", "gold", "--reason", "x", store=store)
    assert run("restore", copy, store=store).code == 3
    done = run("restore", copy, "--replace", "--json", store=store).json
    assert done["history"] == made["history"]
    assert Path(done["kept_aside"]).exists()
    assert run("show", "gold", "--json", store=store).json["phase"]["standing"] == "draft"
    assert run("audit", "--expect", made["history"]["head"], store=store).code == 0
    assert run("restore", tmp_path / "none", "--replace", store=store).code == 4
    assert run("restore", copy, store=tmp_path / "new.sqlite").code == 0
    assert run("backup", tmp_path / "b", store=tmp_path / "none").code == 4


def test_upgrade(tmp_path):
    store = tmp_path / "old.sqlite"
    connection = sqlite3.connect(store)
    connection.executescript(OLD.read_text(encoding="utf-8"))
    connection.close()
    for words in (("list",), ("show", "silver"), ("audit",), ("withdraw", "silver", "--reason", "x")):
        done = run(*words, store=store)
        assert (done.code, done.out) == (4, "")
        assert "phasedb upgrade" in done.err
    tried = run("upgrade", "--dry-run", store=store)
    assert tried.code == 0
    assert "nothing was changed" in tried.out
    assert run("list", store=store).code == 4
    done = run("upgrade", "--json", store=store).json
    assert (done["from"], done["to"]) == ("0001", "0002")
    assert Path(done["backup"]).exists()
    assert run("show", "Feinsilber", store=store).code == 0
    assert run("audit", store=store).code == 0
    assert "up to date" in run("upgrade", store=store).out
    back = run("restore", done["backup"], "--replace", store=store)
    assert back.code == 0, back.err
    assert "older revision" in back.err
    assert run("list", store=store).code == 4
    assert run("upgrade", store=store).code == 0
    assert run("show", "Feinsilber", store=store).code == 0


@pytest.mark.parametrize("content", [b"", b'{"schema": "phasedb.peaks/1"}', b"\x00\x01\x02"])
def test_what_is_no_store(tmp_path, content):
    path = tmp_path / "store"
    path.write_bytes(content)
    for words in (
        ("audit",),
        ("list",),
        ("backup", tmp_path / "b"),
        ("upgrade",),
        ("withdraw", "x", "--reason", "x"),
    ):
        done = run(*words, store=path)
        assert (done.code, done.out) == (4, "")
        assert done.err.startswith("error: ")
    assert path.read_bytes() == content
