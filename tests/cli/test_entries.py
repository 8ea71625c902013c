"""The commands that make a library and keep its entries, as a user types them."""

from __future__ import annotations

import shutil

import pytest
from running import run

ADD = ("add", "--name", "our nitride", "--formula", "TiN", "--lattice", "f", "--a", "4.2312(2)")


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


def test_init_says_what_it_made_and_never_overwrites(tmp_path):
    path = tmp_path / "new.sqlite"
    made = run("init", store=path)
    assert (made.code, made.err) == (0, "")
    assert "364 phases" in made.out
    again = run("init", store=path)
    assert (again.code, again.out) == (3, "")
    assert "nothing was changed" in again.err
    empty = run("init", "--empty", "--json", store=tmp_path / "empty.sqlite")
    assert empty.json["phase_count"] == 0
    assert run("list", store=tmp_path / "empty.sqlite").code == 0


def test_add_show_revise_check_withdraw_restore(store):
    added = run(*ADD, "--structure", "rock salt", "--temperature", "298", "--tag", "coatings",
                "--source", "own powder", "--doi", "https://doi.org/10.1000/182", store=store)  # fmt: skip
    assert added.code == 0, added.err
    assert added.out == "entered 'our nitride': TiN, F, a = 4.2312(2) Å, draft, version 1\n"

    document = run("show", "OUR NITRIDE", "--json", store=store).json
    assert document["schema"] == "phasedb.phase/1"
    phase = document["phase"]
    assert (phase["a_angstrom"], phase["a_esd_angstrom"], phase["a_text"]) == (4.2312, 0.0002, "4.2312(2)")
    assert (phase["temperature_K"], phase["structure_type"], phase["entered_by"]) == (298.0, "B1", "A. First")
    assert document["sources"][0]["doi"] == "10.1000/182"
    cell = document["cell"]
    assert (cell["atoms"], cell["Z"]) == (8, 4)
    assert cell["density_g_cm3"] == pytest.approx(4 * 61.874 / 0.602214076 / 4.2312**3, rel=1e-4)
    assert cell["nearest"][0]["distance_angstrom"] == pytest.approx(4.2312 / 2, abs=1e-4)
    assert cell["nearest"][0]["count"] == 6

    revised = run("revise", "our nitride", "--a", "0.42330(1) nm", "--reason", "new standard",
                  "--expect-version", "1", by="B. Second", store=store)  # fmt: skip
    assert "4.23300(10) Å" in revised.out
    assert "version 2" in revised.out
    stale = run("revise", "our nitride", "--remarks", "x", "--expect-version", "1", store=store)
    assert stale.code == 3
    assert "B. Second" in stale.err
    assert "4.2312 -> 4.233" in stale.err

    for who, code in (("A. First", 3), ("b. second", 3), ("C. Third", 0)):
        assert run("check", "our nitride", by=who, store=store).code == code
    assert "checked" in run("show", "our nitride", store=store).out

    gone = run("withdraw", "our nitride", "--reason", "kX", "--replaced-by", "titanium nitride", store=store)
    assert gone.code == 0, gone.err
    names = [p["name"] for p in run("list", "--element", "Ti", "--json", store=store).json["phases"]]
    assert "our nitride" not in names
    listed = run("list", "--withdrawn", "--json", store=store).json
    assert listed == {
        "schema": "phasedb.list/1",
        "phases": [
            {
                "name": "our nitride",
                "formula": "TiN",
                "lattice_type": "F",
                "a_angstrom": 4.233,
                "a_esd_angstrom": 0.0001,
                "temperature_K": 298.0,
                "structure_type": "B1",
                "standing": "withdrawn",
                "version": 4,
            }
        ],
    }
    shown = run("show", "our nitride", store=store).out
    assert "titanium nitride" in shown
    assert "kX" in shown
    assert run("restore-entry", "our nitride", "--reason", "no", store=store).code == 0

    log = run("history", "our nitride", store=store)
    for part in (
        "entered",
        "revised",
        "checked",
        "withdrawn",
        "restored",
        "new standard",
        "B. Second",
        "UTC",
    ):
        assert part in log.out
    assert "4.2312 -> 4.233" in log.out
    rows = run("history", "our nitride", "--json", store=store).json["rows"]
    assert [row["action"] for row in rows] == ["entered", "revised", "checked", "withdrawn", "restored"]
    assert rows[1]["before"]["a_angstrom"] == 4.2312
    assert rows[1]["after"]["a_angstrom"] == 4.233
    assert run("audit", store=store).code == 0


def test_warnings_write_nothing_until_they_are_accepted(store):
    words = ("add", "--name", "n", "--formula", "TiN", "--lattice", "F", "--a", "4.2351")
    refused = run(*words, store=store)
    assert (refused.code, refused.out) == (3, "")
    assert "kX typed as Å?" in refused.err
    assert run("show", "n", store=store).code == 2
    accepted = run(*words, "--accept-warning", "--json", store=store)
    assert accepted.json["version"] == 1
    assert "kX typed as Å?" in accepted.json["warnings"][0]
    assert "accepted warning" in run("history", "n", store=store).out


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("--a", "0.42312"), "4.2312 (Å)"),
        (("--a", "423.12"), "4.2312 (Å)"),
        (("--a", "0"), "--a"),
        (("--a", "4000"), "--a"),
        (("--a", "nan"), "--a"),
        (("--a", "4,23"), "decimal point"),
        (("--a", ""), "--a"),
        (("--formula", "Xx2"), "Xx"),
        (("--formula", "TiN("), "formula"),
        (("--lattice", "C"), "P, I or F"),
        (("--name", " "), "--name"),
        (("--name", "silicon"), "is taken"),
        (("--temperature", "warm"), "--temperature"),
        (("--temperature", "-3"), "temperature"),
        (("--density", "1e9"), "density"),
        (("--drift", "liquid"), "line compound"),
        (("--doi", "not a doi"), "DOI"),
        (("--a-min", "4.1"), "both ends"),
        (("--a-min", "4.3", "--a-max", "4.4"), "does not hold"),
        (("--alias", "silicon"), "is taken"),
        (("--remarks", "x" * 1_000_001), "at most"),
        (("--source-kind", "blog", "--source", "x"), "source kind"),
        (("--nonsense",), "--nonsense"),
    ],
)
def test_bad_input_to_add(made, words, said):
    done = run(*ADD, *words, store=made)
    assert (done.code, done.out) == (2, "")
    assert done.err.startswith("error: ")
    assert said in done.err


def test_a_missing_option_is_named(made):
    done = run("add", "--name", "x", store=made)
    assert done.code == 2
    assert "--formula" in done.err


@pytest.mark.parametrize(
    ("words", "count"),
    [
        ((), 364),
        (("--element", "Ti", "--element", "N"), 1),
        (("--element", "Ti,O", "--structure", "E2_1"), 2),
        (("--lattice", "p", "--a-max", "0.28 nm"), 1),
        (("--a-min", "16", "--a-max", "17"), 1),
        (("--a-min", "0", "--a-max", "2.7"), 1),
        (("--structure", "rock salt", "--element", "Cl"), 5),
        (("--text", "OSBORNITE"), 1),
        (("--text", "no such words"), 0),
        (("--withdrawn",), 0),
        (("--as-of", "2001-01-01"), 0),
    ],
)
def test_filters(made, words, count):
    assert len(run("list", *words, "--json", store=made).json["phases"]) == count
    text = run("list", *words, store=made)
    assert text.code == 0
    assert all(len(line) <= 80 for line in text.out.splitlines())


@pytest.mark.parametrize(
    "words",
    [
        ("--element", "Xx"),
        ("--lattice", "C"),
        ("--a-min", "0.42"),
        ("--a-max", "many"),
        ("--as-of", "soon"),
    ],
)
def test_bad_filters(made, words):
    done = run("list", *words, store=made)
    assert (done.code, done.out) == (2, "")
    assert done.err.startswith("error: ")


def test_the_past_is_listed(store):
    before = run("history", "--json", store=store).json["rows"][-1]
    run("withdraw", "gold", "--reason", "x", store=store)
    assert len(run("list", "--json", store=store).json["phases"]) == 363
    for as_of in (before["at"], before["hash"]):
        then = run("list", "--as-of", as_of, "--element", "Au", "--json", store=store).json["phases"]
        assert "gold" in [phase["name"] for phase in then]


def test_values_are_cleared_and_sources_kept_apart(store):
    def show():
        document = run("show", "silver", "--json", store=store).json
        return document["phase"], [source["citation"] for source in document["sources"]]

    _, before = show()
    done = run("revise", "silver", "--expansion", "", "--tag", "none", "--source", "own", store=store)
    assert done.code == 0, done.err
    phase, after = show()
    assert (phase["thermal_expansion_per_k"], phase["tags"]) == (None, [])
    assert after == ["own", *before[1:]]
    assert run("revise", "silver", "--doi", "10.1000/1", store=store).code == 0
    assert show()[1] == after
    assert run("revise", "silver", store=store).code == 2
    assert run("revise", "silver", "--name", "", store=store).code == 2


def test_every_entry_can_be_shown(made):
    for name in ("silicon", "maghemite (gamma-Fe2O3)", "potassium alum", "nitrogen (alpha, 4 K)", "halite"):
        shown = run("show", name, store=made)
        assert shown.code == 0, shown.err
        assert all(len(line) <= 80 for line in shown.out.splitlines())
        assert "\x1b" not in shown.out
    assert "recalled" not in run("show", "silicon", store=made).out
    assert "from memory" in run("show", "potassium alum", store=made).out


def test_unknown_names(made):
    done = run("show", "slicon", store=made)
    assert (done.code, done.out) == (2, "")
    assert "did you mean 'silicon'?" in done.err


def test_no_store(tmp_path):
    for words in (("list",), ("show", "x"), ("history",), ADD, ("check", "x"), ("audit",)):
        done = run(*words, store=tmp_path / "none.sqlite")
        assert (done.code, done.out) == (4, "")
        assert "phasedb init" in done.err


@pytest.mark.parametrize("who", [" ", "a\nb\x07", "x" * 101])
def test_who_acts_must_be_readable(made, who):
    assert run("list", store=made, by=who).code == 2
