"""Saved identifications: what is kept, signing, repeating against the library then and now."""

from __future__ import annotations

import json
import sqlite3
from pathlib import Path

import numpy as np
import pytest
from running import run

from phasedb.identify.kept import settings_from_json, settings_to_json
from phasedb.identify.settings import MatchSettings, ShiftPrior
from phasedb.library import Library
from phasedb.library.intake import draft_from_fields
from phasedb.measured.kept import peak_list_from_json, peak_list_to_json
from phasedb.measured.peaklist import PeakList

# A made-up list: rock-salt lines of a = 4.2412 Å and one of nickel, copper K-alpha1, with small errors.
NITRIDE = """# radiation: Cu
# sample: plate 7
two_theta_deg,intensity,esd
36.66,70,0.01
42.59,100,
61.81,45,0.01
74.07,19,0.02
77.97,12,0.02
43.58,20,
"""
PHASES = (
    {"name": "a nitride", "formula": "TiN", "lattice_type": "F", "a_angstrom": "4.2440"},
    {"name": "nickel", "formula": "Ni", "lattice_type": "F", "a_angstrom": "3.5239"},
    {"name": "far away", "formula": "CsCl", "lattice_type": "P", "a_angstrom": "4.1230"},
)


@pytest.fixture
def store(tmp_path: Path) -> Path:
    path = tmp_path / "lab.sqlite"
    with Library.create(path, by="A. First", starter=False) as library:
        library.add_many(draft_from_fields(fields) for fields in PHASES)
    return path


@pytest.fixture
def saved(store: Path, tmp_path: Path) -> Path:
    peaks = tmp_path / "plate.csv"
    peaks.write_text(NITRIDE)
    ran = run("match", peaks, "--save", "--elements", "Ti,N,Ni", store=store)
    assert ran.code == 0, ran.err
    assert "saved as identification 1" in ran.err
    peaks.unlink()  # nothing after this may need the file
    return store


def audit_faults(store: Path) -> list[str]:
    ran = run("audit", "--json", store=store)
    return list(json.loads(ran.out)["faults"])


def test_a_saved_match_says_what_was_matched_with_what_and_by_whom(saved: Path) -> None:
    record = run("identifications", "1", "--json", store=saved).json
    assert record["schema"] == "phasedb.identification/1"
    assert (record["made_by"], record["sample"], record["claimed"]) == ("A. First", "plate 7", ["a nitride"])
    assert record["settings"]["elements"] == ["Ti", "N", "Ni"]
    assert record["peaks"]["position"] == [36.66, 42.59, 43.58, 61.81, 74.07, 77.97]
    assert record["result"]["schema"] == "phasedb.match/1"
    assert record["result"]["library"]["fingerprint"] == record["library_fingerprint"]
    assert len(record["file_sha256"]) == 64
    listed = run("identifications", "--json", store=saved).json["identifications"]
    assert [one["id"] for one in listed] == [1]
    assert audit_faults(saved) == []


def test_the_list_and_one_record_read_well(saved: Path) -> None:
    listed = run("identifications", store=saved).out
    assert "plate 7" in listed
    assert "a nitride" in listed
    shown = run("identifications", "1", store=saved).out
    assert "This list holds a nitride" in shown
    assert "signed by nobody yet" in " ".join(shown.split())


def test_who_made_it_cannot_sign_and_nobody_signs_twice(saved: Path) -> None:
    own = run("sign", "1", store=saved, by="a.  first")
    assert own.code == 3
    assert "cannot sign" in own.err
    assert run("sign", "1", "--remark", "saw the scan", store=saved, by="B. Second").code == 0
    again = run("sign", "1", store=saved, by="b. second")
    assert again.code == 3
    assert "already" in again.err
    assert run("sign", "1", store=saved, by="C. Third").code == 0
    record = run("identifications", "1", "--json", store=saved).json
    assert [one["signed_by"] for one in record["signatures"]] == ["B. Second", "C. Third"]
    assert record["signatures"][0]["remark"] == "saw the scan"
    assert audit_faults(saved) == []


@pytest.mark.parametrize("number", ["2", "0", "-1", "one", "1; drop table phase", "9" * 40, ""])
def test_a_number_that_is_not_there(saved: Path, number: str) -> None:
    for command in ("sign", "rerun"):
        ran = run(command, "--", number, store=saved, by="B. Second")
        assert ran.code == 2
        assert "no identification has the number" in ran.err


def test_repeating_with_the_library_of_then_gives_the_same_bytes(saved: Path) -> None:
    repeated = run("rerun", "1", "--json", store=saved).json
    assert repeated["then"]["same_bytes"]
    assert repeated["now"]["same"]
    assert repeated["now"]["changed_entries"] == []
    text = run("rerun", "1", store=saved).out
    assert "the same result, byte for byte" in text
    assert "as it is now (3 entries): the same result" in text


def test_repeating_says_what_changed_and_why(saved: Path) -> None:
    with Library.open(saved, by="C. Third", write=True) as library:
        library.revise("a nitride", {"a_angstrom": 4.40}, reason="another standard")
        library.add(
            draft_from_fields(
                {"name": "better nitride", "formula": "TiN", "lattice_type": "F", "a_angstrom": "4.2412(2)"}
            ),
            accept_warnings=True,
        )
        library.withdraw("far away", reason="not ours")
    repeated = run("rerun", "1", "--json", store=saved).json
    assert repeated["then"]["same_bytes"]
    now = repeated["now"]
    assert not now["same"]
    moved = {phase["name"]: phase for phase in now["phases"]}
    assert moved["better nitride"]["probability_now"] > 0.5
    assert moved["better nitride"]["probability_then"] is None
    assert "new entry by C. Third" in moved["better nitride"]["why"][0]
    assert moved["a nitride"]["probability_now"] is None or moved["a nitride"]["probability_now"] < 0.1
    assert "revised by C. Third" in moved["a nitride"]["why"][0]
    assert "another standard" in moved["a nitride"]["why"][0]
    text = run("rerun", "1", store=saved).out
    assert "better nitride: now claimed" in text
    assert "a nitride: no longer claimed" in text


def test_a_renamed_entry_is_still_the_same_entry(saved: Path) -> None:
    with Library.open(saved, by="C. Third", write=True) as library:
        library.revise("a nitride", {"name": "titanium nitride"})
    now = run("rerun", "1", "--json", store=saved).json["now"]
    assert now["phases"] == []
    assert [entry["names"] for entry in now["changed_entries"]] == [["a nitride", "titanium nitride"]]


def test_a_result_that_was_edited_is_found(saved: Path) -> None:
    with sqlite3.connect(saved) as store:
        store.execute("UPDATE identification SET result = replace(result, 'a nitride', 'b nitride')")
    store.close()
    assert any("identification 1" in fault for fault in audit_faults(saved))
    text = run("rerun", "1", store=saved).out
    assert "NOT the same bytes" in text


def test_an_added_signature_is_found(saved: Path) -> None:
    with sqlite3.connect(saved) as store:
        store.execute(
            "INSERT INTO signature VALUES (1, 'abc', 1, 'x. other', 'X. Other', '2026-01-01T00:00:00Z', '')"
        )
    store.close()
    assert any("signature" in fault for fault in audit_faults(saved))


def test_a_match_read_before_another_write_belongs_to_the_library_it_read(store: Path) -> None:
    from phasedb.library.records import get_identification, save_identification

    with Library.open(store) as before:
        fingerprint, head = before.fingerprint, before.history_head
    with Library.open(store, by="C. Third", write=True) as library:
        library.revise("nickel", {"remarks": "one"})
        library.revise("nickel", {"remarks": "two"})
        result = {"library": {"fingerprint": fingerprint}, "program_version": "0", "phases": []}
        peaks = {"source": "x", "sha256": "", "sample": "", "radiation": None}
        number = save_identification(library, peaks, {}, result)
        found = get_identification(library, number)
    assert (found.history_head, found.library_fingerprint) == (head, fingerprint)
    assert audit_faults(store) == []


def test_a_result_of_another_library_is_refused(store: Path) -> None:
    from phasedb.errors import StoreError
    from phasedb.library.records import save_identification

    result = {"library": {"fingerprint": "1" * 64}, "program_version": "0", "phases": []}
    peaks = {"source": "x", "sha256": "", "sample": "", "radiation": None}
    with Library.open(store, write=True) as library, pytest.raises(StoreError, match="not of this library"):
        save_identification(library, peaks, {}, result)
    with Library.open(store) as library:
        assert library.history_count == 4


def test_a_kept_peak_list_is_the_same_list(tmp_path: Path) -> None:
    path = tmp_path / "list.csv"
    path.write_text(NITRIDE)
    peaks = PeakList.read(path, goniometer_radius_mm=173.0)
    again = peak_list_from_json(json.loads(json.dumps(peak_list_to_json(peaks), allow_nan=False)))
    assert peak_list_to_json(again) == peak_list_to_json(peaks)
    np.testing.assert_array_equal(again.position, peaks.position)
    np.testing.assert_array_equal(again.esd, peaks.esd)
    assert again.radiation == peaks.radiation
    assert again.notes == peaks.notes


def test_kept_settings_are_the_same_settings() -> None:
    settings = MatchSettings(
        most_phases=3,
        elements=("Ti", "N"),
        unseen=("C",),
        strict_chemistry=True,
        internal_standard="silicon",
        foreign_positions=np.array([26.64, 1 / 3]),
        rank_by="merit",
        shift_prior=ShiftPrior(0.01, 0.02, -0.1, 0.03),
    )
    again = settings_from_json(json.loads(json.dumps(settings_to_json(settings))))
    np.testing.assert_array_equal(again.foreign_positions, settings.foreign_positions)
    assert settings_to_json(again) == settings_to_json(settings)
    assert settings_from_json(settings_to_json(MatchSettings())) == MatchSettings()
