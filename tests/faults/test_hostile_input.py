"""Names, texts and file names that mean harm: stored or refused cleanly, shown and exported harmlessly."""

from __future__ import annotations

import csv
import json
import os
from pathlib import Path

import pytest
from running import Ran, run

from phasedb.library import Draft, Library

TEXTS = [
    'it\'s "quoted" `x` \\ back',
    "Robert'); DROP TABLE phase;--",
    "=cmd|' /C calc'!A0",
    "+1+1",
    "-2+3",
    "@SUM(A1)",
    "a,b;c\td",
    "red \x1b[31m",
    "bell\x07",
    "nul\x00",
    "line\nbreak",
    "turned \u202e\u05d0\u05d1 around",
    "left \u200e and \u200f right",
    "no\u200bwidth",
    "\ufeffmark",
    "smile \U0001f600 family \U0001f468\u200d\U0001f469",
    "e\u0301 combining",
    "\ud800",
    "<script>alert(1)</script>",
    "%s %n {0} ${x}",
    "../../etc/passwd",
    "COM1",
    ".",
    "-",
    "--help",
    "x" * 200,
    "x" * 201,
    "相图",
    "data_x _cell_length_a 1",
    "'",
    ";",
]


def unseen(text: str) -> set[str]:
    """Return the signs that steer a terminal or turn its lines around; the joiner inside emoji does not."""
    return {char for char in text if not char.isprintable() and char not in "\n\t\u200d"}


def clean(ran: Ran) -> None:
    assert ran.code in (0, 2), ran.err
    assert "unexpected fault" not in ran.err
    assert not unseen(ran.err), ran.err
    assert not unseen(ran.out) or ran.out.startswith("{"), ran.out


def add(store: object, *words: str) -> Ran:
    cell = ("--formula", "TiN", "--lattice", "F", "--a", "4.2417", "--accept-warning")
    return run("add", *cell, *words, store=store)


def test_as_names(empty: str, tmp_path: Path) -> None:
    stored = []
    for text in TEXTS:
        ran = add(empty, f"--name={text}")
        clean(ran)
        if ran.code == 0:
            stored.append(text)
            for words in (("show", "--", text), ("history", "--", text), ("lines", "--", text)):
                shown = run(*words, store=empty)
                clean(shown)
                assert shown.code == 0, shown.err
    for words in (("list",), ("history",)):
        clean(run(*words, store=empty))
    assert len(stored) >= 15
    assert not [text for text in stored if unseen(text) and "\n" not in text]
    everywhere_and_back(empty, tmp_path, len(stored))


def test_as_remarks(empty: str, tmp_path: Path) -> None:
    stored = 0
    for text in [*TEXTS, "x" * 100_000, "x" * 1_000_000, "\u202e" * 50_000]:
        ran = add(empty, f"--name=n {stored}", f"--remarks={text}")
        clean(ran)
        assert len(ran.err) < 2000
        if ran.code == 0:
            clean(run("show", f"n {stored}", store=empty))
            clean(run("list", "--text", text[:50], store=empty))
            stored += 1
    clean(run("history", store=empty))
    assert stored >= 20
    everywhere_and_back(empty, tmp_path, stored)


def everywhere_and_back(store: str, tmp_path: Path, count: int) -> None:
    """Export in each format, look at the cells, import into a new library, and compare."""
    with Library.open(store) as library:
        before = [entry.content for entry in library.entries()]
    assert len(before) == count
    for suffix in ("csv", "json", "cif"):
        out, again = tmp_path / f"out.{suffix}", tmp_path / f"{suffix}.sqlite"
        assert run("export", out, store=store).code == 0
        if suffix == "csv":
            with out.open(newline="", encoding="utf-8") as stream:
                cells = [cell for row in csv.reader(stream) for cell in row]
            assert not [cell for cell in cells if cell[:1] in ("=", "+", "-", "@")]
        assert run("init", "--empty", store=again).code == 0
        ran = run("import", out, store=again)
        assert ran.code == 0, (suffix, ran.err)
        with Library.open(str(again)) as library:
            after = [entry.content for entry in library.entries()]
        assert len(after) == count
        if suffix != "cif":
            assert [(c.name, c.remarks) for c in after] == [(c.name, c.remarks) for c in before]


@pytest.mark.parametrize("option", ["--source", "--alias", "--tag", "--free-parameters"])
def test_as_any_other_text(empty: str, option: str) -> None:
    for number, text in enumerate(TEXTS):
        ran = add(empty, f"--name=n {number}", f"{option}={text}")
        clean(ran)
        if ran.code == 0:
            clean(run("show", f"n {number}", store=empty))
    with Library.open(empty) as library:
        library.table()
    assert json.loads(run("audit", "--json", store=empty).out)["whole"]


@pytest.mark.parametrize("text", TEXTS, ids=ascii)
def test_as_a_formula_or_a_number(empty: str, text: str) -> None:
    for option in ("--formula", "--a", "--lattice", "--temperature", "--density", "--structure", "--doi"):
        words = {"--name": "n", "--formula": "TiN", "--lattice": "F", "--a": "4.2417", option: text}
        ran = run(
            "add", *(f"{name}={value}" for name, value in words.items()), "--accept-warning", store=empty
        )
        clean(ran)
        if option not in ("--structure", "--doi"):
            assert ran.code == 2, (option, ran.out)
        elif ran.code == 0:
            with Library.open(empty, by="x", write=True) as library:
                library.revise("n", {"name": f"n {option}"})


@pytest.mark.parametrize("text", TEXTS, ids=ascii)
def test_as_who_is_acting(empty: str, text: str) -> None:
    cell = ("add", "--name", "n", "--formula", "TiN", "--lattice", "F", "--a", "4.2417")
    if "\0" in text or "\ud800" in text:
        return  # cannot be given on a command line
    ran = run(*cell, store=empty, by=text)
    clean(ran)
    if ran.code == 0:
        clean(run("history", store=empty))


FILES = [
    "new\nline.csv",
    "red \x1b[31m.csv",
    "turned \u202evsc.csv",
    "-.csv",
    "--help.csv",
    "=1+1.csv",
    "sp ace.csv",
    "\U0001f600.csv",
    "'; DROP TABLE phase;--.csv",
    "%s%n.csv",
    "x" * 240 + ".csv",
]


@pytest.mark.skipif(os.name == "nt", reason="Windows does not allow such names")
@pytest.mark.parametrize("name", FILES, ids=ascii)
def test_as_a_file_name(empty: str, tmp_path: Path, name: str) -> None:
    folder = tmp_path / "files"
    folder.mkdir()
    path = folder / name
    clean(run("import", path, store=empty))  # it is not there yet
    path.write_text("name,formula,lattice_type,a_angstrom\nn,TiN,F,4.2417\n")
    ran = run("import", path, store=empty)
    clean(ran)
    assert ran.code == 0, ran.err
    clean(run("history", "n", store=empty))
    path.write_text("two_theta_deg\n28.4\nabc\n")
    clean(run("match", path, "--radiation", "Cu", store=empty))
    path.write_text("two_theta_deg\n28.4\n47.3\n")
    saved = run("match", path, "--radiation", "Cu", "--save", store=empty)
    clean(saved)
    assert saved.code == 0, saved.err
    for words in (("identifications",), ("identifications", "1"), ("rerun", "1")):
        clean(run(*words, store=empty))
    ran = run("export", path, store=empty)
    clean(ran)
    assert ran.code == 0, ran.err
    assert [found.name for found in folder.iterdir()] == [name]


def test_paths_that_lead_elsewhere(empty: str, tmp_path: Path) -> None:
    """A name in a file is only a name: nothing is read or written where it points."""
    with Library.open(empty, by="x", write=True) as library:
        library.add(Draft("../../escape", "TiN", "F", 4.2417))
    inner = tmp_path / "a" / "b"
    inner.mkdir(parents=True)
    for suffix in ("csv", "json", "cif"):
        assert run("export", inner / f"out.{suffix}", store=empty).code == 0
    assert sorted(p.name for p in inner.iterdir()) == ["out.cif", "out.csv", "out.json"]
    assert not list(tmp_path.rglob("*escape*"))
    for path in ("/dev/null/x.csv", "/proc/self/mem.csv", str(tmp_path / ("x" * 300 + ".csv"))):
        for command in ("import", "export"):
            ran = run(command, path, store=empty)
            clean(ran)
            assert ran.code == 2, (command, path)
