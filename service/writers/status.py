"""The status as JSON."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from service.writers.instants import utc_text


def status_body(status: Mapping[str, Any], progress: Mapping[str, Any] | None) -> dict[str, Any]:
    """Members of GET /status.

    Parameters
    ----------
    status : mapping, as the store gives it
    progress : mapping or None, of the reconciler
    """
    failed = [
        {
            "animal": failure["animal"],
            "programme": failure["programme"],
            "code": failure["code"],
            "message": failure["message"],
            "attempts": failure["attempts"],
            "failed_at": utc_text(failure["failed_at_ms"]),
            "retry_at": utc_text(failure["retry_at_ms"]),
        }
        for failure in status["failed"]
    ]
    return {**status, "failed": failed, "progress": progress}
