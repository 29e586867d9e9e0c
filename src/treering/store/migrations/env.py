"""Run the migrations on the connection handed over by :mod:`treering.store.schema`."""

from alembic import context

from treering.store.models import METADATA

context.configure(
    connection=context.config.attributes["connection"],
    target_metadata=METADATA,
    transactional_ddl=True,
)
with context.begin_transaction():
    context.run_migrations()
