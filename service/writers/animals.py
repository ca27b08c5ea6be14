"""Animals as JSON."""

from __future__ import annotations

from typing import Any

from service.readers.animal_attributes import ATTRIBUTES
from service.store.animals import AnimalRecord
from service.writers.instants import utc_text


def animal_body(programme: str, record: AnimalRecord) -> dict[str, Any]:
    """Members of an animal, every attribute present.

    Parameters
    ----------
    programme : str
    record : AnimalRecord
    """
    empty: dict[str, Any] = {name: [] if name in ("groups", "deployments") else None for name in ATTRIBUTES}
    return {
        "animal": record.identifier,
        "programme": programme,
        "revision": record.revision,
        "fixes": record.fixes,
        "first_fix": utc_text(record.first_fix_ms),
        "last_fix": utc_text(record.last_fix_ms),
        **{name: record.attributes.get(name, value) for name, value in empty.items()},
    }
