"""Query parameters; what is not listed here is refused, so that a misspelt filter never passes for one."""

from __future__ import annotations

import re
from typing import Final

from fastapi import Request
from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator
from pydantic_core import PydanticCustomError

from service.problems import Problem

DEFAULT_LIMIT: Final = 1000
LARGEST_LIMIT: Final = 10_000

_MONTH = re.compile(r"\d{4}-(0[1-9]|1[0-2])", re.ASCII)


class Parameters(BaseModel):
    """Parameters of every call."""

    model_config = ConfigDict(extra="forbid", populate_by_name=False)

    f: str | None = Field(None, description="json, geojson or csv; beats the Accept header.")


class PageParameters(Parameters):
    """Parameters of every list."""

    cursor: str | None = Field(None, description="next of the page before.")
    limit: int = Field(DEFAULT_LIMIT, description="Entries per page, 1 to 10000; other values are brought into it.")

    @field_validator("limit")
    @classmethod
    def _clamp(cls, value: int) -> int:
        return min(max(value, 1), LARGEST_LIMIT)


class TrackParameters(Parameters):
    """Parameters of POST /tracks."""

    time_zone: str | None = Field(None, description="IANA name of the zone of times without an offset.")
    again: bool = Field(False, description="Read a body again that was sent before.")


class MonthRangeParameters(PageParameters):
    """Lists by month."""

    animal: str | None = None
    zone: str | None = None
    group: str | None = Field(None, description="Only animals of this group.")
    programme: str | None = None
    month_from: str | None = Field(None, alias="from", description="First month, such as 2026-03.")
    month_to: str | None = Field(None, alias="to", description="Last month, included.")

    @field_validator("month_from", "month_to")
    @classmethod
    def _check_month(cls, value: str | None) -> str | None:
        if value is not None and not _MONTH.fullmatch(value):
            raise PydanticCustomError("bad_month", "{got} is not a month. Write 2026-03.", {"got": repr(value[:40])})
        return value

    @model_validator(mode="after")
    def _check_order(self) -> MonthRangeParameters:
        if self.month_from and self.month_to and self.month_from > self.month_to:
            raise PydanticCustomError(
                "months_reversed",
                "from {first} is after to {last}. Swap them.",
                {"first": self.month_from, "last": self.month_to},
            )
        return self


class ZoneUseParameters(MonthRangeParameters):
    """Parameters of GET /zone-use."""

    nonzero: bool = Field(False, description="Leave out rows whose covered time was surely spent outside.")


async def refuse_repeated(request: Request) -> None:
    """Refuse a parameter that is there twice: only one of its values would count.

    Raises
    ------
    Problem
        It is (400).
    """
    names = [name for name, _ in request.query_params.multi_items()]
    if twice := sorted({name[:60] for name in names if names.count(name) > 1}):
        detail = f"More than once: {', '.join(twice)}. Send each parameter once."
        raise Problem(400, "invalid-parameter", "A query parameter is not valid", detail)
