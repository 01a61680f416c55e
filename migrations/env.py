"""Run migrations on the connection handed over by the store; there is no other way in."""

from alembic import context

from service.store.tables import Base

context.configure(
    connection=context.config.attributes["connection"],
    target_metadata=Base.metadata,
    # SQLite cannot alter a table in place.
    render_as_batch=True,
)
with context.begin_transaction():
    context.run_migrations()
