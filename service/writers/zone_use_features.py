"""Rows about zones as GeoJSON: the zone versions that they speak of, with the rows in their properties."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from sqlalchemy import Connection

from service.store.zones import get_zone
from service.writers.zone_features import ended_feature, zone_feature

Row = dict[str, Any]


def features_with_rows(connection: Connection, programme: str, rows: Sequence[Row]) -> list[Row]:
    """One feature per zone version on the page, its rows in the properties."""
    rows_of: dict[tuple[str, int], list[Row]] = {}
    for row in rows:
        rows_of.setdefault((row["zone"], row["zone_version"]), []).append(row)
    features = _features(connection, programme, rows)
    for key, feature in features.items():
        feature["properties"]["rows"] = rows_of[key]
    return list(features.values())


def flat_features(connection: Connection, programme: str, rows: Sequence[Row]) -> list[Row]:
    """One feature per zone version and month, its figures as plain properties, for maps."""
    features = _features(connection, programme, rows)
    flat = []
    for row in rows:
        feature = features[row["zone"], row["zone_version"]]
        identifier = f"{feature['id']}/{row['month']}"
        properties = {"id": identifier, "name": feature["properties"]["name"], **row}
        flat.append({**feature, "id": identifier, "properties": properties})
    return flat


def _features(connection: Connection, programme: str, rows: Sequence[Row]) -> dict[tuple[str, int], Row]:
    """Features of the zone versions of rows, by zone and version."""
    wanted = sorted({(row["zone"], row["zone_version"]) for row in rows})
    live = {
        (version.zone, version.version): version
        for zone in sorted({zone for zone, _ in wanted})
        for version in get_zone(connection, programme, zone)
    }
    return {key: zone_feature(live[key]) if key in live else ended_feature(*key) for key in wanted}
