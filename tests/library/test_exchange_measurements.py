"""Measurements of adopted entries go wherever the entry goes."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from running import run

# Rock-salt lines of a = 4.2412 Å with copper K-alpha1 and small errors: made up.
PEAKS = """# radiation: Cu
# sample: plate 7
two_theta_deg,intensity
36.66,70
42.59,100
61.81,45
74.07,19
77.97,12
93.78,6
"""


@pytest.fixture
def adopted(empty: str, tmp_path: Path) -> str:
    peaks = tmp_path / "plate.csv"
    peaks.write_text(PEAKS)
    ran = run("adopt", peaks, "--name", "our nitride", "--formula", "TiN", "--lattice", "F", "--a", "4.24",
              "--accept-warning", store=empty)  # fmt: skip
    assert ran.code == 0, ran.err
    return empty


def measurements(store: object, tmp_path: Path) -> list[dict[str, object]]:
    path = tmp_path / "look.json"
    assert run("export", path, store=store).code == 0
    return list(json.loads(path.read_text(encoding="utf-8"))["measurements"])


def test_through_json(adopted: str, tmp_path: Path) -> None:
    first, again = tmp_path / "1.json", tmp_path / "again.sqlite"
    run("export", first, store=adopted)
    run("init", "--empty", store=again)
    ran = run("import", first, "--json", store=again).json
    assert (ran["new"], ran["measurements"]) == (1, 1)
    [kept] = measurements(again, tmp_path)
    assert kept["peaks"]["position"] == [36.66, 42.59, 61.81, 74.07, 77.97, 93.78]  # type: ignore[index]
    assert (kept["sample"], kept["entered_by"]) == ("plate 7", "A. First")
    second = tmp_path / "2.json"
    run("export", second, store=again)
    assert second.read_bytes() == first.read_bytes()
    before = again.read_bytes()
    assert run("import", first, "--json", store=again).json["measurements"] == 0
    assert again.read_bytes() == before
    assert json.loads(run("audit", "--json", store=again).out)["faults"] == []


def test_through_a_merge(adopted: str, starter: str, tmp_path: Path) -> None:
    assert run("merge", adopted, "--json", store=starter).json["measurements"] == 1
    assert [one["sample"] for one in measurements(starter, tmp_path)] == ["plate 7"]
    assert run("merge", adopted, "--json", store=starter).json["measurements"] == 0
    assert json.loads(run("audit", "--json", store=starter).out)["faults"] == []


def test_they_follow_no_other_entry_of_the_same_name(adopted: str, tmp_path: Path) -> None:
    """The same content under another uid stays as it is here, and nothing is hung on it."""
    first, again = tmp_path / "1.json", tmp_path / "again.sqlite"
    run("export", first, store=adopted)
    document = json.loads(first.read_text(encoding="utf-8"))
    run("init", "--empty", store=again)
    run("import", first, store=again)
    uid = document["phases"][0]["uid"]
    text = first.read_text(encoding="utf-8").replace(uid, "f" * 32)
    text = text.replace(document["measurements"][0]["uid"], "e" * 32)
    first.write_text(text, encoding="utf-8")
    ran = run("import", first, "--json", store=again).json
    assert (ran["new"], ran["already_here"], ran["measurements"]) == (0, 1, 0)


@pytest.mark.parametrize(
    "change",
    [
        {"uid": "x"},
        {"phase": None},
        {"peaks": {}},
        {"peaks": "many"},
        {"source": 5},
        {"sample": "bell \x07"},
        {"wavelength_angstrom": "1.54"},
        {"extra": 1},
    ],
)
def test_a_broken_one_is_refused(adopted: str, tmp_path: Path, change: dict[str, object]) -> None:
    first, again = tmp_path / "1.json", tmp_path / "again.sqlite"
    run("export", first, store=adopted)
    document = json.loads(first.read_text(encoding="utf-8"))
    document["measurements"][0].update(change)
    first.write_text(json.dumps(document))
    run("init", "--empty", store=again)
    before = again.read_bytes()
    ran = run("import", first, store=again)
    assert ran.code == 2
    assert "measurement 1 cannot be brought in" in ran.err
    assert again.read_bytes() == before
