"""The outlying reading proposed beside a curve, with the effect of leaving it out."""

import sqlalchemy as sa
from alembic import op

revision = "0006"
down_revision = "0005"
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.add_column("curve", sa.Column("outlying", sa.JSON(none_as_null=True), nullable=True))


def downgrade() -> None:
    op.drop_column("curve", "outlying")
