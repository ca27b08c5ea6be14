"""Rows do not depend on the way the store came to what it holds."""

import json

from sqlalchemy import text

from service.settings import Settings
from service.store.database import DEFAULT_PROGRAMME, Store
from service.store.zones import retire_zone
from tests.service.recompute.computing import publish_all, rows
from tests.service.store.sent import HOUR_MS, START_MS, describe, put, send, square, walk, zone

FIXES = 24 * 50


def _bytes(store):
    """All that is published, as text; versions of zones are told by their shape, not by their number."""
    with store.read() as connection:
        shapes = dict(
            connection.execute(
                text(
                    "SELECT zone.identifier || zone_version.version, geometry_sent FROM zone_version "
                    "JOIN zone ON zone.id = zone_id"
                )
            ).all()
        )
        months = connection.execute(
            text(
                "SELECT identifier, month, tracked_from_ms, animal_month.fixes, tracked_hours, covered_hours, flags "
                "FROM animal_month JOIN animal ON id = animal_id WHERE until_publication IS NULL ORDER BY 1, 2"
            )
        ).all()
    facts = [(row.animal, row.month, shapes[f"{row.zone}{row.zone_version}"], repr(row.figures)) for row in rows(store)]
    return json.dumps([list(map(list, months)), sorted(facts)])


def _all_at_once(directory):
    store = Store.open(Settings(data=directory))
    put(store, "reserve", zone(square(-0.05, -0.05)))
    put(store, "reserve", zone(square(0.0, 0.0), "2023-12-06"))
    send(store, walk("fox", FIXES, 2) + walk("seal", FIXES))
    describe(store, "fox", longest_bridged_gap_hours=12.0)
    publish_all(store)
    return store


def _bit_by_bit(directory):
    """The same in the end, with late, wrong and corrected fixes, other zones and attributes on the way."""
    store = Store.open(Settings(data=directory))
    seal, fox = walk("seal", FIXES), walk("fox", FIXES, 2)
    describe(store, "fox", longest_bridged_gap_hours=3.0, species="arctic fox")
    send(store, seal[::2])
    publish_all(store)
    put(store, "reserve", zone(square(-0.01, -0.01)))
    put(store, "passing", zone(square(-0.02, -0.02)))
    send(store, fox[500:])
    publish_all(store)
    send(store, [("seal", "", START_MS + 7 * HOUR_MS, 0.3, 0.3, 10.0)])
    put(store, "reserve", zone(square(0.0, 0.0), "2023-12-06"))
    publish_all(store)
    send(store, seal + fox[:700], rows_at_a_time=97)
    put(store, "reserve", zone(square(-0.05, -0.05)))
    publish_all(store)
    with store.write("zone") as tx:
        retire_zone(tx, DEFAULT_PROGRAMME, "passing")
    describe(store, "fox", longest_bridged_gap_hours=12.0)
    publish_all(store)
    return store


def test_late_and_corrected_input_ends_in_the_same_rows(tmp_path):
    """A store that grew bit by bit holds, byte for byte, the rows of one that was given everything at once."""
    once, grown = _all_at_once(tmp_path / "once"), _bit_by_bit(tmp_path / "grown")
    try:
        assert _bytes(grown) == _bytes(once)
        assert len(rows(once, nonzero=True)) > 1
    finally:
        once.close()
        grown.close()
