"""Where Alembic meets the store: it gets an open connection inside a transaction that its caller ends."""

from __future__ import annotations

from alembic import context

from xmatch.store.schema import REVISION_TABLE, metadata

connection = context.config.attributes.get("connection")
if connection is None:
    raise SystemExit("migrations run inside blankfield: blankfield store upgrade")
context.configure(
    connection=connection,
    target_metadata=metadata,
    version_table=REVISION_TABLE,
    render_as_batch=connection.dialect.name == "sqlite",
)
with context.begin_transaction():
    context.run_migrations()
