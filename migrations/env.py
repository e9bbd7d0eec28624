"""Alembic's way in.

`service.records.migrating` passes a connection; a developer's `alembic` reads the settings.
"""

from __future__ import annotations

from datetime import UTC, datetime

from alembic import context
from sqlalchemy import Connection

from service.records.migrating import naming_by_date, open_for_migration
from service.records.tables import collection
from service.settings import Settings


def run(connection: Connection) -> None:
    """Run the migrations that were asked for, all in one transaction."""
    context.configure(
        connection=connection,
        target_metadata=collection.metadata(),
        render_as_batch=connection.dialect.name == "sqlite",
        compare_type=True,
        process_revision_directives=naming_by_date(datetime.now(UTC)),
    )
    with context.begin_transaction():
        context.run_migrations()


passed: Connection | None = context.config.attributes.get("connection")
if passed is not None:
    run(passed)
else:
    with open_for_migration(Settings.from_environment().database_url) as connection:
        run(connection)
