"""Run by alembic; `service.schema.upgrade` hands over the connection with its transaction open."""

from alembic import context

context.configure(connection=context.config.attributes["connection"], transactional_ddl=True)
with context.begin_transaction():
    context.run_migrations()
