"""Warnings at the door: slips of unit, neighbours, impossible cells; accepted ones are recorded."""

from __future__ import annotations

from dataclasses import replace

import pytest

from phasedb.errors import ExitCode, RuleRefusedError
from phasedb.library import Draft, Library
from phasedb.library.door import KX_WITHIN, physics_warnings
from phasedb.library.entering import WarningsRefusedError
from phasedb.library.preparing import prepare
from phasedb.library.seed import starter_drafts


def _warnings(store: str, draft: Draft) -> list[tuple[str, str]]:
    with Library.open(store, by="Ann", write=True) as library:
        before = library.history_head
        try:
            library.add(draft)
        except WarningsRefusedError as error:
            assert library.history_head == before
            return [(warned.kind, warned.text) for warned in error.warnings]
    return []


TIN = Draft("x", "TiN", "F", 4.2351, structure_type="B1")


def test_a_value_in_kx_is_suspected(starter):
    ((kind, text),) = _warnings(starter, TIN)
    assert kind == "kx"
    assert text == "4.2351 is 0.21 % below 'titanium nitride', same formula: kX typed as Å?"


def test_only_the_same_formula_is_suspected_of_kx(starter):
    assert _warnings(starter, replace(TIN, formula="ZrN")) == []


@pytest.mark.parametrize(("off", "kinds"), [(0.9, ["kx"]), (1.1, [])])
def test_how_near_the_factor_counts(empty, off, kinds):
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(Draft("stored", "TiN", "F", 4.244))
    a = 4.244 / 1.00202 * (1 + off * KX_WITHIN)
    assert [kind for kind, _ in _warnings(empty, replace(TIN, a_angstrom=a))] == kinds
    a = 4.244 * 1.00202 * (1 + off * KX_WITHIN)
    assert [kind for kind, _ in _warnings(empty, replace(TIN, name="y", a_angstrom=a))][:1] == kinds[:1]


@pytest.mark.parametrize(
    ("a", "esd", "warned"),
    [
        (4.2461, None, True),  # 4.95e-4 away: within 5e-4
        (4.2462, None, False),
        (4.2499, 0.002, True),  # 5.9 mÅ away, three esds are 6 mÅ
        (4.2501, 0.002, False),
    ],
)
def test_close_neighbours_by_the_wider_of_three_esds_and_half_a_permille(empty, a, esd, warned):
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(Draft("stored", "ZrO", "F", 4.244))
    found = _warnings(empty, replace(TIN, a_angstrom=a, a_esd_angstrom=esd))
    assert bool(found) == warned
    if warned:
        assert found[0][0] == "near"
        assert "'stored' (ZrO, F, 4.244 Å)" in found[0][1]


def test_other_lattice_types_and_withdrawn_entries_are_no_neighbours(empty):
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(Draft("p", "ZrO", "P", 4.2351))
        library.add(Draft("f", "ZrO", "F", 4.2351))
        library.withdraw("f", reason="x")
    assert _warnings(empty, TIN) == []


@pytest.mark.parametrize(
    ("draft", "kind", "said"),
    [
        (Draft("x", "Fe", "F", 2.8665, structure_type="A1"), "packing", "74.05 %"),
        (Draft("x", "Fe", "I", 0.36, structure_type="A2"), "contact", "0.36 Å: nm typed as Å?"),
        (Draft("x", "Fe", "I", 0.28665), "packing", "nm typed as Å?"),
        (Draft("x", "NaCl", "F", 5.64, measured_density_g_cm3=1.7), "density", "Z = 3.1"),
        (
            Draft("x", "NaCl", "F", 5.64, structure_type="B1", measured_density_g_cm3=1.7),
            "density",
            "Z = 3.1",
        ),
        (Draft("x", "Na2Cl", "F", 5.64, structure_type="B1"), "structure", "cannot hold Na2Cl"),
        (Draft("x", "NaCl", "P", 5.64, structure_type="B1"), "structure", "B1"),
    ],
)
def test_what_the_physics_of_the_cell_says(empty, draft, kind, said):
    found = _warnings(empty, draft)
    assert kind in [k for k, _ in found]
    assert said in " ".join(text for _, text in found)


@pytest.mark.parametrize(
    "draft",
    [
        Draft("x", "NaCl", "F", 5.6401, structure_type="B1", measured_density_g_cm3=2.16),
        Draft("x", "TiC0.85", "F", 4.33, structure_type="B1", measured_density_g_cm3=4.5),  # partly empty
        Draft("x", "Fe", "I", 2.8665, structure_type="A2", measured_density_g_cm3=7.87),
        Draft("x", "Li4Ti5O12", "F", 8.358, measured_density_g_cm3=3.48, structure_type="H1_1"),
        Draft("x", "Fe0.7Cr0.3", "I", 2.87, structure_type="A2"),
    ],
)
def test_what_is_right_passes(empty, draft):
    assert _warnings(empty, draft) == []


def test_accepted_warnings_are_recorded(starter):
    with Library.open(starter, by="Ann", write=True) as library:
        with pytest.raises(RuleRefusedError) as error:
            library.add(TIN)
        assert error.value.exit_code is ExitCode.REFUSED
        outcome = library.add(TIN, accept_warnings=True)
        assert [warned.kind for warned in outcome.warnings] == ["kx"]
        assert "accepted warning: 4.2351 is 0.21 % below" in library.history("x")[-1].remark


def test_a_revision_is_asked_only_about_what_it_changes(starter):
    with Library.open(starter, by="Ann", write=True) as library:
        library.add(TIN, accept_warnings=True)
        assert library.revise("x", {"remarks": "fine"}).warnings == ()
        with pytest.raises(WarningsRefusedError):
            library.revise("x", {"a_angstrom": 4.2352})
        assert library.get("x").version == 2


# Entries of the starter library that the door warns of, and why they are right all the same.
EXCEPTIONS: dict[str, str] = {}


def test_the_starter_library_passes_the_physics_at_the_door():
    found = {draft.name: physics_warnings(prepare(draft)) for draft in starter_drafts()}
    warned = {name: [w.text for w in warnings] for name, warnings in found.items() if warnings}
    assert warned.keys() == EXCEPTIONS.keys(), warned


def test_no_starter_entry_is_in_kx_or_there_twice(starter):
    """Same reduced formula and lattice type: no two lie close together or the kX factor apart."""
    from itertools import combinations

    with Library.open(starter) as library:
        entries = library.entries()
    pairs = [
        (one.name, other.name)
        for one, other in combinations(entries, 2)
        if (one.formula_key, one.content.lattice_type) == (other.formula_key, other.content.lattice_type)
        and abs(one.content.a_angstrom / other.content.a_angstrom - 1) < 0.003
    ]
    assert pairs == []
