"""Schema changes: every step up, down and up; stores of earlier versions with rows in them."""

from __future__ import annotations

import os
import sqlite3
from pathlib import Path

import pytest
import sqlalchemy as sa
from alembic import command
from alembic.config import Config
from alembic.script import ScriptDirectory

from phasedb.errors import ExitCode, StoreError
from phasedb.library import Library, connect, tables
from phasedb.library.audit import audit
from phasedb.library.migrate import run_revisions, shipped
from phasedb.library.schema import normalised_schema, schema_faults
from phasedb.library.upgrading import upgrade

DUMPS = sorted((Path(__file__).parent / "data").glob("store_*.sql"))


@pytest.fixture(params=DUMPS, ids=lambda path: path.stem)
def old(request, tmp_path) -> str:
    """A store with rows, made by an earlier version."""
    return _from_dump(request.param, tmp_path)


def _from_dump(dump: Path, folder: Path) -> str:
    path = folder / "old.sqlite"
    connection = sqlite3.connect(path)
    connection.executescript(dump.read_text(encoding="utf-8"))
    connection.close()
    return str(path)


def _config(connection) -> Config:
    config = Config()
    config.set_main_option("script_location", str(shipped("migrations")))
    config.attributes["connection"] = connection
    return config


def _memory():
    engine = sa.create_engine("sqlite://")
    return engine, engine.begin()


def test_the_revisions_are_those_that_the_program_knows():
    scripts = ScriptDirectory.from_config(_config(None))
    assert tuple(reversed([script.revision for script in scripts.walk_revisions()])) == tables.REVISIONS
    assert scripts.get_heads() == [tables.REVISIONS[-1]]


def test_there_is_a_store_of_every_earlier_revision():
    assert [path.stem.removeprefix("store_") for path in DUMPS] == list(tables.REVISIONS[:-1])


def test_the_revisions_build_what_the_tables_say():
    engine, begun = _memory()
    with begun as connection:
        run_revisions(connection)
        assert schema_faults(connection) == []
    engine.dispose()


def test_every_step_up_down_and_up_again():
    engine, begun = _memory()
    with begun as connection:
        seen = [normalised_schema(connection)]
        for revision in tables.REVISIONS:
            command.upgrade(_config(connection), revision)
            seen.append(normalised_schema(connection))
        for revision, schema in zip(("base", *tables.REVISIONS[:-1])[::-1], seen[-2::-1], strict=True):
            command.downgrade(_config(connection), revision)
            assert normalised_schema(connection) == schema
        command.upgrade(_config(connection), "head")
        assert normalised_schema(connection) == seen[-1]
    engine.dispose()


def test_only_upgrade_touches_an_older_store(old):
    before = Path(old).read_bytes()
    for write in (False, True):
        with pytest.raises(StoreError, match="phasedb upgrade") as error:
            Library.open(old, write=write)
        assert error.value.exit_code is ExitCode.STORE
    assert Path(old).read_bytes() == before


def test_an_upgraded_store_holds_every_value_and_works(old):
    connection = sqlite3.connect(old)
    rows = {
        table: connection.execute(f'SELECT * FROM "{table}" ORDER BY 1, 2').fetchall()
        for table in ("phase", "site", "source", "alias", "tag", "strength_cache", "history")
    }
    connection.close()
    assert all(rows.values())

    done = upgrade(old, by="Dee")
    assert (done.before, done.after) == (Path(DUMPS[0]).stem.removeprefix("store_"), tables.REVISIONS[-1])

    connection = sqlite3.connect(old)
    for table, expected in rows.items():
        found = connection.execute(f'SELECT * FROM "{table}" ORDER BY 1, 2').fetchall()
        assert found[: len(expected)] == expected
        assert len(found) - len(expected) == (1 if table == "history" else 0)
    connection.close()

    with Library.open(old, by="Dee", write=True) as library:
        assert audit(library).faults == []
        silver = library.get("Feinsilber")
        assert (silver.standing, silver.checked_by, silver.content.a_angstrom) == ("checked", "Bob", 4.0862)
        nitride = library.get("our nitride").content
        assert (nitride.a_angstrom, nitride.a_min_angstrom, nitride.remarks) == (
            4.2421,
            4.22,
            'Zeile eins\n"zwei" – Ångström',
        )
        assert library.list(withdrawn=True)[0].name == "typing slip"
        last = library.history()[-1]
        assert (last.action, last.who) == ("upgraded", "Dee")
        assert "0001" in last.remark
        library.revise("our nitride", {"remarks": "after the upgrade"})
        assert audit(library).faults == []


def test_the_backup_of_an_upgrade_is_the_store_as_it_was(old):
    before = _dump(old)
    done = upgrade(old, by="Dee")
    assert done.backup.parent == Path(old).parent
    assert _dump(str(done.backup)) == before
    assert upgrade(old).backup is None  # up to date: nothing to do, no second backup
    assert len(os.listdir(done.backup.parent)) == 2


def _dump(path: str) -> str:
    connection = sqlite3.connect(path)
    text = "\n".join(connection.iterdump())
    connection.close()
    return text


def test_a_dry_run_changes_nothing(old):
    before = Path(old).read_bytes()
    done = upgrade(old, dry_run=True)
    assert (done.after, done.backup) == (tables.REVISIONS[-1], None)
    assert Path(old).read_bytes() == before
    assert os.listdir(Path(old).parent) == ["old.sqlite"]


def test_an_upgrade_that_fails_half_way_leaves_the_store_as_it_was(old):
    """A table in the way of the second of several new ones."""
    connection = sqlite3.connect(old)
    connection.execute("CREATE TABLE identification (mine)")
    connection.commit()
    connection.close()
    before = _dump(old)
    for dry_run in (True, False):
        with pytest.raises(StoreError):
            upgrade(old, dry_run=dry_run)
    assert _dump(old) == before


def test_an_upgrade_that_would_give_another_schema_is_undone(old):
    connection = sqlite3.connect(old)
    connection.execute("DROP INDEX ix_alias_phase_id")
    connection.commit()
    connection.close()
    before = _dump(old)
    with pytest.raises(StoreError, match="ix_alias_phase_id"):
        upgrade(old)
    assert _dump(old) == before


def test_a_newer_store_is_refused(starter):
    connection = sqlite3.connect(starter)
    connection.execute("UPDATE alembic_version SET version_num = '0999'")
    connection.commit()
    connection.close()
    before = Path(starter).read_bytes()
    with pytest.raises(StoreError, match="newer"):
        upgrade(starter)
    assert Path(starter).read_bytes() == before


def test_what_is_no_library_is_not_upgraded(tmp_path):
    with pytest.raises(StoreError, match="no library"):
        upgrade(str(tmp_path / "none.sqlite"))
    path = tmp_path / "other.sqlite"
    connection = sqlite3.connect(path)
    connection.execute("CREATE TABLE alembic_version (version_num)")
    connection.commit()
    connection.close()
    with pytest.raises(StoreError, match="not a phasedb library"):
        upgrade(str(path))


def test_the_revisions_use_nothing_that_only_one_database_has():
    """The statements for a server come out of the same scripts."""
    from sqlalchemy.dialects import postgresql
    from sqlalchemy.schema import CreateIndex, CreateTable

    for table in tables.metadata.sorted_tables:
        assert "CREATE TABLE" in str(CreateTable(table).compile(dialect=postgresql.dialect()))
        for index in table.indexes:
            assert "CREATE INDEX" in str(CreateIndex(index).compile(dialect=postgresql.dialect()))
        assert all(constraint.name for constraint in table.constraints)
    assert not any(
        isinstance(i, sa.sql.functions.Function)
        for t in tables.metadata.tables.values()
        for x in t.indexes
        for i in x.expressions
    )
    assert connect.is_url("postgresql+psycopg://lab/db")
