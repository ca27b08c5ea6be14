"""Makes the demo data: `python -m demo_data.make_demo_data` writes the files beside this script anew.

The islands, the zones and the animals are invented; no place, animal or organisation like them exists. Files are
named so that their alphabetical order is the order in which a pipeline would have posted them.
"""

from __future__ import annotations

import csv
import io
import json
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from random import Random
from typing import Any

from demo_data.simulated_movement import Fix, Gait, Journey, Leg, Place, argos_fixes, gps_fixes, reprocessed

SEED = 20_231_001
FIRST_DAY, END_DAY = "2023-10-01", "2024-12-01"
DAY_S = 86_400
COLUMNS = (
    "animal", "tag", "time", "lon", "lat",
    "satellites", "radius95_m", "argos_class", "semi_major_m", "semi_minor_m", "orientation_deg",
)  # fmt: skip

PONY_GAIT = Gait(cruise_m_per_s=0.5, settle_s=20 * 3600, wander_m_per_s=0.16, memory_s=2 * 3600)
CRANE_GAIT = Gait(cruise_m_per_s=9.0, settle_s=4 * 3600, wander_m_per_s=0.45, memory_s=2 * 3600)


@dataclass(frozen=True)
class Deployment:
    """One tag on one animal.

    Attributes
    ----------
    tag : str
    start, end : str, days; end None while the tag still sends
    failed : str, optional, day on which the tag fell silent though nobody took it off
    """

    tag: str
    start: str = FIRST_DAY
    end: str | None = None
    failed: str | None = None

    @property
    def last_s(self) -> int:
        """End of what the tag reported, seconds since 1970."""
        return day_s(self.end or self.failed or END_DAY)


@dataclass(frozen=True)
class Animal:
    """One animal of the scenario.

    Attributes
    ----------
    name, species, sex : str
    summer, winter : Place, the centres of its two homes
    reports : str, ``"argos"`` or how its GPS states the error: ``"satellites"``, ``"radius95_m"``, ``""``
    every_hours : float, between fixes (Argos: on average)
    deployments : tuple of Deployment
    """

    name: str
    species: str
    sex: str
    summer: Place
    winter: Place
    reports: str
    every_hours: float
    deployments: tuple[Deployment, ...]


def _pony(number: int, sex: str, summer: Place, winter: Place, reports: str, *deployments: Deployment) -> Animal:
    tags = deployments or (Deployment(f"G{100 + number}"),)
    return Animal(f"pony-{number:02}", "moor pony", sex, summer, winter, reports, 6.0, tags)


def _crane(number: int, sex: str, summer: Place, reports: str, every_hours: float, deployment: Deployment) -> Animal:
    winter = (171.2 + 0.1 * number, 31.0)
    return Animal(f"crane-{number:02}", "tide crane", sex, summer, winter, reports, every_hours, (deployment,))


ANIMALS = (
    _pony(1, "female", (179.95, 41.07), (179.68, 40.86), "satellites"),
    _pony(2, "female", (-179.95, 41.06), (179.66, 40.88), "satellites"),
    _pony(3, "male", (-179.86, 41.12), (179.70, 40.84), "satellites"),
    _pony(4, "female", (179.80, 41.24), (179.78, 41.22), "radius95_m"),
    # The collar failed in March; a new one was put on in July.
    _pony(5, "male", (179.82, 41.30), (179.74, 41.24), "satellites",
          Deployment("G105", end="2024-03-18"), Deployment("G205", start="2024-07-02")),
    _pony(6, "female", (-179.62, 41.05), (-179.80, 40.98), "radius95_m"),
    _pony(7, "male", (-179.58, 40.99), (-179.74, 41.02), ""),
    _crane(1, "female", (-179.58, 40.99), "argos", 5.0, Deployment("A301")),
    _crane(2, "male", (-179.55, 41.02), "argos", 5.5, Deployment("A302")),
    # Fell silent over the sea and was never heard of again.
    _crane(3, "female", (-179.45, 41.08), "argos", 6.0, Deployment("A303", failed="2024-10-09")),
    _crane(4, "male", (-179.52, 41.05), "satellites", 4.0, Deployment("G304", start="2023-10-12")),
    _crane(5, "female", (-179.62, 40.97), "radius95_m", 4.0, Deployment("G305", end="2024-09-30")),
)  # fmt: skip

STAGING: Place = (176.5, 37.0)


def day_s(day: str) -> int:
    """Seconds since 1970 of the start of a day, UTC."""
    return int(datetime.fromisoformat(day).replace(tzinfo=UTC).timestamp())


def _near(place: Place, spread_deg: float, random: Random) -> Place:
    return place[0] + random.gauss(0.0, spread_deg * 1.3), place[1] + random.gauss(0.0, spread_deg)


def _pony_legs(animal: Animal, random: Random) -> list[Leg]:
    """A new grazing place every few days, about the home of the season."""
    legs: list[Leg] = []
    now_s, end_s = day_s(FIRST_DAY), day_s(END_DAY)
    while now_s < end_s:
        month = datetime.fromtimestamp(now_s, UTC).month
        home = animal.winter if month in (11, 12, 1, 2, 3) else animal.summer
        legs.append((now_s, _near(home, 0.035, random)))
        now_s += random.randrange(36, 120) * 3600
    return legs


def _crane_legs(animal: Animal, random: Random) -> list[Leg]:
    """By day to a feeding place, by night to the roost; in autumn over the sea to winter, in spring back."""
    legs: list[Leg] = []
    day = day_s(FIRST_DAY)
    away = day_s("2023-11-06") + random.randrange(8) * DAY_S, day_s("2024-03-12") + random.randrange(12) * DAY_S
    again = day_s("2024-10-04") + random.randrange(8) * DAY_S
    while day < day_s(END_DAY):
        wintering = away[0] <= day < away[1] or day >= again
        home = animal.winter if wintering else animal.summer
        if any(turn <= day < turn + 4 * DAY_S for turn in (*away, again)):
            legs.append((day, _near(STAGING, 0.05, random)))
        else:
            legs.append((day, _near(home, 0.01, random)))
            legs.append((day + 18 * 3600 + random.randrange(3600), _near(home, 0.06, random)))
        day += DAY_S
    return legs


def _silences(random: Random) -> list[tuple[int, int]]:
    """Stretches of more than a day in which nothing was received."""
    starts = [day_s(FIRST_DAY) + random.randrange(425) * DAY_S + random.randrange(DAY_S) for _ in range(4)]
    return [(start, start + random.randrange(30, 100) * 3600) for start in starts]


def fixes_of(animal: Animal) -> list[tuple[str, Fix]]:
    """Every fix of an animal with its tag, in time order."""
    random = Random(f"{SEED} {animal.name}")
    is_pony = animal.species == "moor pony"
    legs = (_pony_legs if is_pony else _crane_legs)(animal, random)
    journey = Journey(legs, day_s(END_DAY), PONY_GAIT if is_pony else CRANE_GAIT, random)
    silences = _silences(random)
    found = []
    for deployment in animal.deployments:
        start_s, end_s = day_s(deployment.start), deployment.last_s
        if animal.reports == "argos":
            fixes = argos_fixes(journey, start_s, end_s, animal.every_hours, random)
        else:
            fixes = gps_fixes(journey, start_s, end_s, animal.every_hours, animal.reports, random)
        heard = (fix for fix in fixes if not any(since <= fix.time_s < until for since, until in silences))
        found += [(deployment.tag, fix) for fix in heard]
    return found


def _row(animal: str, tag: str, fix: Fix) -> list[str]:
    time = datetime.fromtimestamp(fix.time_s, UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    lon, lat = (round(degrees, 5) for degrees in fix.place)
    cells = {"animal": animal, "tag": tag, "time": time, "lon": f"{lon:.5f}", "lat": f"{lat:.5f}", **fix.error}
    return [cells.get(column, "") for column in COLUMNS]


def _is_late(animal: str, time_s: int) -> bool:
    """Read out of the tag's memory only when the animal came back in spring."""
    return animal == "crane-04" and day_s("2024-01-08") <= time_s < day_s("2024-02-26")


def _is_corrected(animal: str, time_s: int) -> bool:
    """Reprocessed by the provider two months later."""
    return animal in ("crane-01", "crane-02") and day_s("2024-05-01") <= time_s < day_s("2024-06-01")


def track_files() -> dict[str, list[list[str]]]:
    """File name to rows: one file a month, one of late and one of corrected fixes."""
    files: dict[str, list[list[str]]] = {}
    random = Random(f"{SEED} reprocessing")
    for animal in ANIMALS:
        for tag, fix in fixes_of(animal):
            month = datetime.fromtimestamp(fix.time_s, UTC).strftime("%Y-%m")
            late = _is_late(animal.name, fix.time_s)
            name = "2024-04-tracks-late.csv" if late else f"{month}-tracks.csv"
            files.setdefault(name, []).append(_row(animal.name, tag, fix))
            if _is_corrected(animal.name, fix.time_s):
                row = _row(animal.name, tag, reprocessed(fix, random))
                files.setdefault("2024-07-tracks-corrected.csv", []).append(row)
    # Argos class Z is no position: the service refuses these two rows and says so.
    for day, lon in (("11", "-179.12345"), ("12", "171.00000")):
        cells = ["crane-02", "A302", f"2024-08-{day}T03:14:15Z", lon, "40.50000", "", "", "Z", "", "", ""]
        files["2024-08-tracks.csv"].append(cells)
    return {name: sorted(rows, key=lambda row: (row[2], row[0])) for name, rows in files.items()}


def animal_attributes() -> dict[str, dict[str, Any]]:
    """Identifier of each animal to what is sent to PUT /animals/{animal}."""
    found: dict[str, dict[str, Any]] = {}
    for animal in ANIMALS:
        is_pony = animal.species == "moor pony"
        attributes: dict[str, Any] = {
            "species": animal.species,
            "sex": animal.sex,
            "life_stage": "adult",
            "groups": ["ponies" if is_pony else "cranes", animal.sex + "s"],
            "deployments": [{"tag": each.tag, "start": each.start, "end": each.end} for each in animal.deployments],
            "longest_bridged_gap_hours": 24 if is_pony else 36,
            "post_release_window_hours": 48,
        }
        if animal.reports == "":
            attributes["default_error_sd_m"] = 25
        found[animal.name] = attributes
    return found


def _ring(*places: Place) -> list[list[float]]:
    return [list(place) for place in (*places, places[0])]


def _zone(name: str, title: str, geometry: dict[str, Any], **properties: str) -> dict[str, Any]:
    return {"type": "Feature", "id": name, "properties": {"name": title, **properties}, "geometry": geometry}


def _polygon(*rings: list[list[float]]) -> dict[str, Any]:
    return {"type": "Polygon", "coordinates": list(rings)}


def zone_files() -> dict[str, list[dict[str, Any]]]:
    """File name to features: the network of five, and the boundary that changed half-way."""
    # Cut at ±180°, as RFC 7946 asks, with the village left out of its eastern part.
    west = [_ring((179.79, 40.97), (180.0, 40.94), (180.0, 41.18), (179.84, 41.16))]
    village = _ring((-179.93, 41.05), (-179.93, 41.08), (-179.90, 41.08), (-179.90, 41.05))
    east = [_ring((-180.0, 40.94), (-179.76, 40.98), (-179.79, 41.15), (-180.0, 41.18)), village]
    moor = {"type": "MultiPolygon", "coordinates": [west, east]}
    pasture = _ring((179.56, 40.79), (179.77, 40.80), (179.79, 40.91), (179.64, 40.94), (179.55, 40.90))
    marsh = _ring((-179.70, 40.92), (-179.50, 40.90), (-179.44, 41.01), (-179.53, 41.08), (-179.69, 41.06))
    shore = _ring((-179.60, 41.01), (-179.36, 40.98), (-179.33, 41.17), (-179.57, 41.16))
    fell = _ring((179.66, 41.25), (179.90, 41.25), (179.92, 41.44), (179.70, 41.46))
    wider_fell = _ring((179.66, 41.21), (179.93, 41.20), (179.98, 41.44), (179.70, 41.46))
    since = {"in_force_from": "2020-01-01"}
    network = [
        _zone("dateline-moor", "Dateline Moor", moor, **since),
        _zone("winter-pasture", "Winter Pasture Closure", _polygon(pasture), season="11-15/02-29", **since),
        _zone("crane-marsh", "Crane Marsh", _polygon(marsh), **since),
        _zone("east-shore", "East Shore", _polygon(shore), edges="geodesic", **since),
        _zone("north-fell", "North Fell", _polygon(fell), **since),
    ]
    changed = [_zone("north-fell", "North Fell", _polygon(wider_fell), in_force_from="2024-05-01")]
    return {"2023-09-zones.geojson": network, "2024-05-zones.geojson": changed}


def _csv_bytes(rows: list[list[str]]) -> bytes:
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(COLUMNS)
    writer.writerows(rows)
    return text.getvalue().encode()


def _json_bytes(value: object) -> bytes:
    return (json.dumps(value, indent=1) + "\n").encode()


def made_files() -> Iterator[tuple[str, bytes]]:
    """Name and content of every file of the demo data."""
    yield "2023-09-animals.json", _json_bytes(animal_attributes())
    for name, features in zone_files().items():
        yield name, _json_bytes({"type": "FeatureCollection", "features": features})
    for name, rows in sorted(track_files().items()):
        yield name, _csv_bytes(rows)


def main(say: Callable[[str], object] = print) -> int:
    """Write the files beside this script."""
    for name, content in made_files():
        (Path(__file__).parent / name).write_bytes(content)
        say(f"{name}: {len(content):,} bytes")
    return 0


if __name__ == "__main__":
    sys.exit(main())
