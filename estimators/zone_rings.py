"""Rings of a GeoJSON polygon: positions checked, longitudes made to run on, poles recognised."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from estimators.errors import ZoneGeometryError

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class ReadRing:
    """A closed ring as it was understood.

    Attributes
    ----------
    positions : ndarray, shape (n, 2), degrees; longitudes run on across ±180°, first position repeated last
    around_pole : bool
        The ring went once around the globe and was closed through the pole on its side.
    anticlockwise : bool
    """

    positions: FloatArray
    around_pole: bool
    anticlockwise: bool


def read_ring(ring: Any, pointer: str, notes: list[str]) -> ReadRing:
    """Read one ring of a GeoJSON polygon.

    Parameters
    ----------
    ring : list of positions, degrees
    pointer : str, JSON pointer of the ring inside the geometry
    notes : list of str, gains what was read in a way worth telling

    Raises
    ------
    ZoneGeometryError
        Positions are not numbers, out of range, too few, not closed, or an edge is too wide to know its way.
    """
    given = _checked_positions(ring, pointer)
    if np.any(np.abs(given[:, 0]) > 180.0):
        notes.append("Longitudes beyond ±180° were read as running on across the antimeridian.")
    literal = _shoelace(given)
    widths = np.diff(given[:, 0])
    full_turns = np.abs(widths) == 360.0
    lon = _running_lon(given, widths, pointer, notes, turn_is_literal=not (np.any(full_turns) and literal == 0.0))
    positions = np.column_stack([lon, given[:, 1]])
    turned = lon[-1] - lon[0]
    if abs(turned) < 180.0:
        positions[-1] = positions[0]
        _check_width(positions, pointer)
        return ReadRing(_west_most_turn(positions), False, _shoelace(positions) > 0.0)
    notes.append(f"A ring goes around the {_pole_name(positions)} pole and was closed through it.")
    return _closed_through_pole(positions)


def _checked_positions(ring: Any, pointer: str) -> FloatArray:
    if not isinstance(ring, Sequence) or isinstance(ring, str) or len(ring) < 4:
        count = len(ring) if isinstance(ring, Sequence) and not isinstance(ring, str) else 0
        raise ZoneGeometryError(
            "too_few_positions",
            f"A ring needs at least 4 positions, the last equal to the first; got {count}.",
            pointer,
        )
    for number, position in enumerate(ring):
        _check_position(position, f"{pointer}/{number}")
    positions = np.array([[position[0], position[1]] for position in ring], dtype=np.float64)
    if not np.array_equal(positions[0], positions[-1]):
        first, last = positions[0], positions[-1]
        raise ZoneGeometryError(
            "unclosed_ring",
            f"The ring is not closed: it starts at {first[0]:g}, {first[1]:g} and ends at {last[0]:g}, "
            f"{last[1]:g}. Repeat the first position at the end.",
            pointer,
            (float(last[0]), float(last[1])),
        )
    return positions


def _check_position(position: Any, pointer: str) -> None:
    good = (
        isinstance(position, Sequence)
        and not isinstance(position, str)
        and len(position) >= 2
        and all(isinstance(value, (int, float)) and not isinstance(value, bool) for value in position[:2])
    )
    if not good or not all(np.isfinite(float(value)) for value in position[:2]):
        raise ZoneGeometryError(
            "bad_position",
            f"Not a position: {str(position)[:60]}. Write [longitude, latitude] in degrees.",
            pointer,
        )
    lon, lat = float(position[0]), float(position[1])
    if abs(lat) > 90.0 or abs(lon) > 360.0:
        raise ZoneGeometryError(
            "bad_position",
            f"Longitude {lon:g}, latitude {lat:g} is no place on Earth. Write [longitude, latitude] in degrees.",
            pointer,
            (lon, lat),
        )


def _running_lon(
    given: FloatArray, widths: FloatArray, pointer: str, notes: list[str], *, turn_is_literal: bool
) -> FloatArray:
    """Longitudes with every edge taken the way it was meant; the last may differ from the first by a turn."""
    steps = widths.copy()
    wide = np.abs(widths)
    # An edge along the pole line has no length, whatever its width in degrees.
    at_pole = (np.abs(given[:-1, 1]) == 90.0) & (np.abs(given[1:, 1]) == 90.0)
    ambiguous = (wide > 180.0) & (wide < 270.0) & ~at_pole
    if np.any(ambiguous):
        k = int(np.argmax(ambiguous))
        raise ZoneGeometryError(
            "ambiguous_width",
            f"The edge from longitude {given[k, 0]:g} to {given[k + 1, 0]:g} is {wide[k]:g} degrees wide: it could "
            "go either way around. Add positions in between so that no edge is wider than 180 degrees.",
            f"{pointer}/{k}",
            (float(given[k, 0]), float(given[k, 1])),
        )
    across = (wide >= 270.0) & (wide < 360.0) & ~at_pole
    if np.any(across):
        notes.append("Edges over 270° wide were read as crossing the antimeridian the short way.")
    across |= (wide == 360.0) & (not turn_is_literal)
    steps[across] -= 360.0 * np.sign(widths[across])
    return np.concatenate([[given[0, 0]], given[0, 0] + np.cumsum(steps)])


def _check_width(positions: FloatArray, pointer: str) -> None:
    width = float(np.ptp(positions[:, 0]))
    if width > 360.0:
        raise ZoneGeometryError(
            "ambiguous_width",
            f"The ring is {width:g} degrees wide: it overlaps itself around the globe. Cut the zone into parts.",
            pointer,
        )


def _west_most_turn(positions: FloatArray) -> FloatArray:
    turns = np.floor((positions[:, 0].min() + 180.0) / 360.0)
    return np.asarray(positions - np.array([360.0 * turns, 0.0]))


def _pole_name(positions: FloatArray) -> str:
    return "north" if positions[:, 1].mean() > 0.0 else "south"


def _closed_through_pole(positions: FloatArray) -> ReadRing:
    pole_deg = 90.0 if _pole_name(positions) == "north" else -90.0
    closed = np.vstack([positions, [[positions[-1, 0], pole_deg], [positions[0, 0], pole_deg]], positions[:1]])
    return ReadRing(closed, True, _shoelace(closed) > 0.0)


def _shoelace(positions: FloatArray) -> float:
    x, y = positions[:, 0] - positions[0, 0], positions[:, 1]
    return float(0.5 * np.sum(x[:-1] * y[1:] - x[1:] * y[:-1]))
