"""What a combined uncertainty rests on, beside reading and curve."""

import sqlalchemy as sa
from alembic import op

from calib.store.triggers import create_triggers

revision = "0010"
down_revision = "0009"
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.create_table(
        "uncertainty_basis",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("components", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("left_out", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("runs", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.ForeignKeyConstraint(
            ["run_id"], ["run.id"], name=op.f("fk_uncertainty_basis_run_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(
            ["supersedes"],
            ["uncertainty_basis.id"],
            name=op.f("fk_uncertainty_basis_supersedes"),
            ondelete="RESTRICT",
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_uncertainty_basis")),
        sa.UniqueConstraint("supersedes", name=op.f("uq_uncertainty_basis_supersedes")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_uncertainty_basis_run_id"), "uncertainty_basis", ["run_id"], unique=False)
    create_triggers(op.get_bind(), ("uncertainty_basis",))


def downgrade() -> None:
    op.drop_table("uncertainty_basis")
