"""The tables of the store, and the revision of the schema that this release reads and writes.

Times are integers, microseconds since 1970-01-01T00:00Z. Documents are JSON texts, so that a user with
`sqlite3` in hand can read them. `runs.row` is the order of insertion, `runs.arrival` the order in which the
auditor took runs up, `runs.position` the place in the audit order, given once.
"""

from __future__ import annotations

from sqlalchemy import (
    BigInteger,
    Boolean,
    Column,
    Float,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    Table,
    Text,
    UniqueConstraint,
)

REVISION = "0001"
"""Head of the migrations; a store of another revision is migrated or refused."""

metadata = MetaData()
_Row = BigInteger().with_variant(Integer, "sqlite")

plans = Table(
    "plans",
    metadata,
    Column("version", Integer, primary_key=True),
    Column("hash", Text, nullable=False),
    Column("text", Text, nullable=False),
    Column("reason", Text),
    Column("taken_us", BigInteger, nullable=False),
    Column("from_position", BigInteger, nullable=False),
)

epochs = Table(
    "epochs",
    metadata,
    Column("epoch", Integer, primary_key=True),
    Column("opened_us", BigInteger, nullable=False),
    Column("from_position", BigInteger, nullable=False),
    Column("plan_version", Integer, nullable=False),
    Column("key", LargeBinary, nullable=False),
    Column("reason", Text, nullable=False),
    Column("scope", Text, nullable=False),
)

sources = Table(
    "sources",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("machine", Text, nullable=False, server_default=""),
    Column("path", Text, nullable=False),
    Column("device", BigInteger, nullable=False),
    Column("inode", BigInteger, nullable=False),
    Column("size", BigInteger, nullable=False),
    Column("mtime_ns", BigInteger, nullable=False),
    Column("offset", BigInteger, nullable=False),
    Column("n_records", BigInteger, nullable=False),
    Column("n_head", BigInteger, nullable=False),
    Column("head", LargeBinary, nullable=False),
    Column("tail", LargeBinary, nullable=False),
    Column("context", LargeBinary, nullable=False),
    Column("state", Text, nullable=False),
    UniqueConstraint("machine", "path"),
)

configs = Table(
    "configs",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("hash", LargeBinary, nullable=False, unique=True),
    Column("cell", Text, nullable=False),
    Column("nuisance", Text, nullable=False),
)

runs = Table(
    "runs",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("id", Text, nullable=False, unique=True),
    Column("arrival", BigInteger, unique=True),
    Column("position", BigInteger, unique=True),
    Column("late", Boolean, nullable=False, default=False, server_default="0"),
    Column("ordered", Boolean, nullable=False, default=True, server_default="1"),
    Column("path", Text, nullable=False),
    Column("offset", BigInteger, nullable=False),
    Column("number", BigInteger, nullable=False),
    Column("config", BigInteger, ForeignKey("configs.row"), nullable=False),
    Column("sequence", BigInteger),
    Column("started_us", BigInteger),
    Column("finished_us", BigInteger),
    Column("landed_us", BigInteger, nullable=False),
    Column("seed", Text),
    Column("parent", Text),
    Column("status", Text),
    Column("stage", Text),
    Column("completed", Boolean, nullable=False),
    Column("responses", Text, nullable=False),
    Column("metadata", Text, nullable=False),
    Column("digest", LargeBinary, nullable=False),
)

refusals = Table(
    "refusals",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("path", Text, nullable=False),
    Column("offset", BigInteger, nullable=False),
    Column("number", BigInteger, nullable=False),
    Column("kind", Text, nullable=False),
    Column("reason", Text, nullable=False),
    Column("run_id", Text),
    Column("refused_us", BigInteger, nullable=False),
    Column("taken_up", Boolean, nullable=False, default=False, server_default="0"),
    UniqueConstraint("path", "offset", "kind", "reason"),
)

flushes = Table(
    "flushes",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("flushed_us", BigInteger, nullable=False),
    Column("position", BigInteger, nullable=False),
    Column("n_runs", BigInteger, nullable=False),
    Column("reason", Text, nullable=False),
)

cautions = Table(
    "cautions",
    metadata,
    Column("number", Integer, primary_key=True, autoincrement=True),
    Column("key", Text, nullable=False, unique=True),
    Column("kind", Text, nullable=False),
    Column("along", Text),
    Column("level", Text),
    Column("response", Text),
    Column("run", Text),
    Column("position", BigInteger),
    Column("log_e", Float),
    Column("threshold", Float),
    Column("grade", Text, nullable=False),
    Column("state", Text, nullable=False),
    Column("evidence_loss", Float),
    Column("raised_us", BigInteger, nullable=False),
    Column("changed_us", BigInteger, nullable=False),
    Column("remedy", Text, nullable=False),
    Column("body", Text, nullable=False),
    Column("epoch", Integer, nullable=False),
)

answers = Table(
    "answers",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("caution", Integer, ForeignKey("cautions.number"), nullable=False),
    Column("answered_us", BigInteger, nullable=False),
    Column("reason", Text, nullable=False),
    Column("action", Text, nullable=False),
    Column("scope", Text, nullable=False),
    Column("from_position", BigInteger),
)

looks = Table(
    "looks",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("looked_us", BigInteger, nullable=False),
    Column("command", Text, nullable=False),
    Column("n_runs", BigInteger, nullable=False),
    Column("body", Text, nullable=False),
)

outbox = Table(
    "outbox",
    metadata,
    Column("row", _Row, primary_key=True, autoincrement=True),
    Column("alert_id", Text, nullable=False, unique=True),
    Column("caution", Integer, ForeignKey("cautions.number"), nullable=False),
    Column("target", Text, nullable=False),
    Column("body", Text, nullable=False),
    Column("created_us", BigInteger, nullable=False),
    Column("due_us", BigInteger, nullable=False),
    Column("n_tries", Integer, nullable=False, default=0, server_default="0"),
    Column("state", Text, nullable=False, default="due", server_default="due"),
    Column("delivered_us", BigInteger),
    Column("error", Text),
)

checkpoints = Table(
    "checkpoints",
    metadata,
    Column("name", Text, primary_key=True),
    Column("epoch", Integer, nullable=False),
    Column("position", BigInteger, nullable=False),
    Column("body", LargeBinary, nullable=False),
)

displays = Table(
    "displays",
    metadata,
    Column("name", Text, primary_key=True),
    Column("shown_us", BigInteger, nullable=False),
    Column("body", Text, nullable=False),
)

beats = Table(
    "beats",
    metadata,
    Column("role", Text, primary_key=True),
    Column("pid", BigInteger, nullable=False),
    Column("host", Text, nullable=False),
    Column("beat_us", BigInteger, nullable=False),
    Column("body", Text, nullable=False),
)

Index(
    "runs_waiting",
    runs.c.row,
    sqlite_where=runs.c.position.is_(None),
    postgresql_where=runs.c.position.is_(None),
)
Index(
    "outbox_due",
    outbox.c.due_us,
    sqlite_where=outbox.c.state == "due",
    postgresql_where=outbox.c.state == "due",
)
Index(
    "refusals_new", refusals.c.row, sqlite_where=~refusals.c.taken_up, postgresql_where=~refusals.c.taken_up
)
