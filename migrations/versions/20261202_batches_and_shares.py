"""Batches, owners, fair shares, workers, and results that answer identical requests."""

import zlib
from collections.abc import Callable
from typing import Any

import sqlalchemy as sa
from alembic import op

revision = "20261202_batches_and_shares"
down_revision = "20261201_designs_and_jobs"
branch_labels = None
depends_on = None

_MOMENT = sa.DateTime(timezone=True)
_CLAIMABLE = "state = 'queued' AND waits_for IS NULL"

#: Places in the queue told from 1 on, in the order they had as moments.
_RENUMBER = """
UPDATE jobs SET position = (
    SELECT numbered.place FROM (
        SELECT design_id, ROW_NUMBER() OVER (
            PARTITION BY priority ORDER BY position, design_id
        ) AS place FROM jobs
    ) AS numbered WHERE numbered.design_id = jobs.design_id
)
"""
_SHARES = """
INSERT INTO shares (owner, priority, served, at, singles_at)
SELECT 'local', priority, 0, 0, MAX(position) FROM jobs GROUP BY priority
"""

#: What is packed from here on: tables, each with the key of its rows.
_PACKED = {"results": ("design_id",), "reports": ("design_id", "rank")}

# Backwards: what another design's result answers gets a copy of it, and of one key that two
# owners use only the first design keeps it.
_COPY_RESULTS = """
INSERT INTO results
    (design_id, content_hash, engine_version, map_error_percent, result, created_at)
SELECT designs.id, results.content_hash, results.engine_version, results.map_error_percent,
    results.result, results.created_at
FROM designs JOIN results ON results.design_id = designs.answered_by
"""
_COPY_REPORTS = """
INSERT INTO reports (design_id, rank, report)
SELECT designs.id, reports.rank, reports.report
FROM designs JOIN reports ON reports.design_id = designs.answered_by
"""
_FORGET_KEYS = """
UPDATE designs SET idempotency_key = NULL WHERE EXISTS (
    SELECT 1 FROM designs AS earlier
    WHERE earlier.idempotency_key = designs.idempotency_key
    AND (earlier.created_at < designs.created_at
        OR (earlier.created_at = designs.created_at AND earlier.id < designs.id))
)
"""


def upgrade() -> None:
    """Add them; what is stored already belongs to the owner 'local'."""
    _make_tables()
    _widen_designs()
    _widen_jobs()
    _widen_results()
    for name, keys in _PACKED.items():
        _convert(name, keys, sa.LargeBinary(), lambda text: zlib.compress(text.encode(), 1))


def downgrade() -> None:
    """Take them away; designs stay, without their batches."""
    for name, keys in _PACKED.items():
        _convert(name, keys, sa.Text(), lambda packed: zlib.decompress(packed).decode())
    for statement in (_COPY_RESULTS, _COPY_REPORTS, _FORGET_KEYS):
        op.execute(statement)
    with op.batch_alter_table("results") as table:
        table.drop_index("ix_results_content_hash_engine_version_created_at")
        table.drop_column("map_error_percent")
        table.drop_column("content_hash")
    for name in ("claimable", "longest_waiting", "waits_for", "leases"):
        op.drop_index(f"ix_jobs_{name}", "jobs")
    with op.batch_alter_table("jobs") as table:
        for name in ("batch_id_state", "changed_at", "owner_changed_at"):
            table.drop_index(f"ix_jobs_{name}")
        for name in ("changed_at", "queued_at", "waits_for", "batch_id", "owner"):
            table.drop_column(name)
        table.create_index("ix_jobs_state_priority_position", ["state", "priority", "position"])
        table.create_index("ix_jobs_state_lease_until", ["state", "lease_until"])
    with op.batch_alter_table("designs") as table:
        table.drop_index("ix_designs_owner_created_at_id")
        table.drop_index("ix_designs_batch_id_batch_line")
        table.drop_constraint("uq_designs_owner_idempotency_key", type_="unique")
        table.drop_constraint("fk_designs_answered_by", type_="foreignkey")
        table.drop_constraint("fk_designs_batch_id", type_="foreignkey")
        table.create_unique_constraint("uq_designs_idempotency_key", ["idempotency_key"])
        for name in ("recompute", "answered_by", "batch_line", "batch_id", "owner"):
            table.drop_column(name)
    for name in ("tallies", "workers", "shares", "batches"):
        op.drop_table(name)


def _make_tables() -> None:
    op.create_table(
        "batches",
        sa.Column("id", sa.String(32), nullable=False),
        sa.Column("owner", sa.String(60), nullable=False),
        sa.Column("name", sa.String(120), nullable=False),
        sa.Column("priority", sa.Integer(), nullable=False),
        sa.Column("size", sa.Integer(), nullable=False),
        sa.Column("content_hash", sa.String(64), nullable=False),
        sa.Column("idempotency_key", sa.String(200), nullable=True),
        sa.Column("recompute", sa.Boolean(), nullable=False),
        sa.Column("created_at", _MOMENT, nullable=False),
        sa.PrimaryKeyConstraint("id", name="pk_batches"),
        sa.UniqueConstraint("owner", "idempotency_key", name="uq_batches_owner_idempotency_key"),
    )
    op.create_index("ix_batches_owner_created_at_id", "batches", ["owner", "created_at", "id"])
    op.create_table(
        "shares",
        sa.Column("owner", sa.String(60), nullable=False),
        sa.Column("priority", sa.Integer(), nullable=False),
        sa.Column("served", sa.BigInteger(), nullable=False),
        sa.Column("at", sa.BigInteger(), nullable=False),
        sa.Column("singles_at", sa.BigInteger(), nullable=False),
        sa.PrimaryKeyConstraint("owner", "priority", name="pk_shares"),
    )
    op.create_table(
        "workers",
        sa.Column("name", sa.String(120), nullable=False),
        sa.Column("host", sa.String(120), nullable=False),
        sa.Column("pid", sa.Integer(), nullable=False),
        sa.Column("carrier", sa.String(20), nullable=False),
        sa.Column("engine_version", sa.String(40), nullable=False),
        sa.Column("started_at", _MOMENT, nullable=False),
        sa.Column("seen_at", _MOMENT, nullable=False),
        sa.Column("last_claim_at", _MOMENT, nullable=True),
        sa.Column("ended_at", _MOMENT, nullable=True),
        sa.PrimaryKeyConstraint("name", name="pk_workers"),
    )
    op.create_table(
        "tallies",
        sa.Column("name", sa.String(40), nullable=False),
        sa.Column("count", sa.BigInteger(), nullable=False),
        sa.PrimaryKeyConstraint("name", name="pk_tallies"),
    )


def _widen_designs() -> None:
    with op.batch_alter_table("designs") as table:
        # The default is for what is stored already, and taken away again below.
        table.add_column(sa.Column("owner", sa.String(60), nullable=False, server_default="local"))
        table.add_column(sa.Column("batch_id", sa.String(32), nullable=True))
        table.add_column(sa.Column("batch_line", sa.Integer(), nullable=True))
        table.add_column(sa.Column("answered_by", sa.String(32), nullable=True))
        table.add_column(
            sa.Column("recompute", sa.Boolean(), nullable=False, server_default=sa.false())
        )
        table.drop_constraint("uq_designs_idempotency_key", type_="unique")
    with op.batch_alter_table("designs") as table:
        table.alter_column("owner", server_default=None)
        table.alter_column("recompute", server_default=None)
        table.create_unique_constraint(
            "uq_designs_owner_idempotency_key", ["owner", "idempotency_key"]
        )
        table.create_foreign_key("fk_designs_batch_id", "batches", ["batch_id"], ["id"])
        table.create_foreign_key("fk_designs_answered_by", "designs", ["answered_by"], ["id"])
        table.create_index("ix_designs_owner_created_at_id", ["owner", "created_at", "id"])
        table.create_index("ix_designs_batch_id_batch_line", ["batch_id", "batch_line"])


def _widen_jobs() -> None:
    with op.batch_alter_table("jobs") as table:
        table.drop_index("ix_jobs_state_priority_position")
        table.drop_index("ix_jobs_state_lease_until")
        table.add_column(sa.Column("owner", sa.String(60), nullable=False, server_default="local"))
        table.add_column(sa.Column("batch_id", sa.String(32), nullable=True))
        table.add_column(sa.Column("waits_for", sa.String(32), nullable=True))
        table.add_column(sa.Column("queued_at", _MOMENT, nullable=True))
        table.add_column(
            sa.Column("changed_at", sa.BigInteger(), nullable=False, server_default="0")
        )
    op.execute(
        "UPDATE jobs SET queued_at = (SELECT created_at FROM designs WHERE id = jobs.design_id)"
    )
    op.execute(_RENUMBER)
    op.execute(_SHARES)
    with op.batch_alter_table("jobs") as table:
        table.alter_column("owner", server_default=None)
        table.alter_column("changed_at", server_default=None)
        table.alter_column("queued_at", existing_type=_MOMENT, nullable=False)
        table.create_index("ix_jobs_batch_id_state", ["batch_id", "state"])
        table.create_index("ix_jobs_changed_at", ["changed_at"])
        table.create_index("ix_jobs_owner_changed_at", ["owner", "changed_at"])
    _partial("ix_jobs_claimable", ["owner", "priority", "position", "design_id"], _CLAIMABLE)
    _partial("ix_jobs_longest_waiting", ["queued_at", "position", "design_id"], _CLAIMABLE)
    _partial("ix_jobs_waits_for", ["waits_for"], "waits_for IS NOT NULL")
    _partial("ix_jobs_leases", ["lease_until"], "state = 'running'")


def _widen_results() -> None:
    with op.batch_alter_table("results") as table:
        table.add_column(sa.Column("content_hash", sa.String(64), nullable=True))
        table.add_column(
            sa.Column("map_error_percent", sa.Float(), nullable=False, server_default="0")
        )
    op.execute(
        "UPDATE results SET content_hash = "
        "(SELECT content_hash FROM designs WHERE id = results.design_id)"
    )
    with op.batch_alter_table("results") as table:
        table.alter_column("content_hash", existing_type=sa.String(64), nullable=False)
        table.alter_column("map_error_percent", server_default=None)
        table.create_index(
            "ix_results_content_hash_engine_version_created_at",
            ["content_hash", "engine_version", "created_at"],
        )


def _partial(name: str, columns: list[str], where: str) -> None:
    op.create_index(
        name, "jobs", columns, sqlite_where=sa.text(where), postgresql_where=sa.text(where)
    )


def _convert(
    name: str, keys: tuple[str, ...], kind: sa.types.TypeEngine[Any], convert: Callable[[Any], Any]
) -> None:
    """Give the column of a table that is called like one of its rows another kind."""
    column = name.removesuffix("s")
    with op.batch_alter_table(name) as table:
        table.alter_column(column, new_column_name="earlier")
    with op.batch_alter_table(name) as table:
        table.add_column(sa.Column(column, kind, nullable=True))
    connection = op.get_bind()
    rows = sa.table(name, sa.column(column, kind), sa.column("earlier"), *map(sa.column, keys))
    columns = [rows.c[key] for key in keys]
    # Row by row, for a database of results does not fit into memory.
    for key in connection.execute(sa.select(*columns)).all():
        mine = [each == value for each, value in zip(columns, key, strict=True)]
        earlier = connection.scalar(sa.select(rows.c.earlier).where(*mine))
        connection.execute(sa.update(rows).where(*mine).values({column: convert(earlier)}))
    with op.batch_alter_table(name) as table:
        table.drop_column("earlier")
        table.alter_column(column, existing_type=kind, nullable=False)
