"""The library as it was: at a date, at a time, at a history head."""

from __future__ import annotations

import pytest

from phasedb.errors import InputError, StoreError
from phasedb.library import Library
from phasedb.library.people import end_of


@pytest.fixture
def story(starter, nitride):
    """Moments (time, head, fingerprint, what silicon and the nitride were) along a store's life."""
    moments = []

    def note(library):
        row = library.history()[-1]
        moments.append((row.at, library.history_head, library.fingerprint, _seen(library)))

    with Library.open(starter, by="Bob", write=True) as library:
        note(library)
        library.add(nitride, accept_warnings=True)
        note(library)
        library.check("silicon")
        note(library)
        library.revise("our nitride", {"a_angstrom": 4.25, "name": "renamed"}, accept_warnings=True)
        note(library)
        library.withdraw("silicon", reason="x")
        note(library)
    return starter, moments


def _seen(library):
    table = library.table()
    return (
        library.phase_count,
        library.history_count,
        table.name,
        table.standing,
        tuple(table.a_angstrom),
        table.line_n.tobytes(),
        table.line_strength.tobytes(),
        [(e.name, e.version, e.standing) for e in library.entries()],
    )


def test_every_moment_comes_back_by_time_and_by_head(story):
    store, moments = story
    for at, head, fingerprint, seen in moments:
        for as_of in (at, head):
            with Library.open(store, as_of=as_of) as then:
                assert then.fingerprint == fingerprint
                assert then.history_head == head
                assert _seen(then) == seen


def test_moments_and_heads_may_be_written_shorter_or_otherwise(story):
    store, moments = story
    at, head, fingerprint, _ = moments[2]
    for as_of in (head[:10], at.replace("Z", "+00:00"), f" {at} "):
        with Library.open(store, as_of=as_of) as then:
            assert then.fingerprint == fingerprint


def test_before_the_library_was_made_there_was_nothing(story):
    store, _ = story
    with Library.open(store, as_of="2001-01-01") as then:
        assert len(then.table()) == 0
        assert then.history_count == 0
        assert then.entries() == []


def test_the_past_cannot_be_changed(story):
    store, _ = story
    with pytest.raises(InputError):
        Library.open(store, as_of="2001-01-01", write=True)
    with Library.open(store, as_of="2101-01-01") as then, pytest.raises(StoreError):
        then.withdraw("copper", reason="x")


def test_a_window_of_the_past(story):
    store, moments = story
    with Library.open(store, as_of=moments[1][1]) as then:
        found, count = then.within("F", 4.2311, 4.2313, limit=5)
        assert (found.name, count) == (("our nitride",), 1)
    with Library.open(store, as_of=moments[3][1]) as then:
        assert then.within("F", 4.2311, 4.2313, limit=5)[1] == 0
        assert then.get("renamed").content.a_angstrom == 4.25


@pytest.mark.parametrize("text", ["", "yesterday", "2026-13-01", "deadbeefdeadbeef", "20260301"])
def test_what_is_no_moment(story, text):
    if text == "20260301":  # a date in ISO 8601's short form, not a hash
        with Library.open(story[0], as_of=text) as then:
            assert then.as_of.startswith("2026-03-01T23:59:59")
        return
    with pytest.raises(InputError):
        Library.open(story[0], as_of=text)


def test_a_date_means_the_end_of_that_day_in_utc():
    assert end_of("2026-03-01") == "2026-03-01T23:59:59.999999Z"
    assert end_of("2026-03-01T09:30") == "2026-03-01T09:30:00.000000Z"
    assert end_of("2026-03-01T09:30:00+02:00") == "2026-03-01T07:30:00.000000Z"
