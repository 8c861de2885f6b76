"""Keep the response of the internal standard beside each reading."""

import sqlalchemy as sa
from alembic import op

revision = "0004"
down_revision = "0003"
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.add_column("reading", sa.Column("internal_standard", sa.Double(), nullable=True))


def downgrade() -> None:
    op.drop_column("reading", "internal_standard")
