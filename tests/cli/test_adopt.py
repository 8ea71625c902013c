"""The adopt and index commands: an unknown becomes an entry that the next match names."""

import numpy as np
import pytest
import sqlalchemy as sa
from running import run

from phasedb.crystal.lattice import allowed_n
from phasedb.crystal.radiation import radiation_from_name
from phasedb.library import Library, tables

NITRIDE = ("--name", "blade phase", "--formula", "Ti0.6Zr0.4N")


HEIGHTS = {"F": [70, 100, 55, 25, 15, 7, 10, 20, 15, 10, 5, 5], "I": [100, 20, 30, 10, 12, 7]}  # as B1 and A2


def write_list(path, phases, *, seed=1, noise=0.008):
    """Write an invented list of phases (lattice type, a, share)."""
    rng = np.random.default_rng(seed)
    wavelength = radiation_from_name("Cu-Ka1").wavelength_angstrom
    rows = []
    for lattice, a, share in phases:
        n = allowed_n(lattice, 40)
        sine = wavelength * np.sqrt(n) / (2 * a)
        x = 2 * np.degrees(np.arcsin(sine[sine < 0.77]))
        height = share * np.array(HEIGHTS[lattice])[: len(x)]
        x = x[: len(height)]
        rows += list(zip(x + 0.02 + noise * rng.normal(size=len(x)), height, strict=True))
    body = "\n".join(f"{x:.4f},{height:.2f}" for x, height in sorted(rows))
    path.write_text(f"# radiation: Cu-Ka1\n# range: 20 102\ntwo_theta_deg,intensity\n{body}\n")
    return path


@pytest.fixture
def unknown(tmp_path):
    return write_list(tmp_path / "unknown.csv", [("F", 4.387, 1.0)])


@pytest.fixture
def empty(tmp_path):
    path = tmp_path / "empty.sqlite"
    Library.create(path, by="Ann", starter=False).close()
    return path


def probability_of(name, listed, store, *options):
    found = run("match", listed, *options, "--json", store=store).json
    return {phase["name"]: phase["probability"] for phase in found["phases"]}.get(name, 0.0)


def test_index_finds_the_cell_and_says_what_it_does_not_prove(unknown):
    found = run("index", unknown, "--json").json
    best = found["solutions"][0]
    assert found["schema"] == "phasedb.index/1"
    assert (best["lattice_type"], best["a_angstrom"]) == ("F", pytest.approx(4.387, abs=4e-3))
    assert best["probability"] > 0.9 and best["lines_indexed"] == found["line_count"]
    assert best["merit"]["F"]["n"] == found["line_count"]
    assert any("does not prove cubic symmetry" in caution for caution in found["cautions"])
    text = run("index", unknown).out
    assert "indexes as face-centred cubic (F)" in text and "by luck" in text


def test_index_wants_three_lines(tmp_path):
    path = tmp_path / "two.csv"
    path.write_text("# radiation: Cu\n38.4\n44.7\n")
    ran = run("index", path)
    assert ran.code == 2 and "at least 3" in ran.err


def test_adopt_then_match_names_it(unknown, empty):
    before = run("match", unknown, "--json", store=empty).json
    assert before["unlisted"]["probability"] > 0.5
    assert before["unlisted"]["a_angstrom"] == pytest.approx(4.387, rel=5e-3)
    found = run("adopt", unknown, *NITRIDE, "--json", store=empty).json
    assert found["schema"] == "phasedb.adopt/1" and found["written"]
    entry = found["entry"]
    assert entry["lattice_type"] == "F"
    assert abs(entry["a_angstrom"] - 4.387) < 3 * entry["a_esd_angstrom"] < 8e-3
    assert entry["sources"][0]["kind"] == "measured here" and "unknown.csv" in entry["remarks"]
    assert found["index"]["probability"] > 0.9
    assert probability_of("blade phase", unknown, empty) > 0.5


def test_the_measurement_stays_with_the_entry(unknown, empty):
    run("adopt", unknown, *NITRIDE, store=empty)
    with Library.open(empty) as library, library.reading() as connection:
        row = connection.execute(sa.select(tables.measurement)).mappings().one()
        phase = connection.execute(sa.select(tables.phase.c.id)).scalar_one()
        actions = [entry.kind for entry in library.history()]
    assert row["phase_id"] == phase and row["source"].endswith("unknown.csv")
    assert {"phase", "measurement"} <= set(actions)
    assert run("audit", store=empty).code == 0


def test_a_dry_run_writes_nothing(unknown, empty):
    before = empty.read_bytes()
    ran = run("adopt", unknown, *NITRIDE, "--dry-run", store=empty)
    assert ran.code == 0 and ran.out.startswith("would enter 'blade phase'")
    assert "nothing was written" in ran.err
    assert empty.read_bytes() == before
    found = run("adopt", unknown, *NITRIDE, "--dry-run", "--json", store=empty).json
    assert found["written"] is False and found["history_head"] is None


def test_a_warning_stops_it_and_accepting_lets_it_pass(unknown, empty):
    dense = (*NITRIDE, "--structure", "B1", "--density", "19")  # Z would be about 13
    ran = run("adopt", unknown, *dense, store=empty)
    assert ran.code == 3 and "Z = " in ran.err
    with Library.open(empty) as library, library.reading() as connection:
        assert library.phase_count == 0
        assert connection.execute(sa.select(sa.func.count()).select_from(tables.measurement)).scalar() == 0
    ran = run("adopt", unknown, *dense, "--accept-warning", store=empty)
    assert ran.code == 0 and "warning (accepted)" in ran.err


def test_a_neighbour_in_the_library_is_a_warning(unknown, empty):
    assert run("adopt", unknown, *NITRIDE, store=empty).code == 0
    ran = run("adopt", unknown, "--name", "again", "--formula", "TaC", store=empty)
    assert ran.code == 3 and "blade phase" in ran.err
    taken = run("adopt", unknown, *NITRIDE, store=empty)
    assert taken.code == 2 and "blade phase" in taken.err


def test_with_a_structure_type_the_entry_knows_its_lines(unknown, empty):
    run("adopt", unknown, "--name", "x", "--formula", "TaC", "--structure", "rock salt", store=empty)
    found = run("show", "x", "--json", store=empty).json
    assert found["phase"]["structure_type"] == "B1"
    assert found["cell"]["density_g_cm3"] == pytest.approx(15.18, abs=0.2)  # 4 TaC in a cell of 4.387 Å


def test_a_known_cell_is_not_indexed(tmp_path, empty):
    listed = write_list(tmp_path / "three.csv", [("F", 4.387, 1.0)])
    three = listed.read_text().splitlines()[:5]
    listed.write_text("\n".join(three) + "\n")
    assert run("adopt", listed, *NITRIDE, store=empty).code == 2
    ran = run("adopt", listed, *NITRIDE, "--lattice", "F", "--a", "4.39", store=empty)
    assert ran.code == 0 and "the cell was given" in ran.out


def test_the_rest_of_a_mixture_is_adopted(tmp_path, store):
    listed = write_list(tmp_path / "mixture.csv", [("F", 4.387, 1.0), ("I", 2.8665, 0.8)])
    iron, known = "iron (alpha, ferrite)", ("--elements", "Fe,Ti,Zr,N")
    assert probability_of(iron, listed, store, *known) > 0.5
    index = run("index", listed, "--left-over", *known, "--json", store=store).json
    assert index["solutions"][0]["a_angstrom"] == pytest.approx(4.387, rel=3e-3)
    assert run("adopt", listed, "--left-over", *known, *NITRIDE, "--accept-warning", store=store).code == 0
    assert probability_of("blade phase", listed, store, *known) > 0.5
    assert probability_of(iron, listed, store, *known) > 0.5


@pytest.mark.parametrize(
    ("options", "says"),
    [
        (("--lattice", "F"), "--lattice and --a together"),
        (("--a", "4.39"), "--lattice and --a together"),
        (("--lattice", "F", "--a", "0.439"), "nm typed by mistake"),
        (("--density", "heavy"), "--density"),
        (("--source-kind", "rumour"), "rumour"),
    ],
)
def test_what_cannot_be_adopted(options, says, unknown, empty):
    ran = run("adopt", unknown, *NITRIDE, *options, store=empty)
    assert (ran.code, ran.out) == (2, "") and says in ran.err
    with Library.open(empty) as library:
        assert library.phase_count == 0


def test_name_and_formula_are_wanted(unknown, empty):
    assert run("adopt", unknown, "--name", "x", store=empty).code == 2
    bad = run("adopt", unknown, "--name", "x", "--formula", "Xy2", store=empty)
    assert bad.code == 2 and "Xy" in bad.err
