"""People and settings, reviews, issued reports; one version of each record in force."""

import sqlalchemy as sa
from alembic import op

from calib.store.triggers import create_triggers

revision = "0008"
down_revision = "0007"
branch_labels = None
depends_on = None

NEW_TABLES = ("person", "setting", "review", "issued_report")
VERSIONED_BEFORE = ("run_facts", "reading", "exclusion", "curve", "quantity")


def upgrade() -> None:
    for create in (_person, _setting, _review, _issued_report):
        create()
    op.create_index(op.f("ix_reading_run_id_ordinal"), "reading", ["run_id", "ordinal"], unique=False)
    op.drop_index(op.f("ix_reading_run_id"), "reading")
    create_triggers(op.get_bind(), (*NEW_TABLES, *VERSIONED_BEFORE))


def downgrade() -> None:
    op.create_index(op.f("ix_reading_run_id"), "reading", ["run_id"], unique=False)
    op.drop_index(op.f("ix_reading_run_id_ordinal"), "reading")
    for table in reversed(NEW_TABLES):
        op.drop_table(table)


def _refers_to(table: str, column: str, parent: str) -> sa.ForeignKeyConstraint:
    return sa.ForeignKeyConstraint(
        [column], [f"{parent}.id"], name=op.f(f"fk_{table}_{column}"), ondelete="RESTRICT"
    )


def _superseding(table: str) -> tuple[sa.Constraint, ...]:
    return (
        _refers_to(table, "supersedes", table),
        sa.PrimaryKeyConstraint("id", name=op.f(f"pk_{table}")),
        sa.UniqueConstraint("supersedes", name=op.f(f"uq_{table}_supersedes")),
    )


def _person() -> None:
    op.create_table(
        "person",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("analyst", sa.Boolean(), nullable=False),
        sa.Column("reviewer", sa.Boolean(), nullable=False),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.Column("reason", sa.String(), nullable=True),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint('"supersedes" IS NULL OR "reason" IS NOT NULL', name=op.f("ck_person_reason")),
        *_superseding("person"),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_person_name"), "person", ["name"], unique=False)


def _setting() -> None:
    op.create_table(
        "setting",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("value", sa.String(), nullable=False),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.Column("reason", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint("\"name\" IN ('own-work', 'late-after')", name=op.f("ck_setting_name")),
        *_superseding("setting"),
        sqlite_autoincrement=True,
    )


def _review() -> None:
    op.create_table(
        "review",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("decision", sa.String(), nullable=False),
        sa.Column("facts_id", sa.Integer(), nullable=False),
        sa.Column("curve_id", sa.Integer(), nullable=False),
        sa.Column("last_quantity_id", sa.Integer(), nullable=True),
        sa.Column("exceptions", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("own_work", sa.Boolean(), nullable=False),
        sa.Column("comment", sa.String(), nullable=True),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint("\"decision\" IN ('approved', 'returned')", name=op.f("ck_review_decision")),
        sa.CheckConstraint(
            '"decision" = \'approved\' OR "comment" IS NOT NULL', name=op.f("ck_review_comment")
        ),
        _refers_to("review", "run_id", "run"),
        _refers_to("review", "facts_id", "run_facts"),
        _refers_to("review", "curve_id", "curve"),
        _refers_to("review", "last_quantity_id", "quantity"),
        *_superseding("review"),
        sqlite_autoincrement=True,
    )
    for column in ("run_id", "facts_id", "curve_id"):
        op.create_index(op.f(f"ix_review_{column}"), "review", [column], unique=False)


def _issued_report() -> None:
    op.create_table(
        "issued_report",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("review_id", sa.Integer(), nullable=False),
        sa.Column("format", sa.String(), nullable=False),
        sa.Column("fingerprint", sa.String(), nullable=False),
        sa.Column("size", sa.Integer(), nullable=False),
        sa.Column("chain_sequence", sa.Integer(), nullable=False),
        sa.Column("chain_head", sa.String(), nullable=False),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.Column("reason", sa.String(), nullable=True),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("offset_minutes", sa.Integer(), nullable=False),
        sa.CheckConstraint("\"format\" IN ('html', 'json', 'csv')", name=op.f("ck_issued_report_format")),
        sa.CheckConstraint(
            '"supersedes" IS NULL OR "reason" IS NOT NULL', name=op.f("ck_issued_report_reason")
        ),
        _refers_to("issued_report", "run_id", "run"),
        _refers_to("issued_report", "review_id", "review"),
        *_superseding("issued_report"),
        sqlite_autoincrement=True,
    )
    for column in ("run_id", "review_id", "fingerprint"):
        op.create_index(op.f(f"ix_issued_report_{column}"), "issued_report", [column], unique=False)
