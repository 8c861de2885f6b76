"""The first tables: register, runs, curves, quantities and the record chain."""

import sqlalchemy as sa
from alembic import op

from calib.store.triggers import create_triggers

revision = "0001"
down_revision = None
branch_labels = None
depends_on = None

ROLES = "'blank', 'zero', 'standard', 'anchor', 'first-check', 'check', 'control', 'carry-over', 'unknown'"
TABLES = (
    "instrument",
    "method",
    "original",
    "record_chain",
    "standard_lot",
    "event",
    "run",
    "curve",
    "reading",
    "run_facts",
    "run_void",
    "curve_standard",
    "exclusion",
    "quantity",
    "verdict",
)


def upgrade() -> None:
    for create in (
        _instrument,
        _method,
        _original,
        _record_chain,
        _standard_lot,
        _event,
        _run,
        _curve,
        _reading,
        _run_facts,
        _run_void,
        _curve_standard,
        _exclusion,
        _quantity,
        _verdict,
    ):
        create()
    create_triggers(op.get_bind(), TABLES)


def downgrade() -> None:
    for table in reversed(TABLES):
        op.drop_table(table)


def _instrument() -> None:
    op.create_table(
        "instrument",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("serial", sa.String(), nullable=False),
        sa.Column("location", sa.String(), nullable=False),
        sa.Column("response_ceiling", sa.Double(), nullable=True),
        sa.Column("utc_offset_minutes", sa.Integer(), nullable=False),
        sa.Column("added_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("added_by", sa.String(), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_instrument")),
        sa.UniqueConstraint("name", name=op.f("uq_instrument_name")),
        sqlite_autoincrement=True,
    )


def _method() -> None:
    op.create_table(
        "method",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("definition", sa.Text(), nullable=False),
        sa.Column("fingerprint", sa.String(), nullable=False),
        sa.Column("added_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("added_by", sa.String(), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_method")),
        sa.UniqueConstraint("name", "version", name=op.f("uq_method_name_version")),
        sqlite_autoincrement=True,
    )


def _original() -> None:
    op.create_table(
        "original",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("fingerprint", sa.String(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("size", sa.Integer(), nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.Column("imported_at", sa.DateTime(timezone=True), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_original")),
        sa.UniqueConstraint("fingerprint", name=op.f("uq_original_fingerprint")),
        sqlite_autoincrement=True,
    )


def _record_chain() -> None:
    op.create_table(
        "record_chain",
        sa.Column("sequence", sa.Integer(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("offset_minutes", sa.Integer(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("action", sa.String(), nullable=False),
        sa.Column("reason", sa.String(), nullable=True),
        sa.Column("payload", sa.Text(), nullable=False),
        sa.Column("previous_hash", sa.String(), nullable=False),
        sa.Column("hash", sa.String(), nullable=False),
        sa.Column("clock_behind", sa.Boolean(), nullable=False),
        sa.PrimaryKeyConstraint("sequence", name=op.f("pk_record_chain")),
        sa.UniqueConstraint("hash", name=op.f("uq_record_chain_hash")),
        sqlite_autoincrement=True,
    )


def _standard_lot() -> None:
    op.create_table(
        "standard_lot",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("material", sa.String(), nullable=False),
        sa.Column("certified_value", sa.Double(), nullable=True),
        sa.Column("unit", sa.String(), nullable=True),
        sa.Column("expanded_uncertainty", sa.Double(), nullable=True),
        sa.Column("coverage_factor", sa.Double(), nullable=True),
        sa.Column("expiry", sa.Date(), nullable=True),
        sa.Column("supplier", sa.String(), nullable=True),
        sa.Column("certificate", sa.String(), nullable=True),
        sa.Column("traceability", sa.String(), nullable=True),
        sa.Column("added_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("added_by", sa.String(), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_standard_lot")),
        sa.UniqueConstraint("name", name=op.f("uq_standard_lot_name")),
        sqlite_autoincrement=True,
    )


def _event() -> None:
    op.create_table(
        "event",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("instrument_id", sa.Integer(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("offset_minutes", sa.Integer(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("what", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("recorded_at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint(
            "\"kind\" IN ('maintenance', 'part', 'move', 'software', 'lot', 'other')",
            name=op.f("ck_event_kind"),
        ),
        sa.ForeignKeyConstraint(
            ["instrument_id"], ["instrument.id"], name=op.f("fk_event_instrument_id"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_event")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_event_instrument_id"), "event", ["instrument_id"], unique=False)
    op.create_index(op.f("ix_event_instrument_id_at"), "event", ["instrument_id", "at"], unique=False)


def _run() -> None:
    op.create_table(
        "run",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("original_id", sa.Integer(), nullable=False),
        sa.Column("method_id", sa.Integer(), nullable=False),
        sa.Column("layout", sa.String(), nullable=False),
        sa.Column("reader_version", sa.String(), nullable=False),
        sa.Column("concentration_unit", sa.String(), nullable=False),
        sa.Column("response_unit", sa.String(), nullable=False),
        sa.Column("content_fingerprint", sa.String(), nullable=False),
        sa.Column("curve_id", sa.Integer(), nullable=True),
        sa.Column("logged_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("logged_by", sa.String(), nullable=False),
        sa.CheckConstraint("\"kind\" IN ('calibration', 'unknowns')", name=op.f("ck_run_kind")),
        sa.ForeignKeyConstraint(
            ["curve_id"], ["curve.id"], name=op.f("fk_run_curve_id"), ondelete="RESTRICT", use_alter=True
        ),
        sa.ForeignKeyConstraint(
            ["method_id"], ["method.id"], name=op.f("fk_run_method_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(
            ["original_id"], ["original.id"], name=op.f("fk_run_original_id"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_run")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_run_content_fingerprint"), "run", ["content_fingerprint"], unique=False)
    op.create_index(op.f("ix_run_curve_id"), "run", ["curve_id"], unique=False)
    op.create_index(op.f("ix_run_method_id"), "run", ["method_id"], unique=False)
    op.create_index(op.f("ix_run_original_id"), "run", ["original_id"], unique=False)


def _curve() -> None:
    op.create_table(
        "curve",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("model", sa.String(), nullable=False),
        sa.Column("fixed", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("bounds", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("noise", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("parameters", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("covariance", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("undetermined", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("residual_sum", sa.Double(), nullable=True),
        sa.Column("residual_sd", sa.Double(), nullable=True),
        sa.Column("degrees_of_freedom", sa.Double(), nullable=False),
        sa.Column("r_squared", sa.Double(), nullable=True),
        sa.Column("aicc", sa.Double(), nullable=True),
        sa.Column("converged", sa.Boolean(), nullable=False),
        sa.Column("findings", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("solver", sa.String(), nullable=False),
        sa.Column("versions", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("lowest", sa.Double(), nullable=True),
        sa.Column("highest", sa.Double(), nullable=True),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.Column("reason", sa.String(), nullable=True),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.ForeignKeyConstraint(["run_id"], ["run.id"], name=op.f("fk_curve_run_id"), ondelete="RESTRICT"),
        sa.ForeignKeyConstraint(
            ["supersedes"], ["curve.id"], name=op.f("fk_curve_supersedes"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_curve")),
        sa.UniqueConstraint("supersedes", name=op.f("uq_curve_supersedes")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_curve_run_id"), "curve", ["run_id"], unique=False)


def _reading() -> None:
    op.create_table(
        "reading",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("ordinal", sa.Integer(), nullable=False),
        sa.Column("sample", sa.String(), nullable=False),
        sa.Column("role", sa.String(), nullable=False),
        sa.Column("concentration", sa.Double(), nullable=True),
        sa.Column("response", sa.Double(), nullable=True),
        sa.Column("response_text", sa.String(), nullable=False),
        sa.Column("absent_cause", sa.String(), nullable=True),
        sa.Column("replicate", sa.Integer(), nullable=True),
        sa.Column("dilution", sa.Double(), nullable=False),
        sa.Column("position", sa.String(), nullable=True),
        sa.Column("at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("sheet", sa.String(), nullable=True),
        sa.Column("row", sa.Integer(), nullable=True),
        sa.Column("column", sa.String(), nullable=True),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.CheckConstraint(
            "\"absent_cause\" IN ('overflow', 'not detected', 'instrument error', 'empty')",
            name=op.f("ck_reading_absent_cause"),
        ),
        sa.CheckConstraint('"dilution" > 0', name=op.f("ck_reading_dilution")),
        sa.CheckConstraint(
            f'"role" IN ({ROLES})',
            name=op.f("ck_reading_role"),
        ),
        sa.CheckConstraint(
            '("response" IS NULL) <> ("absent_cause" IS NULL)', name=op.f("ck_reading_response_or_cause")
        ),
        sa.ForeignKeyConstraint(["run_id"], ["run.id"], name=op.f("fk_reading_run_id"), ondelete="RESTRICT"),
        sa.ForeignKeyConstraint(
            ["supersedes"], ["reading.id"], name=op.f("fk_reading_supersedes"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_reading")),
        sa.UniqueConstraint("supersedes", name=op.f("uq_reading_supersedes")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_reading_run_id"), "reading", ["run_id"], unique=False)
    op.create_index(op.f("ix_reading_sample"), "reading", ["sample"], unique=False)


def _run_facts() -> None:
    op.create_table(
        "run_facts",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("instrument_id", sa.Integer(), nullable=False),
        sa.Column("lot_id", sa.Integer(), nullable=True),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("offset_minutes", sa.Integer(), nullable=False),
        sa.Column("operator", sa.String(), nullable=False),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.Column("reason", sa.String(), nullable=True),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("recorded_at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint('"supersedes" IS NULL OR "reason" IS NOT NULL', name=op.f("ck_run_facts_reason")),
        sa.ForeignKeyConstraint(
            ["instrument_id"], ["instrument.id"], name=op.f("fk_run_facts_instrument_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(
            ["lot_id"], ["standard_lot.id"], name=op.f("fk_run_facts_lot_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(
            ["run_id"], ["run.id"], name=op.f("fk_run_facts_run_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(
            ["supersedes"], ["run_facts.id"], name=op.f("fk_run_facts_supersedes"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_run_facts")),
        sa.UniqueConstraint("supersedes", name=op.f("uq_run_facts_supersedes")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_run_facts_instrument_id"), "run_facts", ["instrument_id"], unique=False)
    op.create_index(op.f("ix_run_facts_instrument_id_at"), "run_facts", ["instrument_id", "at"], unique=False)
    op.create_index(op.f("ix_run_facts_lot_id"), "run_facts", ["lot_id"], unique=False)
    op.create_index(op.f("ix_run_facts_run_id"), "run_facts", ["run_id"], unique=False)


def _run_void() -> None:
    op.create_table(
        "run_void",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("reason", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.ForeignKeyConstraint(["run_id"], ["run.id"], name=op.f("fk_run_void_run_id"), ondelete="RESTRICT"),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_run_void")),
        sa.UniqueConstraint("run_id", name=op.f("uq_run_void_run_id")),
        sqlite_autoincrement=True,
    )


def _curve_standard() -> None:
    op.create_table(
        "curve_standard",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("curve_id", sa.Integer(), nullable=False),
        sa.Column("reading_id", sa.Integer(), nullable=False),
        sa.Column("fitted", sa.Boolean(), nullable=False),
        sa.Column("back_calculated", sa.Double(), nullable=True),
        sa.Column("relative_error", sa.Double(), nullable=True),
        sa.Column("excluded", sa.Boolean(), nullable=False),
        sa.Column("reason", sa.String(), nullable=True),
        sa.ForeignKeyConstraint(
            ["curve_id"], ["curve.id"], name=op.f("fk_curve_standard_curve_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(
            ["reading_id"], ["reading.id"], name=op.f("fk_curve_standard_reading_id"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_curve_standard")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_curve_standard_curve_id"), "curve_standard", ["curve_id"], unique=False)
    op.create_index(op.f("ix_curve_standard_reading_id"), "curve_standard", ["reading_id"], unique=False)


def _exclusion() -> None:
    op.create_table(
        "exclusion",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("reading_id", sa.Integer(), nullable=False),
        sa.Column("decision", sa.String(), nullable=False),
        sa.Column("reason_class", sa.String(), nullable=False),
        sa.Column("reason", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.CheckConstraint("\"decision\" IN ('exclude', 'restore')", name=op.f("ck_exclusion_decision")),
        sa.CheckConstraint(
            "\"reason_class\" IN ('assignable cause', 'outlying', 'other')",
            name=op.f("ck_exclusion_reason_class"),
        ),
        sa.ForeignKeyConstraint(
            ["reading_id"], ["reading.id"], name=op.f("fk_exclusion_reading_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(
            ["supersedes"], ["exclusion.id"], name=op.f("fk_exclusion_supersedes"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_exclusion")),
        sa.UniqueConstraint("supersedes", name=op.f("uq_exclusion_supersedes")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_exclusion_reading_id"), "exclusion", ["reading_id"], unique=False)


def _quantity() -> None:
    op.create_table(
        "quantity",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("run_id", sa.Integer(), nullable=False),
        sa.Column("curve_id", sa.Integer(), nullable=False),
        sa.Column("sample", sa.String(), nullable=False),
        sa.Column("role", sa.String(), nullable=False),
        sa.Column("nominal", sa.Double(), nullable=True),
        sa.Column("replicates", sa.Integer(), nullable=False),
        sa.Column("mean_response", sa.Double(), nullable=True),
        sa.Column("concentration", sa.Double(), nullable=True),
        sa.Column("u", sa.Double(), nullable=True),
        sa.Column("k", sa.Double(), nullable=True),
        sa.Column("expanded", sa.Double(), nullable=True),
        sa.Column("lower", sa.Double(), nullable=True),
        sa.Column("upper", sa.Double(), nullable=True),
        sa.Column("upper_open", sa.Boolean(), nullable=False),
        sa.Column("confidence", sa.Double(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("degrees_of_freedom", sa.Double(), nullable=True),
        sa.Column("state", sa.String(), nullable=False),
        sa.Column("position", sa.String(), nullable=True),
        sa.Column("flags", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("dilution", sa.Double(), nullable=False),
        sa.Column("unit", sa.String(), nullable=False),
        sa.Column("budget", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("supersedes", sa.Integer(), nullable=True),
        sa.CheckConstraint('"confidence" > 0 AND "confidence" < 1', name=op.f("ck_quantity_confidence")),
        sa.CheckConstraint('"dilution" > 0', name=op.f("ck_quantity_dilution")),
        sa.CheckConstraint("\"kind\" IN ('curve only', 'combined')", name=op.f("ck_quantity_kind")),
        sa.CheckConstraint("\"position\" IN ('inside', 'above', 'below')", name=op.f("ck_quantity_position")),
        sa.CheckConstraint(
            f'"role" IN ({ROLES})',
            name=op.f("ck_quantity_role"),
        ),
        sa.CheckConstraint(
            "\"state\" IN ('ok', 'asymmetric', 'open-above', 'open-below', 'no-estimate', 'off-curve')",
            name=op.f("ck_quantity_state"),
        ),
        sa.ForeignKeyConstraint(
            ["curve_id"], ["curve.id"], name=op.f("fk_quantity_curve_id"), ondelete="RESTRICT"
        ),
        sa.ForeignKeyConstraint(["run_id"], ["run.id"], name=op.f("fk_quantity_run_id"), ondelete="RESTRICT"),
        sa.ForeignKeyConstraint(
            ["supersedes"], ["quantity.id"], name=op.f("fk_quantity_supersedes"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_quantity")),
        sa.UniqueConstraint("supersedes", name=op.f("uq_quantity_supersedes")),
        sqlite_autoincrement=True,
    )
    op.create_index(op.f("ix_quantity_curve_id"), "quantity", ["curve_id"], unique=False)
    op.create_index(op.f("ix_quantity_run_id"), "quantity", ["run_id"], unique=False)
    op.create_index(op.f("ix_quantity_sample"), "quantity", ["sample"], unique=False)


def _verdict() -> None:
    op.create_table(
        "verdict",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("curve_id", sa.Integer(), nullable=False),
        sa.Column("decision", sa.String(), nullable=False),
        sa.Column("criteria", sa.JSON(none_as_null=True), nullable=False),
        sa.Column("lowest", sa.Double(), nullable=True),
        sa.Column("highest", sa.Double(), nullable=True),
        sa.Column("r_squared", sa.Double(), nullable=True),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint(
            "\"decision\" IN ('accepted', 'accepted with exclusions', 'rejected')",
            name=op.f("ck_verdict_decision"),
        ),
        sa.ForeignKeyConstraint(
            ["curve_id"], ["curve.id"], name=op.f("fk_verdict_curve_id"), ondelete="RESTRICT"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_verdict")),
        sa.UniqueConstraint("curve_id", name=op.f("uq_verdict_curve_id")),
        sqlite_autoincrement=True,
    )
