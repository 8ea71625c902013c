"""The phase table and its windows: what the matcher gets."""

from __future__ import annotations

import random
import sqlite3
from dataclasses import replace

import numpy as np
import pytest

from phasedb.crystal.lattice import LATTICE_TYPES
from phasedb.crystal.phases import DRIFT_CLASSES, PhaseTable
from phasedb.library import Draft, Library
from phasedb.library.reading import METHOD, lines_of


def _same(one: PhaseTable, other: PhaseTable) -> bool:
    return all(
        np.array_equal(a, b, equal_nan=a.dtype.kind == "f") if isinstance(a, np.ndarray) else a == b
        for a, b in ((getattr(one, name), getattr(other, name)) for name in PhaseTable.__slots__)
    )


def test_the_table_is_that_of_the_entries(starter):
    """Columns straight from rows are the same as through whole entries, one by one."""
    with Library.open(starter) as library:
        table = library.table()
        phases = [entry.phase() for entry in library.entries()]
    assert _same(table, PhaseTable.from_phases(phases, [lines_of(phase) for phase in phases]))
    assert list(table.name) == sorted(table.name, key=str.casefold)
    assert table.is_starter.all()
    assert not table.line_strength.flags.writeable


def test_lines_that_are_not_cached_are_computed(starter):
    with Library.open(starter) as library:
        table = library.table()
    connection = sqlite3.connect(starter)
    connection.execute("DELETE FROM strength_cache WHERE phase_id % 2 = 0")
    connection.execute(f"UPDATE strength_cache SET method = {METHOD + 1} WHERE phase_id % 3 = 0")
    connection.commit()
    connection.close()
    with Library.open(starter) as library:
        assert _same(library.table(), table)


def test_a_change_of_a_or_of_the_structure_renews_the_cached_lines(starter):
    with Library.open(starter, by="Bob", write=True) as library:
        for change in ({"a_angstrom": 5.2}, {"structure_type": "B3"}, {"structure_type": None}):
            library.revise("sodium chloride", change, accept_warnings=True)
            entry = library.get("sodium chloride")
            table = library.table()
            i = table.name.index("sodium chloride")
            found = slice(table.line_start[i], table.line_start[i + 1])
            expected = lines_of(entry.phase())
            if expected is None:
                assert change == {"structure_type": None}
                assert len(table.line_n[found]) == 0
            else:
                assert np.array_equal(table.line_n[found], expected[0])
                assert np.array_equal(table.line_strength[found], expected[1])


def test_drafts_can_be_left_out(starter):
    with Library.open(starter, by="Bob", write=True) as library:
        library.check("silicon")
        library.check("gold")
        assert library.table(checked_only=True).name == ("gold", "silicon")
        assert library.table(checked_only=True).standing == ("checked", "checked")
        assert library.within("F", 4.0, 4.1, limit=9, checked_only=True)[1] == 1


@pytest.mark.parametrize("centre", [None, 4.2, 5.0, 9.9])
@pytest.mark.parametrize("limit", [1, 3, 50, 1000])
def test_windows_are_the_nearest_rows_of_the_table(starter, centre, limit):
    with Library.open(starter) as library:
        table = library.table()
        for lattice in LATTICE_TYPES:
            low, high = 4.0, 5.9362
            found, count = library.within(lattice, low, high, centre=centre, limit=limit)
            inside = [
                i
                for i in range(len(table))
                if LATTICE_TYPES[table.lattice[i]] == lattice and low <= table.a_angstrom[i] <= high
            ]
            start = low if centre is None else centre
            inside.sort(key=lambda i: (abs(table.a_angstrom[i] - start), table.name[i].casefold()))
            assert count == len(inside)
            assert list(found.name) == [table.name[i] for i in inside[:limit]]


def test_ties_in_a_window_go_by_name(empty):
    names = [f"twin {i:02}" for i in range(30)]
    random.Random(3).shuffle(names)
    with Library.open(empty, by="Ann", write=True) as library:
        library.add_many(Draft(name, "Fe", "I", 3.0 + 0.5 * (i % 3)) for i, name in enumerate(names))
        twins = sorted(name for i, name in enumerate(names) if i % 3 == 1)
        found, count = library.within("I", 2.9, 4.1, centre=3.5, limit=4)
        assert (list(found.name), count) == (twins[:4], 30)
        assert library.within("I", 2.9, 4.1, centre=3.5, limit=0)[1] == 30
        assert library.within("I", 5.0, 6.0, limit=5)[1] == 0
        assert len(library.within("P", 0, 100, limit=5)[0]) == 0


def test_windows_use_the_index(starter):
    connection = sqlite3.connect(starter)
    plan = connection.execute(
        "EXPLAIN QUERY PLAN SELECT count(*) FROM phase WHERE lattice_type = 'F' AND a_angstrom >= 4 "
        "AND a_angstrom <= 5 AND standing != 'withdrawn'"
    ).fetchall()
    connection.close()
    assert "COVERING INDEX ix_phase_lattice_type_a_angstrom" in str(plan)


def test_many_at_once_are_one_transaction_with_a_history_row_each(empty, nitride):
    seen = []
    with Library.open(empty, by="Ann", write=True) as library:
        drafts = [replace(nitride, name=f"n {i}", a_angstrom=3 + i / 1e4) for i in range(5003)]
        assert library.add_many(drafts, progress=seen.append, remark="from a file") == 5003
        assert seen == [5000, 5003]
        assert library.history_count == 1 + 5003
        rows = library.history()
        assert {(row.at, row.remark) for row in rows[1:]} == {(rows[1].at, "from a file")}
        assert library.get("n 4711").content.a_angstrom == 3.4711
        before = library.history_head
        with pytest.raises(Exception, match="is taken"):
            library.add_many([replace(nitride, name="new"), replace(nitride, name="N 1")])
        assert library.history_head == before
        assert library.phase_count == 5003


def test_an_order_of_entering_does_not_change_the_fingerprint(tmp_path):
    drafts = [Draft(f"p {i}", "Fe", "I", 3.0 + i / 10) for i in range(5)]
    prints = set()
    for number, order in enumerate((drafts, drafts[::-1])):
        with Library.create(tmp_path / f"{number}.sqlite", starter=False) as library:
            for draft in order:
                library.add(draft, accept_warnings=True)
            prints.add(library.fingerprint)
            library.withdraw("p 3", reason="x")
            assert library.fingerprint not in prints
            library.restore_entry("p 3", reason="y")
            assert library.fingerprint in prints
    assert len(prints) == 1


def test_the_history_of_an_entry_follows_its_renaming(starter):
    with Library.open(starter, by="Bob", write=True) as library:
        library.revise("gold", {"name": 'aurum "24"'})
        rows = library.history('aurum "24"')
        assert [row.action for row in rows] == ["entered", "revised"]
        assert library.history("gold") == rows
        library.revise('aurum "24"', {"name": "gold"})
        assert len(library.history('aurum "24"')) == 3


def test_drift_and_range_reach_the_matcher(starter):
    with Library.open(starter) as library:
        table = library.table()
    i = table.name.index("vanadium carbide (VC0.88)")
    assert DRIFT_CLASSES[table.drift[i]] == "solid solution"
    assert (table.a_low_angstrom[i], table.a_high_angstrom[i]) == (4.13, 4.18)
    assert np.isnan(table.a_low_angstrom[table.name.index("silicon")])
