"""Alembic's entry: runs the revisions on the connection that phasedb hands over (phasedb.library.migrate)."""

from alembic import context

connection = context.config.attributes.get("connection")
if connection is None:
    raise SystemExit("the revisions are run by phasedb itself; use: phasedb init, or phasedb upgrade")
context.configure(connection=connection)
with context.begin_transaction():
    context.run_migrations()
