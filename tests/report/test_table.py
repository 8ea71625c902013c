"""Tables and paragraphs: width, alignment, and nothing ever lost."""

from __future__ import annotations

import io
import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from phasedb.report.table import (
    Column,
    colour_wanted,
    display_width,
    output_width,
    paragraph,
    printable,
    table,
    wrap,
)

words = st.text(st.characters(categories=["L", "N", "P", "S"]), min_size=1, max_size=30)
sentences = st.lists(words, min_size=1, max_size=20).map(" ".join)


def bare(text):
    return re.sub(r"\s+", "", text)


@settings(max_examples=50, deadline=None)
@given(st.lists(st.tuples(words, sentences), min_size=1, max_size=6), st.integers(40, 120))
def test_a_table_fits_and_loses_nothing(rows, width):
    columns = [Column("key", "right"), Column("text", wraps=True)]
    text = table(columns, rows, width)
    fixed = max(display_width(printable(key)) for key, _ in rows)
    if fixed <= 25:
        assert max(display_width(line) for line in text.splitlines()) <= width
    assert all(printable(key) in text for key, _ in rows)
    whole = bare(text)
    for _, value in rows:
        for character in bare(printable(value)):
            assert character in whole


@given(sentences, st.integers(20, 100))
def test_wrapping_keeps_every_character_and_the_width(text, width):
    lines = wrap(text, width)
    assert bare("".join(lines)) == bare(text)
    if text.isascii():
        assert all(len(line) <= width for line in lines)


def test_columns_are_aligned_on_their_side():
    text = table([Column("n", "right"), Column("name")], [("1", "a"), ("100", "bb")], 80)
    assert text.splitlines() == ["  n  name", "  1  a", "100  bb"]


def test_a_wide_column_gives_way_and_grows_again():
    rows = [("x" * 10, "iron with a long name that goes on and on and on for a while")]
    columns = [Column("id"), Column("name", wraps=True)]
    assert len(table(columns, rows, 40).splitlines()) > 2
    assert len(table(columns, rows, 120).splitlines()) == 2


def test_east_asian_text_is_measured_as_it_is_shown():
    lines = table([Column("a"), Column("b", "right")], [("相相", "1"), ("xxxx", "2")], 80).splitlines()
    assert {display_width(line) for line in lines[1:]} == {7}


def test_a_unit_stays_with_its_number():
    text = "the difference is about as much as one could expect, +1.39 % of it"
    for width in range(20, 60):
        assert not any(line.endswith("1.39") for line in wrap(text, width))


@pytest.mark.parametrize("text", ["\x1b[2J", "a\nb", "\x07", "a\u202eb", "\x9b31m"])
def test_names_cannot_steer_a_terminal(text):
    assert printable(text).isprintable()
    assert table([Column("x")], [(text,)], 80).count("\n") == 1


def test_a_paragraph_hangs_under_its_first_line():
    lines = paragraph("one two three four five six seven", 24, first="- ").splitlines()
    assert lines[0].startswith("- one")
    assert all(line.startswith("  ") for line in lines[1:])


class Terminal(io.StringIO):
    def isatty(self):
        return True


def test_a_pipe_is_80_columns_and_a_terminal_as_wide_as_it_says(monkeypatch):
    monkeypatch.setenv("COLUMNS", "133")
    assert output_width(io.StringIO()) == 80
    assert output_width(Terminal()) == 133


@pytest.mark.parametrize(
    ("stream", "environment", "wanted"),
    [
        (Terminal(), {"TERM": "xterm"}, True),
        (Terminal(), {"TERM": "xterm", "NO_COLOR": "1"}, False),
        (Terminal(), {"TERM": "dumb"}, False),
        (io.StringIO(), {"TERM": "xterm"}, False),
    ],
)
def test_colour_only_where_it_is_wanted(monkeypatch, stream, environment, wanted):
    monkeypatch.delenv("NO_COLOR", raising=False)
    for name, value in environment.items():
        monkeypatch.setenv(name, value)
    assert colour_wanted(stream) is wanted
