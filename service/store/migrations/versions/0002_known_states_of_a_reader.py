"""A reader is confirmed, paused or gone; the store takes nothing else."""

from alembic import op

revision = "0002"
down_revision = "0001"
branch_labels = None
depends_on = None


def upgrade() -> None:
    with op.batch_alter_table("subscriber") as batch_op:
        batch_op.create_check_constraint(op.f("ck_subscriber_state"), "state IN ('confirmed', 'paused', 'left')")


def downgrade() -> None:
    with op.batch_alter_table("subscriber") as batch_op:
        batch_op.drop_constraint(op.f("ck_subscriber_state"), type_="check")
