"""Which past runs the noise model of a curve was pooled over."""

import sqlalchemy as sa
from alembic import op

revision = "0003"
down_revision = "0002"
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.add_column("curve", sa.Column("noise_from", sa.JSON(none_as_null=True), nullable=True))


def downgrade() -> None:
    op.drop_column("curve", "noise_from")
