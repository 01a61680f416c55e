"""Designs, the queue of record, results and reports."""

import sqlalchemy as sa
from alembic import op

revision = "20261201_designs_and_jobs"
down_revision = None
branch_labels = None
depends_on = None

_MOMENT = sa.DateTime(timezone=True)


def upgrade() -> None:
    """Make the first tables."""
    op.create_table(
        "designs",
        sa.Column("id", sa.String(32), nullable=False),
        sa.Column("name", sa.String(120), nullable=False),
        sa.Column("request", sa.Text(), nullable=False),
        sa.Column("content_hash", sa.String(64), nullable=False),
        sa.Column("idempotency_key", sa.String(200), nullable=True),
        sa.Column("created_at", _MOMENT, nullable=False),
        sa.PrimaryKeyConstraint("id", name="pk_designs"),
        sa.UniqueConstraint("idempotency_key", name="uq_designs_idempotency_key"),
    )
    op.create_index("ix_designs_created_at_id", "designs", ["created_at", "id"])
    op.create_index("ix_designs_content_hash", "designs", ["content_hash"])
    op.create_table(
        "jobs",
        sa.Column("design_id", sa.String(32), nullable=False),
        sa.Column("state", sa.String(10), nullable=False),
        sa.Column("priority", sa.Integer(), nullable=False),
        sa.Column("position", sa.BigInteger(), nullable=False),
        sa.Column("attempts", sa.Integer(), nullable=False),
        sa.Column("fence", sa.Integer(), nullable=False),
        sa.Column("worker", sa.String(120), nullable=True),
        sa.Column("lease_until", _MOMENT, nullable=True),
        sa.Column("cancel_wanted", sa.Boolean(), nullable=False),
        sa.Column("progress", sa.Float(), nullable=False),
        sa.Column("step", sa.String(200), nullable=False),
        sa.Column("failure", sa.String(500), nullable=True),
        sa.Column("started_at", _MOMENT, nullable=True),
        sa.Column("finished_at", _MOMENT, nullable=True),
        sa.CheckConstraint(
            "state IN ('queued', 'running', 'done', 'failed', 'cancelled')", name="ck_jobs_state"
        ),
        sa.ForeignKeyConstraint(["design_id"], ["designs.id"], name="fk_jobs_design_id"),
        sa.PrimaryKeyConstraint("design_id", name="pk_jobs"),
    )
    op.create_index("ix_jobs_state_priority_position", "jobs", ["state", "priority", "position"])
    op.create_index("ix_jobs_state_lease_until", "jobs", ["state", "lease_until"])
    op.create_table(
        "results",
        sa.Column("design_id", sa.String(32), nullable=False),
        sa.Column("engine_version", sa.String(40), nullable=False),
        sa.Column("result", sa.Text(), nullable=False),
        sa.Column("created_at", _MOMENT, nullable=False),
        sa.ForeignKeyConstraint(["design_id"], ["designs.id"], name="fk_results_design_id"),
        sa.PrimaryKeyConstraint("design_id", name="pk_results"),
    )
    op.create_table(
        "reports",
        sa.Column("design_id", sa.String(32), nullable=False),
        sa.Column("rank", sa.Integer(), nullable=False),
        sa.Column("report", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(["design_id"], ["designs.id"], name="fk_reports_design_id"),
        sa.PrimaryKeyConstraint("design_id", "rank", name="pk_reports"),
    )


def downgrade() -> None:
    """Take the first tables away."""
    for name in ("reports", "results", "jobs", "designs"):
        op.drop_table(name)
