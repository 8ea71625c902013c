"""The lines command: what it lists, its options, its errors."""

from __future__ import annotations

import pytest
from running import run

from phasedb.crystal.intensity import D_MIN_ANGSTROM

# NIST certificate of SRM 640d, two-theta of silicon for Cu K-alpha1 (a = 5.43123 Å); the library's silicon is
# 5.43094 Å, which moves the last of these lines by 0.007 degrees
SILICON = {3: 28.441, 8: 47.300, 11: 56.119, 16: 69.126, 19: 76.372, 24: 88.025}


def test_positions_of_silicon(starter_store):
    found = run("lines", "silicon", "--radiation", "Cu-Ka1", "--json", store=starter_store).json
    assert found["schema"] == "phasedb.lines/1"
    assert found["phase"] == "silicon"
    by_n = {line["n"]: line for line in found["lines"]}
    for n, two_theta in SILICON.items():
        assert by_n[n]["two_theta_deg"] == pytest.approx(two_theta, abs=0.008)
    assert by_n[27]["hkl"] == [[3, 3, 3], [5, 1, 1]]
    assert by_n[27]["multiplicity"] == 32
    assert by_n[3]["intensity"] == 100.0
    assert not {4, 12, 20, 36} & set(by_n)
    assert all(
        set(line) == {"n", "hkl", "multiplicity", "d_angstrom", "two_theta_deg", "intensity"}
        for line in found["lines"]
    )
    assert by_n[8]["d_angstrom"] == pytest.approx(5.430941 / 8**0.5, abs=1e-6)


def test_text_and_document_say_the_same(starter_store):
    document = run("lines", "spinel", "--max-two-theta", "80", "--json", store=starter_store).json
    text = run("lines", "spinel", "--max-two-theta", "80", store=starter_store).out.splitlines()
    assert text[0] == "spinel: MgAl2O4, F, a = 8.0836 Å, 299 K; Cu, 1.5405929 Å"
    assert len(text) == 2 + len(document["lines"])
    for row, line in zip(text[2:], document["lines"], strict=True):
        cells = row.split()
        assert float(cells[0]) == pytest.approx(line["two_theta_deg"], abs=6e-5)
        assert int(cells[2]) == line["n"]
        assert int(cells[4]) == line["multiplicity"]
        assert float(cells[5]) == pytest.approx(line["intensity"], abs=0.051)


def test_where_the_list_ends(starter_store):
    lines = run("lines", "copper", "--max-two-theta", "60", "--json", store=starter_store).json["lines"]
    assert [line["n"] for line in lines] == [3, 4]
    usual = run("lines", "copper", "--json", store=starter_store).json["lines"]
    assert usual[-1]["two_theta_deg"] <= 150.0
    hard = run("lines", "copper", "--radiation", "Ag", "--json", store=starter_store).json["lines"]
    assert hard[-1]["d_angstrom"] >= D_MIN_ANGSTROM


def test_an_entry_without_structure_has_open_intensities(store):
    added = run(
        "add",
        "--name",
        "unknown cube",
        "--formula",
        "NaCl",
        "--lattice",
        "I",
        "--a",
        "8.6412",
        store=store,
    )
    assert added.code == 0, added.err
    found = run("lines", "unknown cube", "--max-two-theta", "40", "--json", store=store).json["lines"]
    assert [line["n"] for line in found] == [2, 4, 6, 8, 10, 12, 14]
    assert {line["intensity"] for line in found} == {None}
    ran = run("lines", "unknown cube", store=store)
    assert "structure is not known" in ran.err


def test_assumed_parameters_are_said(starter_store):
    ran = run("lines", "cerium hexaboride", "--max-two-theta", "30", store=starter_store)
    assert "assumed" in ran.err
    assert "x = 0.2 (B)" in ran.err


def test_a_monochromator_changes_intensities_only(starter_store):
    plain = run("lines", "copper", "--json", store=starter_store).json["lines"]
    with_crystal = run("lines", "copper", "--monochromator", "26.6", "--json", store=starter_store).json[
        "lines"
    ]
    assert [line["d_angstrom"] for line in plain] == [line["d_angstrom"] for line in with_crystal]
    # (1 + c cos² 2theta) / (1 + c) at 74.1267 and 43.3172 degrees, c = cos² 26.6° against 1
    ratio = with_crystal[2]["intensity"] / plain[2]["intensity"]
    assert ratio == pytest.approx(1.05957, abs=1e-4)


def test_electrons(starter_store):
    gold = run(
        "lines", "gold", "--radiation", "electron", "--energy-kv", "200", "--json", store=starter_store
    ).json
    short = run("lines", "gold", "--energy-kv", "200", "--json", store=starter_store).json
    assert gold == short
    first = gold["lines"][0]
    # 2 arcsin(0.025079 / (2 x 2.35458)), International Tables C, table 4.3.2.1 for the wavelength
    assert first["two_theta_deg"] == pytest.approx(0.61028, abs=1e-4)
    assert first["intensity"] == 100.0


def test_a_wavelength_given_as_a_number(starter_store):
    found = run("lines", "copper", "--wavelength", "1.0", "--json", store=starter_store).json["lines"]
    # 2 arcsin(sqrt(3) / (2 x 3.61496))
    assert found[0]["two_theta_deg"] == pytest.approx(27.72198, abs=1e-5)


def test_no_line_in_the_range_is_no_error(starter_store):
    ran = run("lines", "copper", "--max-two-theta", "20", store=starter_store)
    assert ran.code == 0
    assert "no line" in ran.err
    assert run("lines", "copper", "--max-two-theta", "20", "--json", store=starter_store).json["lines"] == []


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("lines", "nonesuch"), "no entry"),
        (("lines", "copper", "--radiation", "Zr"), "'Zr' is not known"),
        (("lines", "copper", "--radiation", "Cu", "--wavelength", "1.5"), "both given"),
        (("lines", "copper", "--wavelength", "nan"), "not usable"),
        (("lines", "copper", "--wavelength", "0"), "not usable"),
        (("lines", "copper", "--radiation", "electron"), "--energy-kv"),
        (("lines", "copper", "--energy-kv", "-1"), "electron energy"),
        (("lines", "copper", "--max-two-theta", "0"), "--max-two-theta 0"),
        (("lines", "copper", "--max-two-theta", "181"), "--max-two-theta 181"),
        (("lines", "copper", "--monochromator", "nan"), "--monochromator nan"),
        (("lines",), "Missing argument"),
    ],
)
def test_bad_input_is_said_and_exits_2(words, says, starter_store):
    ran = run(*words, store=starter_store)
    assert ran.code == 2
    assert says in ran.err
    assert ran.out == ""
