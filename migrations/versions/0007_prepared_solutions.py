"""Solutions prepared from standard lots, their second check, and the runs that used them."""

import sqlalchemy as sa
from alembic import op

from calib.store.triggers import create_triggers

revision = "0007"
down_revision = "0006"
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.add_column("standard_lot", sa.Column("degrees_of_freedom", sa.Double(), nullable=True))
    op.create_table(
        "preparation",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("lot_id", sa.Integer(), nullable=False),
        sa.Column("parent_id", sa.Integer(), nullable=True),
        sa.Column("taken", sa.Double(), nullable=False),
        sa.Column("taken_u", sa.Double(), nullable=False),
        sa.Column("made_up_to", sa.Double(), nullable=False),
        sa.Column("made_up_to_u", sa.Double(), nullable=False),
        sa.Column("unit", sa.String(), nullable=False),
        sa.Column("prepared_on", sa.Date(), nullable=False),
        sa.Column("prepared_by", sa.String(), nullable=False),
        sa.Column("expiry", sa.Date(), nullable=True),
        sa.Column("added_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("added_by", sa.String(), nullable=False),
        sa.CheckConstraint(
            "\"unit\" IN ('uL', 'mL', 'L', 'mg', 'g', 'kg')", name=op.f("ck_preparation_unit")
        ),
        sa.CheckConstraint('"taken" > 0 AND "taken" <= "made_up_to"', name=op.f("ck_preparation_taken")),
        sa.CheckConstraint('"taken_u" >= 0 AND "made_up_to_u" >= 0', name=op.f("ck_preparation_u")),
        _refers_to("preparation", "lot_id", "standard_lot"),
        _refers_to("preparation", "parent_id", "preparation"),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_preparation")),
        sa.UniqueConstraint("name", name=op.f("uq_preparation_name")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_preparation_lot_id"), "preparation", ["lot_id"], unique=False)
    op.create_index(op.f("ix_preparation_parent_id"), "preparation", ["parent_id"], unique=False)
    op.create_table(
        "preparation_check",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("preparation_id", sa.Integer(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        _refers_to("preparation_check", "preparation_id", "preparation"),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_preparation_check")),
        sa.UniqueConstraint("preparation_id", name=op.f("uq_preparation_check_preparation_id")),
        sqlite_autoincrement=True,
    )
    op.create_table(
        "run_solution",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("facts_id", sa.Integer(), nullable=False),
        sa.Column("preparation_id", sa.Integer(), nullable=False),
        _refers_to("run_solution", "facts_id", "run_facts"),
        _refers_to("run_solution", "preparation_id", "preparation"),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_run_solution")),
        sa.UniqueConstraint("facts_id", name=op.f("uq_run_solution_facts_id")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_run_solution_preparation_id"), "run_solution", ["preparation_id"], unique=False)
    create_triggers(op.get_bind(), ("preparation", "preparation_check", "run_solution"))


def downgrade() -> None:
    op.drop_table("run_solution")
    op.drop_table("preparation_check")
    op.drop_table("preparation")
    op.drop_column("standard_lot", "degrees_of_freedom")


def _refers_to(table: str, column: str, parent: str) -> sa.ForeignKeyConstraint:
    return sa.ForeignKeyConstraint(
        [column], [f"{parent}.id"], name=op.f(f"fk_{table}_{column}"), ondelete="RESTRICT"
    )
