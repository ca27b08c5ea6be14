"""Receipts of submissions as JSON."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import asdict
from typing import Any

from service.readers.fix_rows import RejectedRow
from service.store.submissions import Receipt
from service.writers.instants import utc_text


def receipt_body(receipt: Receipt) -> dict[str, Any]:
    """Members of a receipt, in the order of the contract."""
    return {
        "submission": receipt.submission,
        "programme": receipt.programme,
        "kind": receipt.kind,
        "sha256": receipt.sha256,
        "received_at": utc_text(receipt.received_at_ms),
        "commit": receipt.commit_no,
        "media_type": receipt.media_type,
        "parameters": receipt.parameters,
        "rows": receipt.rows,
        "accepted": receipt.accepted,
        "unchanged": receipt.unchanged,
        "corrected": receipt.corrected,
        "rejected": receipt.rejected,
        "changed": receipt.changed,
        "repeat_of": receipt.repeat_of,
        "notes": receipt.notes,
        "unknown_columns": receipt.unknown_columns,
    }


def rejected_bodies(rows: Iterable[RejectedRow]) -> list[dict[str, Any]]:
    """Rejected rows as they stand in an answer."""
    return [asdict(row) for row in rows]
