"""Instants as RFC 3339 text in UTC."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def utc_text(time_ms: int | None) -> str | None:
    """Instant as text, with milliseconds where it has any; None for none.

    Parameters
    ----------
    time_ms : int or None, milliseconds since 1970-01-01 UTC
    """
    if time_ms is None:
        return None
    instant = (_EPOCH + timedelta(milliseconds=time_ms)).replace(tzinfo=None)
    return instant.isoformat(timespec="milliseconds" if time_ms % 1000 else "seconds") + "Z"
