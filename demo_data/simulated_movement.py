"""Simulated animals on a sphere, and what their tags report of them.

Plain Python with a seeded generator and rounded coordinates, so that every machine makes the same files.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from random import Random

from estimators import ARGOS_RADIUS68_M, SATELLITES_RADIUS95_M

EARTH_RADIUS_M = 6_371_008.8
STEP_S = 1800
# Radius over standard deviation of a circular normal, for the shares 68 % and 95 %.
RADIUS68_IN_SD = math.sqrt(-2.0 * math.log(1.0 - 0.68))
RADIUS95_IN_SD = math.sqrt(-2.0 * math.log(1.0 - 0.95))

ARGOS_CLASSES = ("3", "2", "1", "0", "A", "B")
ARGOS_WEIGHTS = (14, 18, 20, 8, 18, 22)
SATELLITE_COUNTS = (4, 5, 6, 7, 8, 9, 10)
SATELLITE_WEIGHTS = (3, 6, 10, 16, 22, 23, 20)

Place = tuple[float, float]
"""Longitude and latitude, degrees."""
Leg = tuple[int, Place]
"""From this time on (seconds since 1970) the animal heads for that place."""


@dataclass(frozen=True)
class Gait:
    """How an animal moves.

    Attributes
    ----------
    cruise_m_per_s : float, speed towards a far place
    settle_s : float, time in which a near place is approached
    wander_m_per_s : float, standard deviation of the velocity about that, per axis
    memory_s : float, time over which the velocity is remembered
    """

    cruise_m_per_s: float
    settle_s: float
    wander_m_per_s: float
    memory_s: float


@dataclass(frozen=True)
class Fix:
    """One reported location.

    Attributes
    ----------
    time_s : int, seconds since 1970-01-01 UTC
    place : Place, as reported
    true_place : Place
    error : dict, column of the tracks file to text
    """

    time_s: int
    place: Place
    true_place: Place
    error: dict[str, str]


def moved(place: Place, east_m: float, north_m: float) -> Place:
    """Place reached from another along a great circle, by its first east and north metres."""
    angle = math.hypot(east_m, north_m) / EARTH_RADIUS_M
    if angle == 0.0:
        return place
    bearing = math.atan2(east_m, north_m)
    lat = math.radians(place[1])
    sin_lat = math.sin(lat) * math.cos(angle) + math.cos(lat) * math.sin(angle) * math.cos(bearing)
    turn = math.atan2(math.sin(bearing) * math.sin(angle) * math.cos(lat), math.cos(angle) - math.sin(lat) * sin_lat)
    lon_deg = place[0] + math.degrees(turn)
    return (lon_deg + 180.0) % 360.0 - 180.0, math.degrees(math.asin(sin_lat))


def _way(place: Place, goal: Place) -> tuple[float, float]:
    """East and north metres of the great circle from one place to another."""
    lat, goal_lat = math.radians(place[1]), math.radians(goal[1])
    across = math.radians(goal[0] - place[0])
    east = math.sin(across) * math.cos(goal_lat)
    north = math.cos(lat) * math.sin(goal_lat) - math.sin(lat) * math.cos(goal_lat) * math.cos(across)
    along = math.sin(lat) * math.sin(goal_lat) + math.cos(lat) * math.cos(goal_lat) * math.cos(across)
    size = math.hypot(east, north)
    if size < 1e-12:
        return 0.0, 0.0
    distance_m = EARTH_RADIUS_M * math.atan2(size, along)
    return distance_m * east / size, distance_m * north / size


class Journey:
    """True positions of one animal, from the first leg's place on, in steps of `STEP_S`."""

    def __init__(self, legs: list[Leg], end_s: int, gait: Gait, random: Random) -> None:
        self._start_s = legs[0][0]
        self._places: list[Place] = []
        self._velocities: list[tuple[float, float]] = []
        keep = math.exp(-STEP_S / gait.memory_s)
        noise = gait.wander_m_per_s * math.sqrt(1.0 - keep * keep)
        place, east, north, leg = legs[0][1], 0.0, 0.0, 0
        for now_s in range(self._start_s, end_s + STEP_S, STEP_S):
            while leg + 1 < len(legs) and legs[leg + 1][0] <= now_s:
                leg += 1
            to_east, to_north = _way(place, legs[leg][1])
            slower = min(1.0 / gait.settle_s, gait.cruise_m_per_s / max(1.0, math.hypot(to_east, to_north)))
            east = keep * east + (1.0 - keep) * to_east * slower + noise * random.gauss(0.0, 1.0)
            north = keep * north + (1.0 - keep) * to_north * slower + noise * random.gauss(0.0, 1.0)
            self._places.append(place)
            self._velocities.append((east, north))
            place = moved(place, east * STEP_S, north * STEP_S)

    def at(self, time_s: int) -> Place:
        """True position at a time within the journey."""
        step, part_s = divmod(time_s - self._start_s, STEP_S)
        east, north = self._velocities[step]
        return moved(self._places[step], east * part_s, north * part_s)


def _reported(journey: Journey, time_s: int, sd_m: float, error: dict[str, str], random: Random) -> Fix:
    true_place = journey.at(time_s)
    place = moved(true_place, random.gauss(0.0, sd_m), random.gauss(0.0, sd_m))
    return Fix(time_s, place, true_place, error)


def gps_fixes(
    journey: Journey, start_s: int, end_s: int, every_hours: float, states: str, random: Random
) -> Iterator[Fix]:
    """Fixes of a GPS tag: regular, some missed.

    Parameters
    ----------
    journey : Journey
    start_s, end_s : int, seconds since 1970
    every_hours : float
    states : {"satellites", "radius95_m", ""}, how the tag states its error, if at all
    random : Random
    """
    for due_s in range(start_s, end_s, int(every_hours * 3600)):
        time_s = due_s + random.randrange(5, 90)
        if random.random() < 0.06 or time_s >= end_s:
            continue
        count = random.choices(SATELLITE_COUNTS, SATELLITE_WEIGHTS)[0]
        radius95_m = SATELLITES_RADIUS95_M[count]
        stated = {"satellites": str(count), "radius95_m": f"{radius95_m:.1f}"}
        error = {states: stated[states]} if states else {}
        yield _reported(journey, time_s, radius95_m / RADIUS95_IN_SD, error, random)


def argos_fixes(journey: Journey, start_s: int, end_s: int, mean_hours: float, random: Random) -> Iterator[Fix]:
    """Fixes of an Argos tag: irregular, with a class each.

    Parameters
    ----------
    journey : Journey
    start_s, end_s : int, seconds since 1970
    mean_hours : float, mean time between fixes
    random : Random
    """
    time_s = start_s
    while True:
        time_s += 900 + int(random.expovariate(1.0 / (mean_hours * 3600.0 - 900.0)))
        if time_s >= end_s:
            return
        name = random.choices(ARGOS_CLASSES, ARGOS_WEIGHTS)[0]
        yield _reported(journey, time_s, ARGOS_RADIUS68_M[name] / RADIUS68_IN_SD, {"argos_class": name}, random)


def reprocessed(fix: Fix, random: Random) -> Fix:
    """The same Argos fix after the provider's delayed smoothing: nearer to the truth, with an error ellipse."""
    semi_major_m = random.randrange(600, 3000)
    semi_minor_m = random.randrange(200, semi_major_m)
    orientation_deg = random.randrange(180)
    # The semi-axes of an Argos ellipse are √2 standard deviations.
    along_m = random.gauss(0.0, semi_major_m / math.sqrt(2.0))
    across_m = random.gauss(0.0, semi_minor_m / math.sqrt(2.0))
    sin, cos = math.sin(math.radians(orientation_deg)), math.cos(math.radians(orientation_deg))
    place = moved(fix.true_place, along_m * sin + across_m * cos, along_m * cos - across_m * sin)
    error = {
        "semi_major_m": str(semi_major_m),
        "semi_minor_m": str(semi_minor_m),
        "orientation_deg": str(orientation_deg),
    }
    return Fix(fix.time_s, place, fix.true_place, error)
