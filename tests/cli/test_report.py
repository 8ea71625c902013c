"""The report command: from a list and from a saved identification, with what people give."""

from __future__ import annotations

import pytest
from running import run


@pytest.fixture(scope="module")
def written(starter_store, tmp_path_factory):
    from cli.conftest_paths import DEMO

    path = tmp_path_factory.mktemp("report") / "knife.html"
    words = ("--customer", "Nordkai & Sons <b>", "--analyst", "J. Ode", "--received", "2026-11-03")
    ran = run(
        "report",
        DEMO / "bread_knife_17.csv",
        "-o",
        path,
        "--elements",
        "Ti,N,Fe,C",
        *words,
        store=starter_store,
    )
    assert ran.code == 0, ran.err
    assert ran.out == ""
    return path.read_text(encoding="utf-8")


def test_it_holds_the_answer_and_what_was_given(written):
    assert "titanium nitride" in written
    assert "bread knife 17, coated side" in written
    assert "Nordkai &amp; Sons &lt;b&gt;" in written
    assert "2026-11-03" in written
    assert len(written.encode()) < 2_000_000


def test_it_names_what_was_not_given(written):
    blank = written.split("usually needed in a test report: ")[1].split(".")[0]
    assert "laboratory" in blank
    assert "customer" not in blank
    assert "sample" not in blank


def test_it_marks_every_entry_and_carries_the_library_s_history(written, starter_store):
    head = run("audit", "--json", store=starter_store).json["history"]["head"]
    assert head in written
    assert written.count('id="axis-wide-entries-F"') == 1


def test_a_saved_identification_gives_a_page_without_its_file(store, knife, tmp_path):
    copy = tmp_path / "once.csv"
    copy.write_bytes(knife.read_bytes())
    run("match", copy, "--elements", "Ti,N,Fe,C", "--save", store=store)
    copy.unlink()
    run("withdraw", "titanium nitride", "--reason", "to see the page as it was then", store=store)
    ran = run("report", "--identification", 1, "-o", tmp_path / "page.html", store=store)
    assert ran.code == 0, ran.err
    text = (tmp_path / "page.html").read_text(encoding="utf-8")
    assert "from saved identification 1" in text
    assert "titanium nitride" in text
    assert "as the library is now" in text
    assert "The curve was not kept" not in text


def test_the_date_can_be_given_and_then_the_bytes_repeat(small_store, knife, tmp_path):
    for name in "ab":
        run("report", knife, "-o", tmp_path / f"{name}.html", "--issued", "2026-12-24", store=small_store)
    a, b = ((tmp_path / f"{name}.html").read_bytes() for name in "ab")
    assert a == b
    assert b"issued 2026-12-24" in a


def test_json_says_what_was_written(small_store, knife, tmp_path):
    ran = run("report", knife, "-o", tmp_path / "a.html", "--json", store=small_store)
    assert ran.json["schema"] == "phasedb.report/1"
    assert ran.json["bytes"] == (tmp_path / "a.html").stat().st_size


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        ([], 2, "-o"),
        (["-o", "a.html"], 2, "PEAKS or --identification"),
        (["absent.csv", "-o", "a.html"], 2, "absent.csv"),
        (["{knife}", "-o", "absent/a.html"], 2, "no such folder"),
        (["{knife}", "--identification", "1", "-o", "a.html"], 2, "one of them"),
        (["--identification", "77", "-o", "a.html"], 2, "77"),
    ],
)
def test_bad_usage(small_store, knife, tmp_path, monkeypatch, words, code, said):
    monkeypatch.chdir(tmp_path)
    ran = run("report", *(word.format(knife=knife) for word in words), store=small_store)
    assert ran.code == code
    assert said in ran.err
    assert list(tmp_path.iterdir()) == []


def test_foreign_lines_are_drawn_and_marked(small_store, knife, tmp_path):
    (tmp_path / "holder.csv").write_text("# radiation: Cu\ntwo_theta_deg\n33.159\n")
    words = ("--foreign", tmp_path / "holder.csv", "--elements", "Ti,N,Fe,C", "-o", tmp_path / "a.html")
    ran = run("report", knife, *words, store=small_store)
    assert ran.code == 0, ran.err
    text = (tmp_path / "a.html").read_text(encoding="utf-8")
    assert "foreign line" in text
    assert 'data-line="1"' in text
