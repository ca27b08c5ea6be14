"""Run by Alembic: apply the migrations on the connection that the store hands over."""

from alembic import context

from service.store.schema import metadata

context.configure(connection=context.config.attributes["connection"], target_metadata=metadata)
context.run_migrations()
