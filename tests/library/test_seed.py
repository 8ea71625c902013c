"""The starter library: real phases, each with its source, how it was obtained, and a reasoned drift class."""

from __future__ import annotations

import csv
from collections import Counter

import numpy as np
import pytest

from phasedb.crystal.phases import DRIFT_CLASSES
from phasedb.library import Library
from phasedb.library.migrate import shipped
from phasedb.library.reading import lines_of


@pytest.fixture(scope="module")
def rows():
    with (shipped("seed_data") / "starter.csv").open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


@pytest.fixture(scope="module")
def library(made_once):
    with Library.open(made_once) as opened:
        yield opened


def test_at_least_three_hundred_phases_each_with_a_source(library):
    entries = library.entries()
    assert len(entries) >= 300
    for entry in entries:
        assert entry.content.sources[0].citation, entry.name
        assert entry.content.sources[0].how in ("read_in_source", "library_value", "from_memory")
        assert entry.content.drift_reason, entry.name
        assert entry.entered_by == "starter library"
        assert (entry.standing, entry.content.tags) == ("draft", ("starter",))


def test_recalled_values_are_marked_as_such(library, rows):
    recalled = {row["name"] for row in rows if row["how"] == "from_memory"}
    assert len(recalled) == 73
    marked = {e.name for e in library.entries() if e.content.sources[0].kind == "from memory"}
    assert marked == recalled


def test_every_value_of_the_table_is_in_the_store(library, rows):
    for row in rows:
        content = library.get(row["name"]).content
        assert content.a_angstrom == float(row["a_angstrom"])
        assert (content.a_esd_angstrom is None) == (row["a_esd_angstrom"] == "")
        assert content.temperature_k == (float(row["temperature_K"]) if row["temperature_K"] else None)
        assert content.formula_units_per_cell == float(row["formula_units_per_cell"])
        assert content.free_parameters == row["free_parameters"]
        assert content.mineral_name == row["mineral_name"]
        assert content.remarks == row["note"]
        assert content.drift_class == row["drift_class"]
        if row["second_source"]:
            second = content.sources[1]
            assert second.citation == row["second_source"]
            assert second.a_angstrom == float(row["second_value_angstrom"])
        if row["source_density_g_cm3"]:
            assert content.sources[0].density_g_cm3 == float(row["source_density_g_cm3"])


def test_thermal_expansion_names_its_source(rows):
    known = [row for row in rows if row["thermal_expansion_per_k"]]
    assert known
    for row in known:
        assert row["thermal_expansion_source"], row["name"]
        assert 5e-7 < float(row["thermal_expansion_per_k"]) < 1e-4


def test_drift_classes(library):
    classes = {entry.name: entry.content.drift_class for entry in library.entries()}
    assert set(classes.values()) == set(DRIFT_CLASSES)
    assert min(Counter(classes.values()).values()) >= 50
    for name in ("copper", "nickel aluminide NiAl", "iron (alpha, ferrite)", "Heusler Ni2MnGa"):
        assert classes[name] == "alloy"
    for name in ("titanium nitride", "vanadium carbide (VC0.88)", "spinel", "pyrope", "chromite"):
        assert classes[name] == "solid solution"
    for name in ("silicon", "sodium chloride", "GaAs", "magnesium oxide", "lanthanum hexaboride", "argon"):
        assert classes[name] == "line compound"
    vc = library.get("vanadium carbide (VC0.88)").content
    assert (vc.a_min_angstrom, vc.a_max_angstrom) == (4.13, 4.18)


def test_phases_far_from_room_temperature_keep_their_temperature(library):
    assert library.get("argon").content.temperature_k == 4.2
    assert library.get("iron (gamma, austenite, pure Fe at 1189 K)").content.temperature_k == 1189


def test_partly_occupied_cells(library):
    titanate = library.get("lithium titanate Li4Ti5O12")
    assert titanate.content.formula_units_per_cell == pytest.approx(8 / 3, abs=1e-4)
    mixed = [site for site in titanate.content.sites if len(site.species) == 2]
    assert {element for site in mixed for element, _ in site.species} == {"Li", "Ti"}
    maghemite = library.get("maghemite (gamma-Fe2O3)")
    assert maghemite.content.formula_units_per_cell == pytest.approx(32 / 3, abs=1e-3)
    assert maghemite.content.lattice_type == "P"


def test_lines_are_cached_for_every_phase_with_sites(library):
    table = library.table()
    counts = np.diff(table.line_start)
    for entry, count, start in zip(
        sorted((e for e in library.entries()), key=lambda e: table.name.index(e.name)),
        counts,
        table.line_start,
        strict=False,
    ):
        assert (count > 0) == bool(entry.content.sites), entry.name
        if entry.name in ("diamond", "titanium nitride", "pyrope"):
            n, strength = lines_of(entry.phase())
            assert np.array_equal(table.line_n[start : start + count], n)
            assert np.array_equal(table.line_strength[start : start + count], strength)
    assert (counts > 0).sum() >= 360


def test_the_same_starter_library_has_the_same_fingerprint(made_once, tmp_path):
    with Library.create(tmp_path / "again.sqlite", by="Somebody else") as again:
        fingerprint, table = again.fingerprint, again.table()
    with Library.open(made_once) as library:
        assert library.fingerprint == fingerprint
        assert library.table().name == table.name
