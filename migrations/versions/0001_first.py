"""The first schema."""

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None

VIEW = (
    "CREATE VIEW run_values AS SELECT runs.id, runs.position, runs.completed, runs.late, configs.cell, "
    "configs.nuisance, {each}.key AS response, {each}.value AS value FROM runs "
    "JOIN configs ON configs.row = runs.config, {call}"
)


def upgrade() -> None:
    """Make every table, and the view that shows single values."""
    op.create_table(
        "beats",
        sa.Column("role", sa.Text(), nullable=False),
        sa.Column("pid", sa.BigInteger(), nullable=False),
        sa.Column("host", sa.Text(), nullable=False),
        sa.Column("beat_us", sa.BigInteger(), nullable=False),
        sa.Column("body", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("role"),
    )
    op.create_table(
        "cautions",
        sa.Column("number", sa.Integer(), autoincrement=True, nullable=False),
        sa.Column("key", sa.Text(), nullable=False),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("along", sa.Text(), nullable=True),
        sa.Column("level", sa.Text(), nullable=True),
        sa.Column("response", sa.Text(), nullable=True),
        sa.Column("run", sa.Text(), nullable=True),
        sa.Column("position", sa.BigInteger(), nullable=True),
        sa.Column("log_e", sa.Float(), nullable=True),
        sa.Column("threshold", sa.Float(), nullable=True),
        sa.Column("grade", sa.Text(), nullable=False),
        sa.Column("state", sa.Text(), nullable=False),
        sa.Column("evidence_loss", sa.Float(), nullable=True),
        sa.Column("raised_us", sa.BigInteger(), nullable=False),
        sa.Column("changed_us", sa.BigInteger(), nullable=False),
        sa.Column("remedy", sa.Text(), nullable=False),
        sa.Column("body", sa.Text(), nullable=False),
        sa.Column("epoch", sa.Integer(), nullable=False),
        sa.PrimaryKeyConstraint("number"),
        sa.UniqueConstraint("key"),
    )
    op.create_table(
        "checkpoints",
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("epoch", sa.Integer(), nullable=False),
        sa.Column("position", sa.BigInteger(), nullable=False),
        sa.Column("body", sa.LargeBinary(), nullable=False),
        sa.PrimaryKeyConstraint("name"),
    )
    op.create_table(
        "configs",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("hash", sa.LargeBinary(), nullable=False),
        sa.Column("cell", sa.Text(), nullable=False),
        sa.Column("nuisance", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("row"),
        sa.UniqueConstraint("hash"),
    )
    op.create_table(
        "displays",
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("shown_us", sa.BigInteger(), nullable=False),
        sa.Column("body", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("name"),
    )
    op.create_table(
        "epochs",
        sa.Column("epoch", sa.Integer(), nullable=False),
        sa.Column("opened_us", sa.BigInteger(), nullable=False),
        sa.Column("from_position", sa.BigInteger(), nullable=False),
        sa.Column("plan_version", sa.Integer(), nullable=False),
        sa.Column("key", sa.LargeBinary(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("scope", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("epoch"),
    )
    op.create_table(
        "flushes",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("flushed_us", sa.BigInteger(), nullable=False),
        sa.Column("position", sa.BigInteger(), nullable=False),
        sa.Column("n_runs", sa.BigInteger(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("row"),
    )
    op.create_table(
        "looks",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("looked_us", sa.BigInteger(), nullable=False),
        sa.Column("command", sa.Text(), nullable=False),
        sa.Column("n_runs", sa.BigInteger(), nullable=False),
        sa.Column("body", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("row"),
    )
    op.create_table(
        "plans",
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("hash", sa.Text(), nullable=False),
        sa.Column("text", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=True),
        sa.Column("taken_us", sa.BigInteger(), nullable=False),
        sa.Column("from_position", sa.BigInteger(), nullable=False),
        sa.PrimaryKeyConstraint("version"),
    )
    op.create_table(
        "refusals",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("path", sa.Text(), nullable=False),
        sa.Column("offset", sa.BigInteger(), nullable=False),
        sa.Column("number", sa.BigInteger(), nullable=False),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("run_id", sa.Text(), nullable=True),
        sa.Column("refused_us", sa.BigInteger(), nullable=False),
        sa.Column("taken_up", sa.Boolean(), server_default="0", nullable=False),
        sa.PrimaryKeyConstraint("row"),
        sa.UniqueConstraint("path", "offset", "kind", "reason"),
    )
    op.create_index(
        "refusals_new",
        "refusals",
        ["row"],
        unique=False,
        sqlite_where=sa.text("taken_up = 0"),
        postgresql_where=sa.text("NOT taken_up"),
    )
    op.create_table(
        "sources",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("machine", sa.Text(), server_default="", nullable=False),
        sa.Column("path", sa.Text(), nullable=False),
        sa.Column("device", sa.BigInteger(), nullable=False),
        sa.Column("inode", sa.BigInteger(), nullable=False),
        sa.Column("size", sa.BigInteger(), nullable=False),
        sa.Column("mtime_ns", sa.BigInteger(), nullable=False),
        sa.Column("offset", sa.BigInteger(), nullable=False),
        sa.Column("n_records", sa.BigInteger(), nullable=False),
        sa.Column("n_head", sa.BigInteger(), nullable=False),
        sa.Column("head", sa.LargeBinary(), nullable=False),
        sa.Column("tail", sa.LargeBinary(), nullable=False),
        sa.Column("context", sa.LargeBinary(), nullable=False),
        sa.Column("state", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("row"),
        sa.UniqueConstraint("machine", "path"),
    )
    op.create_table(
        "answers",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("caution", sa.Integer(), nullable=False),
        sa.Column("answered_us", sa.BigInteger(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("action", sa.Text(), nullable=False),
        sa.Column("scope", sa.Text(), nullable=False),
        sa.Column("from_position", sa.BigInteger(), nullable=True),
        sa.ForeignKeyConstraint(
            ["caution"],
            ["cautions.number"],
        ),
        sa.PrimaryKeyConstraint("row"),
    )
    op.create_table(
        "outbox",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("alert_id", sa.Text(), nullable=False),
        sa.Column("caution", sa.Integer(), nullable=False),
        sa.Column("target", sa.Text(), nullable=False),
        sa.Column("body", sa.Text(), nullable=False),
        sa.Column("created_us", sa.BigInteger(), nullable=False),
        sa.Column("due_us", sa.BigInteger(), nullable=False),
        sa.Column("n_tries", sa.Integer(), server_default="0", nullable=False),
        sa.Column("state", sa.Text(), server_default="due", nullable=False),
        sa.Column("delivered_us", sa.BigInteger(), nullable=True),
        sa.Column("error", sa.Text(), nullable=True),
        sa.ForeignKeyConstraint(
            ["caution"],
            ["cautions.number"],
        ),
        sa.PrimaryKeyConstraint("row"),
        sa.UniqueConstraint("alert_id"),
    )
    op.create_index(
        "outbox_due",
        "outbox",
        ["due_us"],
        unique=False,
        sqlite_where=sa.text("state = 'due'"),
        postgresql_where=sa.text("state = 'due'"),
    )
    op.create_table(
        "runs",
        sa.Column(
            "row", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False
        ),
        sa.Column("id", sa.Text(), nullable=False),
        sa.Column("arrival", sa.BigInteger(), nullable=True),
        sa.Column("position", sa.BigInteger(), nullable=True),
        sa.Column("late", sa.Boolean(), server_default="0", nullable=False),
        sa.Column("ordered", sa.Boolean(), server_default="1", nullable=False),
        sa.Column("path", sa.Text(), nullable=False),
        sa.Column("offset", sa.BigInteger(), nullable=False),
        sa.Column("number", sa.BigInteger(), nullable=False),
        sa.Column("config", sa.BigInteger(), nullable=False),
        sa.Column("sequence", sa.BigInteger(), nullable=True),
        sa.Column("started_us", sa.BigInteger(), nullable=True),
        sa.Column("finished_us", sa.BigInteger(), nullable=True),
        sa.Column("landed_us", sa.BigInteger(), nullable=False),
        sa.Column("seed", sa.Text(), nullable=True),
        sa.Column("parent", sa.Text(), nullable=True),
        sa.Column("status", sa.Text(), nullable=True),
        sa.Column("stage", sa.Text(), nullable=True),
        sa.Column("completed", sa.Boolean(), nullable=False),
        sa.Column("responses", sa.Text(), nullable=False),
        sa.Column("metadata", sa.Text(), nullable=False),
        sa.Column("digest", sa.LargeBinary(), nullable=False),
        sa.ForeignKeyConstraint(
            ["config"],
            ["configs.row"],
        ),
        sa.PrimaryKeyConstraint("row"),
        sa.UniqueConstraint("arrival"),
        sa.UniqueConstraint("id"),
        sa.UniqueConstraint("position"),
    )
    op.create_index(
        "runs_waiting",
        "runs",
        ["row"],
        unique=False,
        sqlite_where=sa.text("position IS NULL"),
        postgresql_where=sa.text("position IS NULL"),
    )
    if op.get_bind().dialect.name == "sqlite":
        op.execute(VIEW.format(each="json_each", call="json_each(runs.responses)"))
    else:
        op.execute(VIEW.format(each="v", call="json_each_text(runs.responses::json) AS v"))
