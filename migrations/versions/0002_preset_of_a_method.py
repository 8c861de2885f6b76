"""Keep the acceptance preset beside the method that names it."""

import sqlalchemy as sa
from alembic import op

revision = "0002"
down_revision = "0001"
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.add_column("method", sa.Column("preset", sa.Text(), nullable=True))


def downgrade() -> None:
    op.drop_column("method", "preset")
