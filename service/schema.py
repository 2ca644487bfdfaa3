"""The tables, and how a database of any age gets them."""

from __future__ import annotations

from pathlib import Path

import sqlalchemy as sql

HEAD = "0001"
"""The revision that `service/migrations` leads to."""

_MIGRATIONS = Path(__file__).parent / "migrations"
_LOCK = 0x63757276  # any number, the same in every server

NUMBER: sql.types.TypeEngine[float] = sql.Double().with_variant(sql.REAL(), "sqlite")
METADATA = sql.MetaData()

runs = sql.Table(
    "runs",
    METADATA,
    sql.Column("id", sql.Text, primary_key=True),
    sql.Column("title", sql.Text, nullable=False),
    sql.Column("document_hash", sql.Text, nullable=False),
    sql.Column("created", NUMBER, nullable=False),
    sql.Column("updated", NUMBER, nullable=False),
    sql.Column("state", sql.Text, nullable=False),
    sql.Column("priority", sql.Integer, nullable=False),
    sql.Column("time_limit", NUMBER, nullable=False),
    sql.Column("key", sql.Text, unique=True),
    sql.Column("key_hash", sql.Text),
    sql.Column("attempt", sql.Integer, nullable=False),
    sql.Column("deaths", sql.Integer, nullable=False),
    sql.Column("owner", sql.Text),
    sql.Column("lease", NUMBER),
    sql.Column("cancel_asked", sql.Integer, nullable=False),
    sql.Column("verdict", sql.Text),
    sql.Column("value", NUMBER),
    sql.Column("value_error", NUMBER),
    sql.Column("value_unit", sql.Text),
    sql.Column("seconds", NUMBER),
    sql.Column("reason", sql.Text),
    sql.CheckConstraint("state IN ('waiting', 'solving', 'finished', 'failed', 'stopped')", name="known_state"),
    sql.CheckConstraint("(state = 'solving') = (owner IS NOT NULL)", name="solving_has_an_owner"),
    sql.CheckConstraint("(state = 'solving') = (lease IS NOT NULL)", name="solving_has_a_lease"),
    sql.CheckConstraint("cancel_asked IN (0, 1)", name="cancel_is_yes_or_no"),
    sql.Index("runs_by_state", "state", "priority", "created"),
    sql.Index("runs_by_age", "created", "id"),
    sql.Index("runs_by_document", "document_hash"),
    sqlite_strict=True,
)

documents = sql.Table(
    "documents",
    METADATA,
    sql.Column("run_id", sql.Text, sql.ForeignKey("runs.id", ondelete="CASCADE"), primary_key=True),
    sql.Column("document", sql.Text, nullable=False),
    sqlite_strict=True,
)

results = sql.Table(
    "results",
    METADATA,
    sql.Column("run_id", sql.Text, sql.ForeignKey("runs.id", ondelete="CASCADE"), primary_key=True),
    sql.Column("compressed", sql.Integer, nullable=False),
    sql.Column("document", sql.LargeBinary, nullable=False),
    sqlite_strict=True,
)


_VERSIONS = sql.Table(
    "alembic_version", sql.MetaData(), sql.Column("version_num", sql.String(32), nullable=False, primary_key=True)
)
"""As the migrations keep it."""


def upgrade(engine: sql.Engine) -> None:
    """Bring the database to the current schema; two servers that start at once do it one after the other."""
    if _revision(engine) == HEAD:
        return
    with engine.begin() as connection:
        if connection.dialect.name == "postgresql":
            connection.execute(sql.select(sql.func.pg_advisory_xact_lock(_LOCK)))
        if sql.inspect(connection).get_table_names():
            migrate(connection)
        else:
            METADATA.create_all(connection)  # to which all migrations lead
            _VERSIONS.create(connection)
            connection.execute(_VERSIONS.insert().values(version_num=HEAD))


def migrate(connection: sql.Connection) -> None:
    """Go through the migrations that are missing."""
    # Alembic is slow to import, and most starts do not need it.
    from alembic import command
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", str(_MIGRATIONS).replace("%", "%%"))
    config.attributes["connection"] = connection
    command.upgrade(config, "head")


def _revision(engine: sql.Engine) -> str | None:
    with engine.connect() as connection:
        if not sql.inspect(connection).has_table("alembic_version"):
            return None
        found: str | None = connection.execute(sql.text("SELECT version_num FROM alembic_version")).scalar_one_or_none()
        return found
