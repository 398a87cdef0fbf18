"""Run by alembic: uses the connection that `service.store.schema` opened, in its transaction."""

from alembic import context

from service.store.base import metadata

context.configure(
    connection=context.config.attributes["connection"],
    target_metadata=metadata,
    render_as_batch=True,
    compare_type=True,
)
with context.begin_transaction():
    context.run_migrations()
