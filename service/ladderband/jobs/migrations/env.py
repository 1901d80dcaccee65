"""Runs the migrations on the connection that :meth:`Database.migrate` hands over."""

from alembic import context

from ladderband.jobs.records import metadata

context.configure(
    connection=context.config.attributes["connection"],
    target_metadata=metadata,
    transactional_ddl=False,  # the caller's transaction holds all of it
    render_as_batch=True,  # SQLite cannot alter a column in place
)
context.run_migrations()
