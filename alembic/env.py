"""How migrations run: on the connection that the service hands over, in its transaction."""

from alembic import context

from service.records.tables import metadata

connection = context.config.attributes["connection"]


def ours(_object: object, name: str | None, kind: str, _reflected: bool, _compared: object) -> bool:
    """Leave out the job queue's tables: they are made by its own library, in a schema of their own."""
    return not (kind == "table" and name is not None and name.startswith("procrastinate"))


context.configure(
    connection=connection,
    target_metadata=metadata,
    render_as_batch=connection.dialect.name == "sqlite",
    include_object=ours,
    compare_type=True,
    transaction_per_migration=False,
)
context.run_migrations()
