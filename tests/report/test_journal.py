"""The journal: what was finished stays finished, whatever moment the program is killed."""

from __future__ import annotations

import json
import tempfile
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from phasedb.errors import InputError
from phasedb.report.journal import Journal


def piece(name, **more):
    return {"file": name, "sha256": name * 2, **more}


def keys(*names):
    return [(name, name * 2) for name in names]


def test_pieces_are_read_back_in_any_order(tmp_path):
    with Journal(tmp_path / "j", "work") as journal:
        journal.add([piece("a", value=1), piece("b", value=2)])
        journal.add([piece("c", value="Å")])
        assert [r["value"] for r in journal.read(keys("c", "a", "b"))] == ["Å", 1, 2]
    with Journal(tmp_path / "j", "work") as journal:
        assert list(journal.finished) == keys("a", "b", "c")
        assert [r["value"] for r in journal.read(keys("b", "c"))] == [2, "Å"]


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 400))
def test_a_file_cut_at_any_byte_keeps_all_whole_pieces(cut):
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "j"
        with Journal(path, "work") as journal:
            for name in "abcde":
                journal.add([piece(name, value=name)])
        content = path.read_bytes()[:cut]
        path.write_bytes(content)
        whole = max(0, content.count(b"\n") - 1)
        with Journal(path, "work") as journal:
            assert list(journal.finished) == keys(*"abcde"[:whole])
            journal.add([piece("z", value="z")])
        with Journal(path, "work") as journal:
            assert [r["value"] for r in journal.read(keys(*"abcde"[:whole], "z"))] == [*"abcde"[:whole], "z"]
        assert all(json.loads(line) for line in path.read_bytes().splitlines())


@pytest.mark.parametrize("tail", [b'{"file": "q"', b"\x00\x00\x00", b"nonsense\n", b"[1]\n"])
def test_a_torn_or_spoilt_end_is_dropped(tmp_path, tail):
    path = tmp_path / "j"
    with Journal(path, "work") as journal:
        journal.add([piece("a")])
    path.write_bytes(path.read_bytes() + tail)
    with Journal(path, "work") as journal:
        assert list(journal.finished) == keys("a")
        journal.add([piece("b")])
    with Journal(path, "work") as journal:
        assert list(journal.finished) == keys("a", "b")


def test_unfinished_work_of_another_kind_is_not_thrown_away(tmp_path):
    path = tmp_path / "j"
    with Journal(path, "work") as journal:
        journal.add([piece("a")])
    before = path.read_bytes()
    with pytest.raises(InputError, match="unfinished"):
        Journal(path, "other work")
    assert path.read_bytes() == before


def test_finished_work_of_another_kind_is_replaced(tmp_path):
    path = tmp_path / "j"
    with Journal(path, "work") as journal:
        journal.add([piece("a")])
        journal.end()
    with Journal(path, "other work") as journal:
        assert journal.finished == {}
    with Journal(path, "other work") as journal:
        journal.add([piece("b")])
    with Journal(path, "other work") as journal:
        assert list(journal.finished) == keys("b")


def test_a_finished_journal_goes_on_when_more_is_to_be_done(tmp_path):
    path = tmp_path / "j"
    with Journal(path, "work") as journal:
        journal.add([piece("a")])
        journal.end()
    with Journal(path, "work") as journal:
        journal.add([piece("b")])
        assert list(journal.finished) == keys("a", "b")
    with pytest.raises(InputError, match="unfinished"):
        Journal(path, "other")


def test_a_piece_marked_again_counts_now_but_not_next_time(tmp_path):
    path = tmp_path / "j"
    with Journal(path, "work") as journal:
        journal.add([piece("a", again=True)])
        assert len(list(journal.read(keys("a")))) == 1
    with Journal(path, "work") as journal:
        assert journal.finished == {}


def test_two_at_once_are_kept_apart(tmp_path):
    pytest.importorskip("fcntl")
    with Journal(tmp_path / "j", "work"), pytest.raises(InputError, match="another batch"):
        Journal(tmp_path / "j", "work")
    Journal(tmp_path / "j", "work").__exit__(None, None, None)


def test_a_file_that_is_no_journal_is_not_overwritten(tmp_path):
    path = tmp_path / "j"
    path.write_text('{"my": "data"}\n')
    with pytest.raises(InputError):
        Journal(path, "work")
    assert path.read_text() == '{"my": "data"}\n'
