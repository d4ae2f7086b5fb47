"""Alembic's entry: runs the migrations on the connection it is handed."""

from alembic import context

from registry.storage.tables import Base


def run() -> None:
    """Apply the migrations inside the transaction that the caller holds open."""
    connection = context.config.attributes["connection"]
    context.configure(connection=connection, target_metadata=Base.metadata, transaction_per_migration=False)
    with context.begin_transaction():
        context.run_migrations()


run()
