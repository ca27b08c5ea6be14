"""Tables of the store. What was sent is never changed; what supersedes it is added with a higher commit number."""

from __future__ import annotations

from sqlalchemy import (
    BigInteger,
    Boolean,
    Column,
    Float,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    Table,
    Text,
    UniqueConstraint,
)

metadata = MetaData()

# Commit numbers and times in milliseconds need 64 bits; SQLite numbers rows only for a column called INTEGER.
_KEY = BigInteger().with_variant(Integer, "sqlite")

store_commit = Table(
    "store_commit",
    metadata,
    Column("commit_no", _KEY, primary_key=True, autoincrement=False),
    Column("kind", Text, nullable=False),
    Column("at_ms", BigInteger, nullable=False),
)

programme = Table(
    "programme",
    metadata,
    Column("id", _KEY, primary_key=True),
    Column("name", Text, nullable=False, unique=True),
    Column("time_zone", Text, nullable=False),
    Column("longest_bridged_gap_hours", Float, nullable=False),
    Column("minimum_stay_hours", Float, nullable=False),
    Column("default_error_sd_m", Float, nullable=False),
    Column("zones_revision", BigInteger, nullable=False),
    Column("settings_revision", BigInteger, nullable=False),
)

# published_commit_no is the snapshot that the latest publication was computed from, 0 for none;
# stale_from the first commit after it that changed the animal itself. The fixes are counted here as they come:
# counting them for every list of animals would read them all.
animal = Table(
    "animal",
    metadata,
    Column("id", _KEY, primary_key=True),
    Column("programme_id", _KEY, ForeignKey("programme.id"), nullable=False),
    Column("identifier", Text, nullable=False),
    Column("revision", BigInteger, nullable=False),
    Column("stale_from", BigInteger, nullable=False),
    Column("published_commit_no", BigInteger, nullable=False),
    Column("published_estimates_version", Integer, nullable=False),
    Column("publication_id", BigInteger),
    Column("fixes", BigInteger, nullable=False),
    Column("first_fix_ms", BigInteger),
    Column("last_fix_ms", BigInteger),
    UniqueConstraint("programme_id", "identifier"),
)

animal_version = Table(
    "animal_version",
    metadata,
    Column("animal_id", _KEY, ForeignKey("animal.id"), primary_key=True),
    Column("commit_no", BigInteger, primary_key=True),
    Column("attributes", Text, nullable=False),
)

animal_group = Table(
    "animal_group",
    metadata,
    Column("animal_id", _KEY, ForeignKey("animal.id"), primary_key=True),
    Column("name", Text, primary_key=True),
)

tag = Table(
    "tag",
    metadata,
    Column("id", _KEY, primary_key=True),
    Column("animal_id", _KEY, ForeignKey("animal.id"), nullable=False),
    Column("name", Text, nullable=False),
    UniqueConstraint("animal_id", "name"),
)

# The current value of a fix is the one with the highest commit number. Kept in the order in which it is read.
# No foreign keys: half a million look-ups per submission would only repeat what the writer has just done.
fix = Table(
    "fix",
    metadata,
    Column("animal_id", BigInteger, primary_key=True, autoincrement=False),
    Column("tag_id", BigInteger, primary_key=True, autoincrement=False),
    Column("time_ms", BigInteger, primary_key=True, autoincrement=False),
    Column("commit_no", BigInteger, primary_key=True, autoincrement=False),
    Column("row_no", BigInteger, nullable=False),
    Column("lon_deg", Float, nullable=False),
    Column("lat_deg", Float, nullable=False),
    Column("error_kind", Text),
    Column("xx", Float),
    Column("xy", Float),
    Column("yy", Float),
    sqlite_with_rowid=False,
)

zone = Table(
    "zone",
    metadata,
    Column("id", _KEY, primary_key=True),
    Column("programme_id", _KEY, ForeignKey("programme.id"), nullable=False),
    Column("identifier", Text, nullable=False),
    Column("revision", BigInteger, nullable=False),
    UniqueConstraint("programme_id", "identifier"),
)

zone_version = Table(
    "zone_version",
    metadata,
    Column("id", _KEY, primary_key=True),
    Column("zone_id", _KEY, ForeignKey("zone.id"), nullable=False),
    Column("version", Integer, nullable=False),
    Column("name", Text),
    Column("in_force_from", Text),
    Column("in_force_until", Text),
    Column("season", Text),
    Column("edges", Text, nullable=False),
    Column("geometry_sent", Text, nullable=False),
    Column("geometry", Text, nullable=False),
    Column("notes", Text, nullable=False),
    Column("commit_no", BigInteger, nullable=False),
    Column("ended_commit_no", BigInteger),
    UniqueConstraint("zone_id", "version"),
)

submission = Table(
    "submission",
    metadata,
    Column("id", _KEY, primary_key=True),
    Column("programme_id", _KEY, ForeignKey("programme.id"), nullable=False),
    Column("kind", Text, nullable=False),
    Column("sha256", Text, nullable=False),
    Column("media_type", Text, nullable=False),
    Column("parameters", Text, nullable=False),
    Column("size_bytes", BigInteger, nullable=False),
    Column("received_at_ms", BigInteger, nullable=False),
    Column("commit_no", BigInteger, nullable=False),
    Column("rows", BigInteger, nullable=False),
    Column("accepted", BigInteger, nullable=False),
    Column("unchanged", BigInteger, nullable=False),
    Column("corrected", BigInteger, nullable=False),
    Column("rejected", BigInteger, nullable=False),
    Column("notes", Text, nullable=False),
    Column("unknown_columns", Text, nullable=False),
    Column("changed", Boolean, nullable=False),
    Column("repeat_of", BigInteger),
    Index("submission_by_payload", "programme_id", "sha256"),
)

submission_payload = Table(
    "submission_payload",
    metadata,
    Column("submission_id", _KEY, ForeignKey("submission.id"), primary_key=True),
    Column("part_no", Integer, primary_key=True),
    Column("content", LargeBinary, nullable=False),
)

rejected_row = Table(
    "rejected_row",
    metadata,
    Column("submission_id", _KEY, ForeignKey("submission.id"), primary_key=True),
    Column("row_no", BigInteger, primary_key=True, autoincrement=False),
    Column("column_name", Text),
    Column("code", Text, nullable=False),
    Column("message", Text, nullable=False),
    Column("value", Text),
    sqlite_with_rowid=False,
)

publication = Table(
    "publication",
    metadata,
    Column("id", _KEY, primary_key=True),
    Column("animal_id", _KEY, ForeignKey("animal.id"), nullable=False),
    Column("snapshot_commit_no", BigInteger, nullable=False),
    Column("estimates_version", Integer, nullable=False),
    Column("published_at_ms", BigInteger, nullable=False),
    Column("estimator", Text, nullable=False),
    Column("parameters", Text, nullable=False),
    Column("track_digest", Text, nullable=False),
    Column("digest", Text, nullable=False),
    Index("publication_by_animal", "animal_id", "snapshot_commit_no"),
)

# A row version is live from one publication until another; until_publication is NULL while it is the current one.
animal_month = Table(
    "animal_month",
    metadata,
    Column("animal_id", BigInteger, primary_key=True, autoincrement=False),
    Column("month", Text, primary_key=True),
    Column("from_publication", BigInteger, primary_key=True, autoincrement=False),
    Column("until_publication", BigInteger),
    Column("estimator", Text, nullable=False),
    Column("tracked_from_ms", BigInteger, nullable=False),
    Column("fixes", BigInteger, nullable=False),
    Column("tracked_hours", Float, nullable=False),
    Column("covered_hours", Float, nullable=False),
    Column("longest_gap_hours", Float, nullable=False),
    Column("flags", Text, nullable=False),
    sqlite_with_rowid=False,
)

zone_use = Table(
    "zone_use",
    metadata,
    Column("animal_id", BigInteger, primary_key=True, autoincrement=False),
    Column("month", Text, primary_key=True),
    Column("zone_version_id", BigInteger, primary_key=True, autoincrement=False),
    Column("from_publication", BigInteger, primary_key=True, autoincrement=False),
    Column("until_publication", BigInteger),
    Column("fixes", BigInteger, nullable=False),
    Column("in_force_hours", Float, nullable=False),
    Column("tracked_hours", Float, nullable=False),
    Column("covered_hours", Float, nullable=False),
    Column("longest_gap_hours", Float, nullable=False),
    Column("probability_mass", Float),
    Column("numerical_error", Float),
    Column("time_fraction", Float),
    Column("inside_hours", Float, nullable=False),
    Column("visits", BigInteger, nullable=False),
    sqlite_with_rowid=False,
)

# The last failure of an animal; gone once it was published again.
computation_failure = Table(
    "computation_failure",
    metadata,
    Column("animal_id", _KEY, ForeignKey("animal.id"), primary_key=True),
    Column("snapshot_commit_no", BigInteger, nullable=False),
    Column("estimates_version", Integer, nullable=False),
    Column("code", Text, nullable=False),
    Column("message", Text, nullable=False),
    Column("attempts", Integer, nullable=False),
    Column("failed_at_ms", BigInteger, nullable=False),
    Column("retry_at_ms", BigInteger, nullable=False),
)
