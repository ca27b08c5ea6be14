"""Every way of stating a location error, turned into a 2×2 covariance by one rule each.

A covariance is returned as ``[east variance, east-north covariance, north variance]`` in square metres, in the
east and north axes at the fix.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from types import MappingProxyType
from typing import Final

import numpy as np
from numpy.typing import NDArray

from estimators.defaults import NARROWEST_RATIO
from estimators.errors import LocationErrorStatementError

FloatArray = NDArray[np.float64]

ERROR_KINDS: Final[Mapping[str, tuple[str, ...]]] = MappingProxyType(
    {
        "sd_m": ("sd_m",),
        "radius50_m": ("radius50_m",),
        "radius68_m": ("radius68_m",),
        "radius95_m": ("radius95_m",),
        "argos_class": ("argos_class",),
        "ellipse": ("semi_major_m", "semi_minor_m", "orientation_deg"),
        "satellites": ("satellites",),
    }
)
"""Name of each way of stating an error, and the columns that state it."""

# Share of a circular normal inside radius r: p = 1 - exp(-r²/2σ²), so r/σ = √(-2 ln(1 - p)).
_RADIUS_IN_SD: Final = MappingProxyType(
    {
        "sd_m": 1.0,
        "radius50_m": math.sqrt(-2.0 * math.log(1.0 - 0.50)),
        "radius68_m": math.sqrt(-2.0 * math.log(1.0 - 0.68)),
        "radius95_m": math.sqrt(-2.0 * math.log(1.0 - 0.95)),
    }
)

ARGOS_RADIUS68_M: Final = MappingProxyType(
    {"G": 100.0, "3": 490.0, "2": 1010.0, "1": 1200.0, "0": 4180.0, "A": 6190.0, "B": 10280.0}
)
"""68 % radius of each Argos class, metres.

Classes 3 to B: free-ranging pinnipeds carrying GPS as well, Costa et al. 2010 (values in the abstract). Class G
(a GPS position sent through Argos): "better than 100 m" of the system's user manual, read as a 68 % radius.
"""

SATELLITES_RADIUS95_M: Final = MappingProxyType({4: 630.0, 5: 140.0, 6: 70.0, 7: 50.0, 8: 39.6, 9: 35.0, 10: 31.0})
"""95 % radius by number of satellites of a fast-acquisition receiver, metres (manufacturer's report, 2007).

The 95 % radius is used, not the smaller one that the 50 % radius would give: the errors have heavy tails.
"""


def covariance_from_radius(kind: str, value_m: FloatArray) -> FloatArray:
    """Covariance of a circular error stated as a standard deviation or as a radius holding a share.

    Parameters
    ----------
    kind : {"sd_m", "radius50_m", "radius68_m", "radius95_m"}
    value_m : ndarray, shape (n,), metres, positive

    Returns
    -------
    ndarray, shape (n, 3), square metres

    Raises
    ------
    LocationErrorStatementError
        A value is not a positive number.

    Notes
    -----
    The radius holding the share p of a circular normal is σ·√(-2 ln(1-p)).
    """
    values = np.asarray(value_m, dtype=np.float64)
    _check_positive(kind, values)
    variance_m2 = (values / _RADIUS_IN_SD[kind]) ** 2
    return np.stack([variance_m2, np.zeros_like(variance_m2), variance_m2], axis=-1)


def covariance_from_argos_class(classes: Sequence[str]) -> FloatArray:
    """Covariance of Argos positions by class, from the 68 % radii in `ARGOS_RADIUS68_M`.

    Parameters
    ----------
    classes : sequence of str, length n
        G, 3, 2, 1, 0, A or B. Class Z is no position and is refused.

    Returns
    -------
    ndarray, shape (n, 3), square metres

    Raises
    ------
    LocationErrorStatementError
        A class is unknown, or Z.
    """
    for name in classes:
        if name == "Z":
            raise LocationErrorStatementError(
                "invalid_argos_position",
                "Argos class Z marks a position that the system itself calls invalid. Leave this fix out.",
            )
        if name not in ARGOS_RADIUS68_M:
            raise LocationErrorStatementError(
                "unknown_argos_class",
                f"Unknown Argos class {name[:20]!r}. Use one of G, 3, 2, 1, 0, A, B.",
            )
    radius_m = np.array([ARGOS_RADIUS68_M[name] for name in classes], dtype=np.float64)
    return covariance_from_radius("radius68_m", radius_m)


def covariance_from_ellipse(
    semi_major_m: FloatArray, semi_minor_m: FloatArray, orientation_deg: FloatArray
) -> FloatArray:
    """Covariance of an Argos error ellipse.

    Parameters
    ----------
    semi_major_m, semi_minor_m : ndarray, shape (n,), metres, positive
    orientation_deg : ndarray, shape (n,), degrees clockwise from north of the major axis

    Returns
    -------
    ndarray, shape (n, 3), square metres

    Raises
    ------
    LocationErrorStatementError
        An axis is not a positive number, the axes are swapped, or the orientation is not finite.

    Notes
    -----
    The semi-axes are √2 standard deviations (McClintock et al. 2015, Methods Ecol. Evol. 6:266; from memory),
    so the ellipse holds 1 - 1/e = 63.2 % of the error.
    """
    major, minor = np.asarray(semi_major_m, np.float64), np.asarray(semi_minor_m, np.float64)
    _check_positive("semi_major_m", major)
    _check_positive("semi_minor_m", minor)
    if np.any(minor > major):
        worst = int(np.argmax(minor > major))
        raise LocationErrorStatementError(
            "swapped_axes",
            f"semi_minor_m {minor[worst]:g} is larger than semi_major_m {major[worst]:g}. Swap them.",
        )
    if not np.all(np.isfinite(orientation_deg)):
        raise LocationErrorStatementError(
            "bad_orientation", "orientation_deg is not a number. Give degrees clockwise from north."
        )
    angle = np.deg2rad(np.asarray(orientation_deg, np.float64))
    sin, cos = np.sin(angle), np.cos(angle)
    east = (major**2 * sin**2 + minor**2 * cos**2) / 2.0
    north = (major**2 * cos**2 + minor**2 * sin**2) / 2.0
    cross = (major**2 - minor**2) * sin * cos / 2.0
    return np.stack([east, cross, north], axis=-1)


def covariance_from_satellites(satellites: NDArray[np.int64]) -> FloatArray:
    """Covariance of GPS positions by number of satellites, from `SATELLITES_RADIUS95_M`.

    Parameters
    ----------
    satellites : ndarray of int, shape (n,), at least 4; more than 10 count as 10

    Returns
    -------
    ndarray, shape (n, 3), square metres

    Raises
    ------
    LocationErrorStatementError
        Fewer than 4 satellites: no published error is known for such a fix.
    """
    counts = np.asarray(satellites, dtype=np.int64)
    if np.any(counts < 4):
        raise LocationErrorStatementError(
            "too_few_satellites",
            f"satellites {int(counts.min())}: no error is published for fewer than 4 satellites. "
            "State the error of this fix as a radius or as sd_m.",
        )
    radius_m = np.array([SATELLITES_RADIUS95_M[min(int(count), 10)] for count in counts], dtype=np.float64)
    return covariance_from_radius("radius95_m", radius_m)


def usable_covariance(covariance_m2: FloatArray) -> NDArray[np.bool_]:
    """Whether covariances are finite, positive definite and not narrower than `NARROWEST_RATIO`.

    Parameters
    ----------
    covariance_m2 : ndarray, shape (n, 3), [east variance, covariance, north variance], square metres

    Returns
    -------
    ndarray of bool, shape (n,)
    """
    east, cross, north = covariance_m2.T
    # NaN compares as false.
    return np.asarray(
        (east > 0.0)
        & (east * north - cross**2 > NARROWEST_RATIO**2 * (east + north) ** 2)
        & np.all(np.isfinite(covariance_m2), axis=1)
    )


def _check_positive(name: str, values: FloatArray) -> None:
    good = np.isfinite(values) & (values > 0.0)
    if not np.all(good):
        worst = values[~good][0]
        raise LocationErrorStatementError(
            "error_not_positive",
            f"{name} {worst:g} is not a positive number of metres. Leave it empty if unknown.",
        )
