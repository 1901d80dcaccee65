"""The first schema."""

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None


def upgrade() -> None:
    op.create_table(
        "api_key",
        sa.Column("id", sa.String(length=32), nullable=False),
        sa.Column("name", sa.String(length=100), nullable=False),
        sa.Column("digest", sa.String(length=64), nullable=False),
        sa.Column("created", sa.Float(), nullable=False),
        sa.Column("revoked", sa.Float(), nullable=True),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_api_key")),
        sa.UniqueConstraint("digest", name=op.f("uq_api_key_digest")),
    )
    op.create_table(
        "engine",
        sa.Column("owner", sa.String(length=120), nullable=False),
        sa.Column("executor", sa.String(length=16), nullable=False),
        sa.Column("slots", sa.Integer(), nullable=False),
        sa.Column("seen", sa.Float(), nullable=False),
        sa.PrimaryKeyConstraint("owner", name=op.f("pk_engine")),
    )
    op.create_table(
        "job",
        sa.Column("id", sa.String(length=32), nullable=False),
        sa.Column("key_id", sa.String(length=32), nullable=False),
        sa.Column("kind", sa.String(length=64), nullable=False),
        sa.Column("request", sa.LargeBinary(), nullable=True),
        sa.Column("digest", sa.String(length=64), nullable=False),
        sa.Column("live_digest", sa.String(length=64), nullable=True),
        sa.Column("lane", sa.Integer(), nullable=False),
        sa.Column("state", sa.String(length=10), nullable=False),
        sa.Column("total", sa.Integer(), nullable=False),
        sa.Column("next_point", sa.Integer(), nullable=False),
        sa.Column("done", sa.Integer(), nullable=False),
        sa.Column("waiting", sa.Integer(), nullable=False),
        sa.Column("point_s", sa.Float(), nullable=False),
        sa.Column("turn", sa.Float(), nullable=False),
        sa.Column("revision", sa.Integer(), nullable=False),
        sa.Column("problem", sa.LargeBinary(), nullable=True),
        sa.Column("created", sa.Float(), nullable=False),
        sa.Column("started", sa.Float(), nullable=True),
        sa.Column("finished", sa.Float(), nullable=True),
        sa.Column("expires", sa.Float(), nullable=True),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_job")),
        sa.UniqueConstraint("key_id", "live_digest", name=op.f("uq_job_key_id")),
    )
    op.create_index("ix_job_expires", "job", ["expires"], unique=False)
    op.create_index(
        "ix_job_open",
        "job",
        ["lane", "turn"],
        unique=False,
        sqlite_where=sa.text("state IN ('queued', 'running')"),
        postgresql_where=sa.text("state IN ('queued', 'running')"),
    )
    op.create_index("ix_job_owner", "job", ["key_id", "created"], unique=False)
    op.create_table(
        "turn",
        sa.Column("key_id", sa.String(length=32), nullable=False),
        sa.Column("served", sa.Float(), nullable=False),
        sa.PrimaryKeyConstraint("key_id", name=op.f("pk_turn")),
    )
    op.create_table(
        "shard",
        sa.Column(
            "id",
            sa.BigInteger().with_variant(sa.Integer(), "sqlite"),
            autoincrement=True,
            nullable=False,
        ),
        sa.Column("job_id", sa.String(length=32), nullable=False),
        sa.Column("role", sa.String(length=6), nullable=False),
        sa.Column("start", sa.Integer(), nullable=False),
        sa.Column("stop", sa.Integer(), nullable=False),
        sa.Column("state", sa.String(length=8), nullable=False),
        sa.Column("attempt", sa.Integer(), nullable=False),
        sa.Column("crashes", sa.Integer(), nullable=False),
        sa.Column("losses", sa.Integer(), nullable=False),
        sa.Column("lease", sa.Float(), nullable=True),
        sa.Column("owner", sa.String(length=120), nullable=True),
        sa.ForeignKeyConstraint(
            ["job_id"], ["job.id"], name=op.f("fk_shard_job_id"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_shard")),
        sa.UniqueConstraint("job_id", "role", "start", name=op.f("uq_shard_job_id")),
    )
    op.create_index("ix_shard_job", "shard", ["job_id", "state"], unique=False)
    op.create_index(
        "ix_shard_lease",
        "shard",
        ["lease"],
        unique=False,
        sqlite_where=sa.text("state = 'running'"),
        postgresql_where=sa.text("state = 'running'"),
    )
    op.create_table(
        "token",
        sa.Column("key_id", sa.String(length=32), nullable=False),
        sa.Column("token", sa.String(length=255), nullable=False),
        sa.Column("digest", sa.String(length=64), nullable=False),
        sa.Column("job_id", sa.String(length=32), nullable=False),
        sa.ForeignKeyConstraint(
            ["job_id"], ["job.id"], name=op.f("fk_token_job_id"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("key_id", "token", name=op.f("pk_token")),
    )
    op.create_index("ix_token_job", "token", ["job_id"], unique=False)
    op.create_table(
        "output",
        sa.Column("shard_id", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("part", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("data", sa.LargeBinary(), nullable=False),
        sa.ForeignKeyConstraint(
            ["shard_id"], ["shard.id"], name=op.f("fk_output_shard_id"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("shard_id", "part", name=op.f("pk_output")),
    )


def downgrade() -> None:
    for table in ("output", "token", "shard", "turn", "job", "engine", "api_key"):
        op.drop_table(table)
