"""Corrective actions with the results they affect, and verifications of the installation."""

import sqlalchemy as sa
from alembic import op

from calib.store.triggers import create_triggers

revision = "0009"
down_revision = "0008"
branch_labels = None
depends_on = None

TABLES = ("action", "action_result", "action_closure", "verification")


def upgrade() -> None:
    for create in (_action, _action_result, _action_closure, _verification):
        create()
    create_triggers(op.get_bind(), TABLES)


def downgrade() -> None:
    for table in reversed(TABLES):
        op.drop_table(table)


def _refers_to(table: str, column: str, parent: str) -> sa.ForeignKeyConstraint:
    return sa.ForeignKeyConstraint(
        [column], [f"{parent}.id"], name=op.f(f"fk_{table}_{column}"), ondelete="RESTRICT"
    )


def _action() -> None:
    op.create_table(
        "action",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("what", sa.String(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("since", sa.DateTime(timezone=True), nullable=True),
        sa.Column("until", sa.DateTime(timezone=True), nullable=True),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_action")),
        sqlite_autoincrement=True,
    )


def _action_result() -> None:
    op.create_table(
        "action_result",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("action_id", sa.Integer(), nullable=False),
        sa.Column("quantity_id", sa.Integer(), nullable=False),
        _refers_to("action_result", "action_id", "action"),
        _refers_to("action_result", "quantity_id", "quantity"),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_action_result")),
        sa.UniqueConstraint("action_id", "quantity_id", name=op.f("uq_action_result_action_id_quantity_id")),
        sqlite_autoincrement=True,
    )
    for column in ("action_id", "quantity_id"):
        op.create_index(op.f(f"ix_action_result_{column}"), "action_result", [column], unique=False)


def _action_closure() -> None:
    op.create_table(
        "action_closure",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("action_id", sa.Integer(), nullable=False),
        sa.Column("correction", sa.String(), nullable=False),
        sa.Column("effect", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        _refers_to("action_closure", "action_id", "action"),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_action_closure")),
        sa.UniqueConstraint("action_id", name=op.f("uq_action_closure_action_id")),
        sqlite_autoincrement=True,
    )


def _verification() -> None:
    op.create_table(
        "verification",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("passed", sa.Boolean(), nullable=False),
        sa.Column("values", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("versions", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("platform", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("offset_minutes", sa.Integer(), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_verification")),
        sqlite_autoincrement=True,
    )
