"""Every command on a store that cannot be used: exit code 4, one clear line, and the file left as it was."""

from __future__ import annotations

import json
import shutil
import sqlite3
from pathlib import Path

import pytest
from running import Ran, run

from phasedb.library import Library
from phasedb.library.tables import REVISIONS

PEAKS = "# radiation: Cu\ntwo_theta_deg,intensity\n38.18,100\n44.39,46\n64.58,24\n77.55,26\n81.72,8\n"

READS = (
    ("list",),
    ("show", "gold"),
    ("history",),
    ("history", "gold"),
    ("lines", "gold"),
    ("match", "PEAKS"),
    ("match", "PEAKS", "--as-of", "2030-01-01"),
    ("identifications",),
    ("identifications", "1"),
    ("rerun", "1"),
    ("report", "PEAKS", "-o", "OUT.html"),
    ("instrument", "list"),
    ("export", "OUT.json", "--with-history"),
    ("export", "OUT.csv"),
    ("export", "OUT.cif"),
    ("backup", "OUT.sqlite"),
    ("audit",),
    ("upgrade", "--dry-run"),
)
WRITES = (
    ("add", "--name", "n", "--formula", "TiN", "--lattice", "F", "--a", "4.2417", "--accept-warning"),
    ("revise", "gold", "--remarks", "x"),
    ("check", "gold"),
    ("withdraw", "gold", "--reason", "x"),
    ("restore-entry", "gold", "--reason", "x"),
    ("import", "TABLE.csv"),
    ("merge", "OTHER.sqlite"),
    ("match", "PEAKS", "--save"),
    ("sign", "1"),
    ("adopt", "PEAKS", "--name", "n", "--formula", "Au", "--lattice", "F", "--a", "4.08", "--accept-warning"),
    ("upgrade",),
)


def _id(words: tuple[str, ...]) -> str:
    return " ".join(words[:2])


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A library with a saved identification."""
    folder = tmp_path_factory.mktemp("whole")
    store, peaks = folder / "whole.sqlite", folder / "PEAKS"
    peaks.write_text(PEAKS)
    assert run("init", store=store).code == 0
    assert run("match", peaks, "--save", store=store).code == 0
    with Library.create(folder / "OTHER.sqlite", starter=False):
        pass
    (folder / "TABLE.csv").write_text("name,formula,lattice_type,a_angstrom\nn,TiN,F,4.2417\n")
    return store


@pytest.fixture
def bench(whole: Path, tmp_path: Path) -> Path:
    """A folder with a copy of all that the commands need."""
    for path in whole.parent.iterdir():
        shutil.copyfile(path, tmp_path / path.name)
    return tmp_path


def run_in(folder: Path, store: Path, words: tuple[str, ...]) -> Ran:
    placed = [
        str(folder / word) if word.split(".")[0] in ("PEAKS", "TABLE", "OTHER", "OUT") else word
        for word in words
    ]
    return run(*placed, store=store, by="Bob")


def zero_length(store: Path) -> None:
    store.write_bytes(b"")


def json_instead(store: Path) -> None:
    store.write_text(json.dumps({"schema": "phasedb.library/1", "phases": []}))


def missing(store: Path) -> None:
    store.unlink()


def a_folder(store: Path) -> None:
    store.unlink()
    store.mkdir()


def foreign(store: Path) -> None:
    store.unlink()
    with sqlite3.connect(store) as connection:
        connection.execute("CREATE TABLE phase (id INTEGER)")
    connection.close()


def cut(store: Path) -> None:
    data = store.read_bytes()
    store.write_bytes(data[: len(data) // 3])


def damaged(store: Path) -> None:
    """Every page but the first is overwritten."""
    data = store.read_bytes()
    store.write_bytes(data[:4096] + b"\xa5" * (len(data) - 4096))


def older(store: Path) -> None:
    with sqlite3.connect(store) as connection:
        connection.execute("UPDATE alembic_version SET version_num = ?", (REVISIONS[0],))
    connection.close()


def newer(store: Path) -> None:
    with sqlite3.connect(store) as connection:
        connection.execute("UPDATE alembic_version SET version_num = '9999'")
    connection.close()


FAULTS = (zero_length, json_instead, missing, a_folder, foreign, cut, damaged, newer)


@pytest.mark.parametrize("words", [*READS, *WRITES], ids=_id)
def test_a_command_on_each_kind_of_broken_store(bench: Path, words: tuple[str, ...]) -> None:
    for fault in FAULTS:
        store = bench / f"{fault.__name__}.sqlite"
        shutil.copyfile(bench / "whole.sqlite", store)
        fault(store)
        before = store.read_bytes() if store.is_file() else None
        files = {path.name for path in bench.iterdir()}
        ran = run_in(bench, store, words)
        said = f"{fault.__name__}: exit {ran.code}: {ran.err}"
        if fault is cut and ran.code == 0:
            assert words in READS, said  # the pages that it needs were not cut off
        else:
            assert ran.code == 4, said
            assert ran.err.splitlines()[-1].startswith("error: ") or "\nerror: " in f"\n{ran.err}", said
            assert str(store) in ran.err, said
            assert "unexpected fault" not in ran.err, said
            assert ran.out == "" or words[0] == "audit", said
            assert {path.name for path in bench.iterdir()} == files, said
        assert (store.read_bytes() if store.is_file() else None) == before, said


@pytest.mark.parametrize("words", [w for w in (*READS, *WRITES) if w[0] != "upgrade"], ids=_id)
def test_a_command_on_an_older_store_says_how_to_upgrade(bench: Path, words: tuple[str, ...]) -> None:
    store = bench / "whole.sqlite"
    older(store)
    before = store.read_bytes()
    ran = run_in(bench, store, words)
    assert ran.code == 4
    assert "run 'phasedb upgrade'" in ran.err
    assert store.read_bytes() == before


def test_another_library_to_merge_may_be_broken_too(bench: Path) -> None:
    store = bench / "whole.sqlite"
    before = store.read_bytes()
    for fault in (*FAULTS, older):
        other = bench / f"{fault.__name__}.sqlite"
        shutil.copyfile(bench / "whole.sqlite", other)
        fault(other)
        ran = run("merge", other, store=store)
        assert ran.code == 4, (fault.__name__, ran.err)
        assert str(other) in ran.err
        assert store.read_bytes() == before
