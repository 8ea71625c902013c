"""The audit finds what was done to a store behind the tool's back."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from pathlib import Path

import pytest

from phasedb.errors import InputError, StoreError
from phasedb.library import Library
from phasedb.library.audit import audit
from phasedb.library.chain import HistoryRow, row_hash


@pytest.fixture
def busy(starter, nitride):
    """A store in which a few things happened."""
    with Library.open(starter, by="Bob", write=True) as library:
        library.add(nitride, accept_warnings=True)
        library.check("silicon")
        library.withdraw("polonium (alpha)", reason="nobody has any")
    with Library.open(starter, by="Cy", write=True) as library:
        library.revise(
            "our nitride", {"a_angstrom": 4.2399, "remarks": "second powder"}, accept_warnings=True
        )
    return starter


def _faults(store: str, expect: str | None = None) -> str:
    with Library.open(store) as library:
        return "\n".join(audit(library, expect=expect).faults)


def _edit(store: str, *statements: str) -> None:
    with closing(sqlite3.connect(store)) as connection, connection:
        for statement in statements:
            connection.execute(statement)


_NO_TRIGGERS = ("DROP TRIGGER history_no_update", "DROP TRIGGER history_no_delete")


def _make_triggers(store: str) -> tuple[str, ...]:
    connection = sqlite3.connect(store)
    found = connection.execute("SELECT sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
    connection.close()
    return tuple(sql for (sql,) in found)


def test_a_whole_store(busy):
    with Library.open(busy) as library:
        found = audit(library)
        assert found.faults == []
        assert (found.phase_count, found.history_count) == (365, 369)
        assert found.history_head == library.history_head
        assert found.fingerprint == library.fingerprint


def test_the_history_cannot_be_changed_through_sql(busy):
    for statement in ("UPDATE history SET who = 'Eve'", "DELETE FROM history WHERE number = 3"):
        with pytest.raises(sqlite3.IntegrityError, match="append-only"):
            _edit(busy, statement)
    assert _faults(busy) == ""


@pytest.mark.parametrize(
    ("statement", "said"),
    [
        ("UPDATE history SET who = 'Eve' WHERE number = 366", "row 366 (entered phase) was changed"),
        ("UPDATE history SET remark = remark || ' ' WHERE number = 2", "row 2 (entered phase) was changed"),
        ("UPDATE history SET before = NULL WHERE number = 369", "row 369"),
        ("UPDATE history SET at = '2020' WHERE number = 1", "row 1 (made library) was changed"),
        ("DELETE FROM history WHERE number = 367", "rows 367 to 367 are missing"),
        ("DELETE FROM history WHERE number = 1", "rows 1 to 1 are missing"),
        ("DELETE FROM history WHERE number > 367", "rows were cut off"),
        ("UPDATE history SET number = 1000 WHERE number = 369", "are missing"),
    ],
)
def test_a_changed_history(busy, statement, said):
    triggers = _make_triggers(busy)
    _edit(busy, *_NO_TRIGGERS, statement, *triggers)
    assert said in _faults(busy)


def test_text_in_a_number_is_refused_by_the_table(busy):
    with pytest.raises(sqlite3.IntegrityError):
        _edit(busy, "UPDATE phase SET a_angstrom = '5.43 or so' WHERE name = 'silicon'")


def test_dropped_triggers_are_missed(busy):
    _edit(busy, "DROP TRIGGER history_no_update")
    assert "history_no_update" in _faults(busy)


@pytest.mark.parametrize(
    ("statement", "said"),
    [
        ("UPDATE phase SET a_angstrom = 5.5 WHERE name = 'silicon'", "a_angstrom: 5.430941 -> 5.5"),
        ("UPDATE phase SET standing = 'checked' WHERE name = 'copper'", "standing: draft -> checked"),
        ("UPDATE phase SET checked_by = 'Eve' WHERE name = 'silicon'", "checked_by: Bob -> Eve"),
        ("UPDATE phase SET version = 9 WHERE name = 'copper'", "version: 1 -> 9"),
        ("UPDATE phase SET remarks = 'x' WHERE name = 'copper'", "remarks: (none) -> x"),
        ("UPDATE phase SET name = 'kopper' WHERE name = 'copper'", "filed under another name"),
        ("UPDATE phase SET name_key = 'kopper' WHERE name = 'copper'", "filed under another name"),
        ("UPDATE phase SET elements = ' Ag ' WHERE name = 'copper'", "other elements"),
        ("UPDATE phase SET checksum = upper(checksum) WHERE name = 'copper'", "checksum"),
        ("UPDATE source SET citation = 'me' WHERE phase_id = 4 AND position = 0", "'copper'"),
        ("UPDATE site SET x = 0.25 WHERE phase_id = 4", "'copper'"),
        ("DELETE FROM tag WHERE phase_id = 4", "'copper'"),
        ("INSERT INTO alias VALUES ('kupfer', 4, 'Kupfer')", "'copper'"),
        ("INSERT INTO alias VALUES ('kupfer', 4, 'Messing')", "alias 'Messing' is filed under"),
        ("DELETE FROM phase WHERE name = 'copper'", "'copper' of the history is not in the store"),
        ("UPDATE state SET phase_count = 1", "counts 1 entries"),
        ("UPDATE state SET fingerprint = '00'", "fingerprint"),
        ("UPDATE state SET history_head = 'ff'", "history head"),
        ("UPDATE state SET history_count = 5", "counts 5 history rows"),
        ("UPDATE strength_cache SET strength = zeroblob(8) WHERE phase_id = 4", "cached lines"),
        ("DELETE FROM state", "0 rows"),
        ("DROP INDEX ix_alias_phase_id", "ix_alias_phase_id is missing"),
        ("CREATE TRIGGER t AFTER INSERT ON phase BEGIN SELECT 1; END", "t is not part"),
        ("CREATE VIEW v AS SELECT 1", "v is not part"),
    ],
)
def test_an_entry_changed_behind_the_tools_back(busy, statement, said):
    _edit(busy, statement)
    assert said in _faults(busy)


def test_an_added_entry_is_not_in_the_history(busy):
    columns = "name, name_key, uid"
    rest = [c for c in _columns(busy) if c not in ("id", "name", "name_key", "uid")]
    _edit(
        busy,
        f"INSERT INTO phase ({columns}, {', '.join(rest)}) "
        f"SELECT 'smuggled', 'smuggled', 'abc', {', '.join(rest)} FROM phase WHERE name = 'copper'",
    )
    assert "'smuggled' is not in the history" in _faults(busy)


def _columns(store: str) -> list[str]:
    connection = sqlite3.connect(store)
    names = [row[1] for row in connection.execute("PRAGMA table_info(phase)")]
    connection.close()
    return names


def test_a_rebuilt_chain_needs_a_head_from_outside(busy):
    """Cutting the end off and mending the state deceives the chain, not --expect."""
    with Library.open(busy) as library:
        head = library.history_head
        rows = library.history()
    triggers = _make_triggers(busy)
    last = rows[-2]
    entry = rows[-1]
    _edit(busy, *_NO_TRIGGERS, f"DELETE FROM history WHERE number = {entry.number}", *triggers)
    _edit(busy, f"UPDATE state SET history_count = {last.number}, history_head = '{last.hash}'")
    _undo_in_phase(busy, entry)
    assert _faults(busy) == ""
    assert "is not in the history" in _faults(busy, expect=head)
    assert _faults(busy, expect=last.hash[:12]) == ""


def _undo_in_phase(store: str, row: HistoryRow) -> None:
    """Put the entry of the last row back as it was before, as a careful forger would."""
    import json

    from phasedb.library.entry import content_checksum
    from phasedb.library.writing import fingerprint_of

    before = json.loads(row.before)
    connection = sqlite3.connect(store)
    with connection:
        connection.execute(
            "UPDATE phase SET a_angstrom = ?, remarks = '', version = ?, changed_by = NULL, "
            "changed_at = NULL, checksum = ? WHERE uid = ?",
            (before["a_angstrom"], before["version"], content_checksum(before), row.key),
        )
        sums = [value for (value,) in connection.execute("SELECT checksum FROM phase")]
        connection.execute("UPDATE state SET fingerprint = ?", (fingerprint_of(sums),))
    connection.close()


def test_an_expected_head_may_be_followed_by_later_rows(busy, nitride):
    with Library.open(busy, by="Dee", write=True) as library:
        head = library.history_head
        library.revise("our nitride", {"remarks": "third powder"})
        found = audit(library, expect=head.upper())
        assert found.faults == []
        assert found.since_expected == 1
        assert audit(library, expect=library.history_head).since_expected == 0
        for wrong in ("", "abc", "not a head", "g" * 64, "0" * 65):
            with pytest.raises(InputError):
                audit(library, expect=wrong)
        assert "is not in the history" in audit(library, expect="f" * 64).faults[0]


def test_a_flipped_bit_in_a_number(busy):
    """SQLite's own check does not see it; the checksum and the replay do."""
    connection = sqlite3.connect(busy)
    value = connection.execute("SELECT a_angstrom FROM phase WHERE name = 'gold'").fetchone()[0]
    connection.close()
    import struct

    pattern = struct.pack(">d", value)
    data = bytearray(Path(busy).read_bytes())
    places = [i for i in range(len(data)) if data[i : i + 8] == pattern]
    assert places
    for place in places:
        data[place + 3] ^= 0x10
    Path(busy).write_bytes(data)
    connection = sqlite3.connect(busy)
    changed = connection.execute("SELECT a_angstrom FROM phase WHERE name = 'gold'").fetchone()[0]
    connection.close()
    assert changed != value
    assert "'gold'" in _faults(busy)


def test_a_flipped_bit_anywhere_in_use_is_found(busy):
    """Bytes all over the file; unused space inside a page may go unseen."""
    clean = Path(busy).read_bytes()
    unseen = 0
    tried = 0
    for place in range(200, len(clean), 109_987):
        data = bytearray(clean)
        data[place] ^= 0x04
        if not data[place] or not clean[place]:
            continue  # free space inside a page is zero
        tried += 1
        Path(busy).write_bytes(data)
        try:
            unseen += not _faults(busy)
        except StoreError:
            continue
    assert tried >= 5
    assert unseen <= 0.25 * tried  # stale bytes of freed cells


def test_a_truncated_file(busy):
    path = Path(busy)
    path.write_bytes(path.read_bytes()[:-8192])
    try:
        assert _faults(busy)
    except StoreError as error:
        assert "damaged" in str(error)


def test_a_saved_identification_that_was_tampered_with(busy):
    from phasedb.library import tables
    from phasedb.library.documents import insert_record

    with Library.open(busy, by="Ann", write=True) as library, library.begin_write() as writing:
        who = {"entered_by": "Ann", "entered_at": writing.at}
        measurement = insert_record(
            writing,
            tables.measurement,
            {"source": "a.csv", "sha256": "0" * 64, "sample": "", "peaks": "[" + "1," * 400 + "1]", **who},
        )
        import hashlib

        insert_record(
            writing,
            tables.identification,
            {
                "measurement_id": measurement["id"],
                "settings": "{}",
                "program_version": "0",
                "library_fingerprint": library.fingerprint,
                "history_head": library.history_head,
                "history_count": library.history_count,
                "result": "{}",
                "result_sha256": hashlib.sha256(b"{}").hexdigest(),
                "made_by": "Ann",
                "made_at": writing.at,
            },
        )
    assert _faults(busy) == ""
    for statement, said in (
        ("UPDATE identification SET result = '{\"p\": 1}'", "SHA-256"),
        ("UPDATE identification SET library_fingerprint = 'ab'", "another fingerprint"),
        ("UPDATE identification SET history_head = 'ab'", "history head"),
        ("UPDATE measurement SET peaks = peaks || ' '", "measurement"),
        ("DELETE FROM measurement", "refers to a row"),
    ):
        kept = Path(busy).read_bytes()
        _edit(busy, statement)
        assert said in _faults(busy)
        Path(busy).write_bytes(kept)


def test_the_hash_of_a_row_tells_its_parts_apart():
    assert row_hash(("ab", "c")) != row_hash(("a", "bc"))
    assert row_hash((None, "")) != row_hash(("", None))
    assert row_hash(("1:a", "b")) != row_hash(("1", "a1:b"))
