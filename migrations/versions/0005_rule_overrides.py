"""Keep the decisions to log a run against a rule."""

import sqlalchemy as sa
from alembic import op

from calib.store.triggers import create_triggers

revision = "0005"
down_revision = "0004"
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.create_table(
        "rule_override",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("what", sa.String(), nullable=False),
        sa.Column("reason", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.ForeignKeyConstraint(
            ["run_id"], ["run.id"], name=op.f("fk_rule_override_run_id"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_rule_override")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_rule_override_run_id"), "rule_override", ["run_id"], unique=False)
    create_triggers(op.get_bind(), ("rule_override",))


def downgrade() -> None:
    op.drop_table("rule_override")
