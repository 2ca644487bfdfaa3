"""Runs with their documents and results."""

import sqlalchemy as sql
from alembic import op

revision = "0001"
down_revision = None
branch_labels = None
depends_on = None


def upgrade() -> None:
    """Make the first tables."""
    number: sql.types.TypeEngine[float] = sql.Double().with_variant(sql.REAL(), "sqlite")
    op.create_table(
        "runs",
        sql.Column("id", sql.Text, primary_key=True),
        sql.Column("title", sql.Text, nullable=False),
        sql.Column("document_hash", sql.Text, nullable=False),
        sql.Column("created", number, nullable=False),
        sql.Column("updated", number, nullable=False),
        sql.Column("state", sql.Text, nullable=False),
        sql.Column("priority", sql.Integer, nullable=False),
        sql.Column("time_limit", number, nullable=False),
        sql.Column("key", sql.Text, unique=True),
        sql.Column("key_hash", sql.Text),
        sql.Column("attempt", sql.Integer, nullable=False),
        sql.Column("deaths", sql.Integer, nullable=False),
        sql.Column("owner", sql.Text),
        sql.Column("lease", number),
        sql.Column("cancel_asked", sql.Integer, nullable=False),
        sql.Column("verdict", sql.Text),
        sql.Column("value", number),
        sql.Column("value_error", number),
        sql.Column("value_unit", sql.Text),
        sql.Column("seconds", number),
        sql.Column("reason", sql.Text),
        sql.CheckConstraint("state IN ('waiting', 'solving', 'finished', 'failed', 'stopped')", name="known_state"),
        sql.CheckConstraint("(state = 'solving') = (owner IS NOT NULL)", name="solving_has_an_owner"),
        sql.CheckConstraint("(state = 'solving') = (lease IS NOT NULL)", name="solving_has_a_lease"),
        sql.CheckConstraint("cancel_asked IN (0, 1)", name="cancel_is_yes_or_no"),
        sqlite_strict=True,
    )
    op.create_index("runs_by_state", "runs", ["state", "priority", "created"])
    op.create_index("runs_by_age", "runs", ["created", "id"])
    op.create_index("runs_by_document", "runs", ["document_hash"])
    owned = sql.ForeignKey("runs.id", ondelete="CASCADE")
    op.create_table(
        "documents",
        sql.Column("run_id", sql.Text, owned, primary_key=True),
        sql.Column("document", sql.Text, nullable=False),
        sqlite_strict=True,
    )
    op.create_table(
        "results",
        sql.Column("run_id", sql.Text, sql.ForeignKey("runs.id", ondelete="CASCADE"), primary_key=True),
        sql.Column("compressed", sql.Integer, nullable=False),
        sql.Column("document", sql.LargeBinary, nullable=False),
        sqlite_strict=True,
    )


def downgrade() -> None:
    """Drop everything."""
    for table in ("results", "documents", "runs"):
        op.drop_table(table)
