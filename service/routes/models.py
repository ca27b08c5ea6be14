"""Shapes of the answers, for the API document; bodies are written without going through them row by row."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field

Pair = tuple[float, float]


class Shape(BaseModel):
    """A shape whose members are all listed."""

    model_config = ConfigDict(extra="forbid")


class ProblemBody(BaseModel):
    """What is wrong (RFC 9457); further members depend on the type."""

    type: str = Field(description="Stable name of the kind of problem, /problems/...")
    title: str
    status: int
    detail: str


class RejectedRowBody(Shape):
    """A row that was not taken."""

    row: int = Field(description="Number of the data row, the first one is 1.")
    column: str | None
    code: str
    message: str
    value: str | None


class ReceiptBody(Shape):
    """What became of a submission."""

    submission: int
    programme: str
    kind: str
    sha256: str
    received_at: str
    commit: int
    media_type: str
    parameters: dict[str, str]
    rows: int
    accepted: int = Field(description="Rows that changed something: new ones and corrections.")
    unchanged: int
    corrected: int
    rejected: int
    changed: bool
    repeat_of: int | None = Field(description="The earlier submission that held the same bytes.")
    notes: list[str]
    unknown_columns: list[str]


class TrackReceiptBody(ReceiptBody):
    """Receipt with the first rejected rows."""

    rejected_rows: list[RejectedRowBody]
    next_rejected: str | None = Field(description="Where to read the rejected rows that are not listed here.")


class SubmissionPage(Shape):
    """Page of receipts."""

    submissions: list[ReceiptBody]
    next: str | None


class RejectedPage(Shape):
    """Page of rejected rows."""

    submission: int
    rejected: int
    rejected_rows: list[RejectedRowBody]
    next: str | None


class AnimalBody(Shape):
    """An animal."""

    animal: str
    programme: str
    revision: int
    fixes: int
    first_fix: str | None
    last_fix: str | None
    species: str | None
    sex: str | None
    life_stage: str | None
    groups: list[str]
    deployments: list[dict[str, str | None]]
    longest_bridged_gap_hours: float | None
    post_release_window_hours: float | None
    default_error_sd_m: float | None
    estimator: str | None


class AnimalPage(Shape):
    """Page of animals."""

    animals: list[AnimalBody]
    next: str | None


class ZoneVersionBody(Shape):
    """A version of a zone."""

    version: int
    name: str | None
    in_force_from: str | None
    in_force_until: str | None
    effective_from: str | None = Field(description="First instant in force, in UTC.")
    effective_until: str | None = Field(description="End, by its own date or because a later version begins.")
    season: str | None
    edges: str
    notes: list[str]
    commit: int
    bbox: list[float]
    geometry: dict[str, Any] | None = Field(None, description="MultiPolygon, cut at ±180°; not in lists.")


class ZoneBody(Shape):
    """A zone."""

    zone: str
    programme: str
    revision: int
    versions: list[ZoneVersionBody]


class ZoneReceiptBody(ZoneBody):
    """A zone as stored, with the submission that it came with."""

    submission: int
    changed: bool
    unknown_properties: list[str]


class ZonesReceiptBody(Shape):
    """Zones as stored, with the submission that they came with."""

    submission: int
    changed: bool
    unknown_properties: list[str]
    zones: list[ZoneBody]


class ZonePage(Shape):
    """Page of zone versions, grouped by zone."""

    zones: list[ZoneBody]
    next: str | None


class ZoneUseRow(Shape):
    """Use of one zone version by one animal in one month."""

    programme: str
    animal: str
    zone: str
    zone_version: int
    month: str
    distribution: Literal["occurrence"]
    estimator: str
    fixes: int
    tracked_hours: float
    covered_hours: float
    coverage: float
    in_force_hours: float
    longest_gap_hours: float
    probability_mass: float | None = Field(description="Null without covered time.")
    inside_interval: Pair | None
    use_probability: float | None
    numerical_error: float | None
    expected_hours: float | None
    time_fraction: float | None
    inside_hours: float
    bounds: Pair
    path_bounds: Pair
    visits: int
    flags: list[str]


class ZoneUsePage(Shape):
    """Page of zone use."""

    as_of: str
    current: bool
    minimum_stay_hours: float
    cautions: list[str]
    rows: list[ZoneUseRow]
    next: str | None


class SummaryRow(Shape):
    """Use of one zone version in one month over animals, each with equal weight."""

    programme: str
    zone: str
    zone_version: int
    month: str
    distribution: Literal["occurrence"]
    animals_tracked: int
    animals_with_covered_time: int
    animals_using: int
    mean_probability_mass: float | None
    minimum_probability_mass: float | None
    maximum_probability_mass: float | None
    mean_time_fraction: float | None
    minimum_time_fraction: float | None
    maximum_time_fraction: float | None


class SummaryPage(Shape):
    """Page of summaries."""

    as_of: str
    current: bool
    using_rule: str
    cautions: list[str]
    rows: list[SummaryRow]
    next: str | None


class FailureBody(Shape):
    """An animal that could not be computed."""

    animal: str
    programme: str
    code: str
    message: str
    attempts: int
    failed_at: str
    retry_at: str


class StatusBody(BaseModel):
    """Whether everything that was sent is computed."""

    current: bool
    pending: int = Field(description="Animals still to be computed.")
    oldest_stale_s: float | None
    animals: int
    failed: list[FailureBody] = Field(description="Animals that could not be computed; each is tried again.")
    progress: dict[str, Any] | None = Field(description="What is being computed; null where nothing computes.")


class HealthBody(Shape):
    """The server answers."""

    status: Literal["ok"]
