"""${message}."""

import sqlalchemy as sa
from alembic import op
${imports if imports else ""}
revision = ${repr(up_revision)}
down_revision = ${repr(down_revision)}
branch_labels = None
depends_on = None

# Add the revision to calib.store.schema.REVISIONS. A table that is built again (batch_alter_table) loses
# its triggers: call calib.store.triggers.create_triggers for it. Hand over its CHECK constraints in
# table_args and sqlite_autoincrement=True in table_kwargs. New columns of evidence must be nullable, so
# that the digests of older rows stay valid.


def upgrade() -> None:
    ${upgrades if upgrades else "pass"}


def downgrade() -> None:
    ${downgrades if downgrades else "pass"}
