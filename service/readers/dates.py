"""Dates of zones and deployments, held within what can be told and computed with."""

from __future__ import annotations

from typing import Final

from estimators import CalendarError, local_date_ms

FIRST_MS: Final = -62_135_424_000_000
"""0001-01-03 in UTC: in the year 1 or later in every time zone."""
LAST_MS: Final = 253_402_300_799_999
"""The last millisecond of the year 9999 in UTC."""


def date_ms(text: str, time_zone: str, first_ms: int = FIRST_MS, last_ms: int = LAST_MS) -> int:
    """Instant of a date (its local midnight) or of an RFC 3339 time, milliseconds since 1970-01-01 UTC.

    Parameters
    ----------
    text : str
    time_zone : str, IANA name
    first_ms, last_ms : int, instants that it must lie between, both included

    Raises
    ------
    CalendarError
        Neither a date nor a time with an offset, or not between them.
    """
    instant_ms = local_date_ms(text, time_zone)
    if not first_ms <= instant_ms <= last_ms:
        raise CalendarError("date_out_of_range", f"{text[:60]!r} lies too far away. Leave it out if it is not known.")
    return instant_ms
