"""Alembic's entry: runs in the transaction of the connection it is handed, with foreign keys off.

Altering a table on SQLite copies and drops it; with foreign keys on that would empty its children. The switch does
nothing inside a transaction, so ``hub.store.schema`` sets it before it begins and checks every reference afterwards.
"""

from alembic import context

from hub.store.tables import metadata

connection = context.config.attributes["connection"]
context.configure(
    connection=connection,
    target_metadata=metadata,
    render_as_batch=True,
    transactional_ddl=True,
    transaction_per_migration=False,
)
with context.begin_transaction():
    context.run_migrations()
