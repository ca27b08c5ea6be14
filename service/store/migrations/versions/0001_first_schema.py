"""The first schema."""

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None

_KEY = sa.BigInteger().with_variant(sa.Integer(), "sqlite")


def upgrade() -> None:
    """Make all tables."""
    op.create_table(
        "animal_month",
        sa.Column("animal_id", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("month", sa.Text(), nullable=False),
        sa.Column("from_publication", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("until_publication", sa.BigInteger(), nullable=True),
        sa.Column("estimator", sa.Text(), nullable=False),
        sa.Column("tracked_from_ms", sa.BigInteger(), nullable=False),
        sa.Column("fixes", sa.BigInteger(), nullable=False),
        sa.Column("tracked_hours", sa.Float(), nullable=False),
        sa.Column("covered_hours", sa.Float(), nullable=False),
        sa.Column("longest_gap_hours", sa.Float(), nullable=False),
        sa.Column("flags", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("animal_id", "month", "from_publication"),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "fix",
        sa.Column("animal_id", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("tag_id", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("time_ms", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("commit_no", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("row_no", sa.BigInteger(), nullable=False),
        sa.Column("lon_deg", sa.Float(), nullable=False),
        sa.Column("lat_deg", sa.Float(), nullable=False),
        sa.Column("error_kind", sa.Text(), nullable=True),
        sa.Column("xx", sa.Float(), nullable=True),
        sa.Column("xy", sa.Float(), nullable=True),
        sa.Column("yy", sa.Float(), nullable=True),
        sa.PrimaryKeyConstraint("animal_id", "tag_id", "time_ms", "commit_no"),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "programme",
        sa.Column("id", _KEY, nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("time_zone", sa.Text(), nullable=False),
        sa.Column("longest_bridged_gap_hours", sa.Float(), nullable=False),
        sa.Column("minimum_stay_hours", sa.Float(), nullable=False),
        sa.Column("default_error_sd_m", sa.Float(), nullable=False),
        sa.Column("zones_revision", sa.BigInteger(), nullable=False),
        sa.Column("settings_revision", sa.BigInteger(), nullable=False),
        sa.PrimaryKeyConstraint("id"),
        sa.UniqueConstraint("name"),
    )
    op.create_table(
        "store_commit",
        sa.Column("commit_no", _KEY, autoincrement=False, nullable=False),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("at_ms", sa.BigInteger(), nullable=False),
        sa.PrimaryKeyConstraint("commit_no"),
    )
    op.create_table(
        "zone_use",
        sa.Column("animal_id", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("month", sa.Text(), nullable=False),
        sa.Column("zone_version_id", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("from_publication", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("until_publication", sa.BigInteger(), nullable=True),
        sa.Column("fixes", sa.BigInteger(), nullable=False),
        sa.Column("in_force_hours", sa.Float(), nullable=False),
        sa.Column("tracked_hours", sa.Float(), nullable=False),
        sa.Column("covered_hours", sa.Float(), nullable=False),
        sa.Column("longest_gap_hours", sa.Float(), nullable=False),
        sa.Column("probability_mass", sa.Float(), nullable=True),
        sa.Column("numerical_error", sa.Float(), nullable=True),
        sa.Column("time_fraction", sa.Float(), nullable=True),
        sa.Column("inside_hours", sa.Float(), nullable=False),
        sa.Column("visits", sa.BigInteger(), nullable=False),
        sa.PrimaryKeyConstraint("animal_id", "month", "zone_version_id", "from_publication"),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "animal",
        sa.Column("id", _KEY, nullable=False),
        sa.Column("programme_id", _KEY, nullable=False),
        sa.Column("identifier", sa.Text(), nullable=False),
        sa.Column("revision", sa.BigInteger(), nullable=False),
        sa.Column("stale_from", sa.BigInteger(), nullable=False),
        sa.Column("published_commit_no", sa.BigInteger(), nullable=False),
        sa.Column("published_estimates_version", sa.Integer(), nullable=False),
        sa.Column("publication_id", sa.BigInteger(), nullable=True),
        sa.Column("fixes", sa.BigInteger(), nullable=False),
        sa.Column("first_fix_ms", sa.BigInteger(), nullable=True),
        sa.Column("last_fix_ms", sa.BigInteger(), nullable=True),
        sa.ForeignKeyConstraint(
            ["programme_id"],
            ["programme.id"],
        ),
        sa.PrimaryKeyConstraint("id"),
        sa.UniqueConstraint("programme_id", "identifier"),
    )
    op.create_table(
        "submission",
        sa.Column("id", _KEY, nullable=False),
        sa.Column("programme_id", _KEY, nullable=False),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("sha256", sa.Text(), nullable=False),
        sa.Column("media_type", sa.Text(), nullable=False),
        sa.Column("parameters", sa.Text(), nullable=False),
        sa.Column("size_bytes", sa.BigInteger(), nullable=False),
        sa.Column("received_at_ms", sa.BigInteger(), nullable=False),
        sa.Column("commit_no", sa.BigInteger(), nullable=False),
        sa.Column("rows", sa.BigInteger(), nullable=False),
        sa.Column("accepted", sa.BigInteger(), nullable=False),
        sa.Column("unchanged", sa.BigInteger(), nullable=False),
        sa.Column("corrected", sa.BigInteger(), nullable=False),
        sa.Column("rejected", sa.BigInteger(), nullable=False),
        sa.Column("notes", sa.Text(), nullable=False),
        sa.Column("unknown_columns", sa.Text(), nullable=False),
        sa.Column("changed", sa.Boolean(), nullable=False),
        sa.Column("repeat_of", sa.BigInteger(), nullable=True),
        sa.ForeignKeyConstraint(
            ["programme_id"],
            ["programme.id"],
        ),
        sa.PrimaryKeyConstraint("id"),
    )
    op.create_index("submission_by_payload", "submission", ["programme_id", "sha256"], unique=False)
    op.create_table(
        "zone",
        sa.Column("id", _KEY, nullable=False),
        sa.Column("programme_id", _KEY, nullable=False),
        sa.Column("identifier", sa.Text(), nullable=False),
        sa.Column("revision", sa.BigInteger(), nullable=False),
        sa.ForeignKeyConstraint(
            ["programme_id"],
            ["programme.id"],
        ),
        sa.PrimaryKeyConstraint("id"),
        sa.UniqueConstraint("programme_id", "identifier"),
    )
    op.create_table(
        "animal_group",
        sa.Column("animal_id", _KEY, nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(
            ["animal_id"],
            ["animal.id"],
        ),
        sa.PrimaryKeyConstraint("animal_id", "name"),
    )
    op.create_table(
        "animal_version",
        sa.Column("animal_id", _KEY, nullable=False),
        sa.Column("commit_no", sa.BigInteger(), nullable=False),
        sa.Column("attributes", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(
            ["animal_id"],
            ["animal.id"],
        ),
        sa.PrimaryKeyConstraint("animal_id", "commit_no"),
    )
    op.create_table(
        "computation_failure",
        sa.Column("animal_id", _KEY, nullable=False),
        sa.Column("snapshot_commit_no", sa.BigInteger(), nullable=False),
        sa.Column("estimates_version", sa.Integer(), nullable=False),
        sa.Column("code", sa.Text(), nullable=False),
        sa.Column("message", sa.Text(), nullable=False),
        sa.Column("attempts", sa.Integer(), nullable=False),
        sa.Column("failed_at_ms", sa.BigInteger(), nullable=False),
        sa.Column("retry_at_ms", sa.BigInteger(), nullable=False),
        sa.ForeignKeyConstraint(
            ["animal_id"],
            ["animal.id"],
        ),
        sa.PrimaryKeyConstraint("animal_id"),
    )
    op.create_table(
        "publication",
        sa.Column("id", _KEY, nullable=False),
        sa.Column("animal_id", _KEY, nullable=False),
        sa.Column("snapshot_commit_no", sa.BigInteger(), nullable=False),
        sa.Column("estimates_version", sa.Integer(), nullable=False),
        sa.Column("published_at_ms", sa.BigInteger(), nullable=False),
        sa.Column("estimator", sa.Text(), nullable=False),
        sa.Column("parameters", sa.Text(), nullable=False),
        sa.Column("track_digest", sa.Text(), nullable=False),
        sa.Column("digest", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(
            ["animal_id"],
            ["animal.id"],
        ),
        sa.PrimaryKeyConstraint("id"),
    )
    op.create_index("publication_by_animal", "publication", ["animal_id", "snapshot_commit_no"], unique=False)
    op.create_table(
        "rejected_row",
        sa.Column("submission_id", _KEY, nullable=False),
        sa.Column("row_no", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("column_name", sa.Text(), nullable=True),
        sa.Column("code", sa.Text(), nullable=False),
        sa.Column("message", sa.Text(), nullable=False),
        sa.Column("value", sa.Text(), nullable=True),
        sa.ForeignKeyConstraint(
            ["submission_id"],
            ["submission.id"],
        ),
        sa.PrimaryKeyConstraint("submission_id", "row_no"),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "submission_payload",
        sa.Column("submission_id", _KEY, nullable=False),
        sa.Column("part_no", sa.Integer(), nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=False),
        sa.ForeignKeyConstraint(
            ["submission_id"],
            ["submission.id"],
        ),
        sa.PrimaryKeyConstraint("submission_id", "part_no"),
    )
    op.create_table(
        "tag",
        sa.Column("id", _KEY, nullable=False),
        sa.Column("animal_id", _KEY, nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(
            ["animal_id"],
            ["animal.id"],
        ),
        sa.PrimaryKeyConstraint("id"),
        sa.UniqueConstraint("animal_id", "name"),
    )
    op.create_table(
        "zone_version",
        sa.Column("id", _KEY, nullable=False),
        sa.Column("zone_id", _KEY, nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("name", sa.Text(), nullable=True),
        sa.Column("in_force_from", sa.Text(), nullable=True),
        sa.Column("in_force_until", sa.Text(), nullable=True),
        sa.Column("season", sa.Text(), nullable=True),
        sa.Column("edges", sa.Text(), nullable=False),
        sa.Column("geometry_sent", sa.Text(), nullable=False),
        sa.Column("geometry", sa.Text(), nullable=False),
        sa.Column("notes", sa.Text(), nullable=False),
        sa.Column("commit_no", sa.BigInteger(), nullable=False),
        sa.Column("ended_commit_no", sa.BigInteger(), nullable=True),
        sa.ForeignKeyConstraint(
            ["zone_id"],
            ["zone.id"],
        ),
        sa.PrimaryKeyConstraint("id"),
        sa.UniqueConstraint("zone_id", "version"),
    )
