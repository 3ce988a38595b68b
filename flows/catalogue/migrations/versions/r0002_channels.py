"""The sums of the channels' contents."""

from __future__ import annotations

import sqlalchemy as sa
from alembic import op

revision = "r0002"
down_revision = "r0001"
branch_labels = None
depends_on = None


def upgrade() -> None:
    """Make the table; assessments made before have no rows in it."""
    op.create_table(
        "channels",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("position", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("run", sa.Text(), nullable=False),
        sa.Column("channel", sa.Text(), nullable=False),
        sa.Column("sha256", sa.String(length=64), nullable=False),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_channels_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", "position", name=op.f("pk_channels")),
    )


def downgrade() -> None:
    """Drop the table."""
    op.drop_table("channels")
