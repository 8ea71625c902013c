"""The same schema and commands on a PostgreSQL server.

Needs an empty database that may be filled: PHASEDB_TEST_SERVER=postgresql+psycopg://USER@HOST/DATABASE.
"""

from __future__ import annotations

import os

import numpy as np
import pytest
import sqlalchemy as sa

from phasedb.errors import RuleRefusedError
from phasedb.library import Library
from phasedb.library.audit import audit

SERVER = os.environ.get("PHASEDB_TEST_SERVER", "")

pytestmark = pytest.mark.skipif(not SERVER, reason="PHASEDB_TEST_SERVER names no database server")


@pytest.fixture
def server():
    engine = sa.create_engine(SERVER)
    with engine.begin() as connection:
        connection.execute(sa.text("DROP SCHEMA public CASCADE"))
        connection.execute(sa.text("CREATE SCHEMA public"))
    engine.dispose()
    return SERVER


def test_a_library_on_a_server_is_the_same(server, starter, nitride):
    Library.create(server, by="Ann").close()
    with pytest.raises(RuleRefusedError):
        Library.create(server)
    for store in (server, starter):
        with Library.open(store, by="Ann", write=True) as library:
            library.add(nitride, accept_warnings=True)
            library.withdraw("gold", reason="x")
        with Library.open(store, by="Bob", write=True) as library:
            library.check("our nitride")
            with pytest.raises(RuleRefusedError, match="not 1"):
                library.revise("our nitride", {"a_angstrom": 4.25}, expect_version=1)
    with Library.open(server) as there, Library.open(starter) as here:
        assert audit(there).faults == []
        assert there.fingerprint == here.fingerprint
        one, other = there.table(), here.table()
        assert one.name == other.name
        assert np.array_equal(one.a_angstrom, other.a_angstrom)
        assert np.array_equal(one.line_strength, other.line_strength)
        assert there.within("F", 4, 5, centre=4.3, limit=7)[0].name == (
            here.within("F", 4, 5, centre=4.3, limit=7)[0].name
        )
        assert [e.name for e in there.list(elements=["Ti"])] == [e.name for e in here.list(elements=["Ti"])]
        head = there.history()[364].hash
    with Library.open(server, as_of=head) as then:
        assert then.phase_count == 364


def test_the_history_of_a_server_is_append_only_too(server):
    Library.create(server, by="Ann", starter=False).close()
    engine = sa.create_engine(server)
    for statement in ("UPDATE history SET who = 'Eve'", "DELETE FROM history", "TRUNCATE history"):
        with pytest.raises(sa.exc.DBAPIError, match="append-only"), engine.begin() as connection:
            connection.execute(sa.text(statement))
    engine.dispose()
