"""Labels on designs, and designs put away."""

import sqlalchemy as sa
from alembic import op

revision = "20261203_labels_and_archive"
down_revision = "20261202_batches_and_shares"
branch_labels = None
depends_on = None


def upgrade() -> None:
    """Make the tables."""
    op.create_table(
        "labels",
        sa.Column("design_id", sa.String(32), nullable=False),
        sa.Column("label", sa.String(40), nullable=False),
        sa.ForeignKeyConstraint(["design_id"], ["designs.id"], name="fk_labels_design_id"),
        sa.PrimaryKeyConstraint("design_id", "label", name="pk_labels"),
    )
    op.create_index("ix_labels_label", "labels", ["label"])
    op.create_table(
        "archived",
        sa.Column("design_id", sa.String(32), nullable=False),
        sa.Column("archived_at", sa.DateTime(timezone=True), nullable=False),
        sa.ForeignKeyConstraint(["design_id"], ["designs.id"], name="fk_archived_design_id"),
        sa.PrimaryKeyConstraint("design_id", name="pk_archived"),
    )


def downgrade() -> None:
    """Take them away."""
    op.drop_table("archived")
    op.drop_table("labels")
