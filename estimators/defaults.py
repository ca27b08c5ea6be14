"""Named constants of the estimators, each with unit and source."""

from __future__ import annotations

from typing import Final

ESTIMATES_VERSION: Final = 1
"""Raised by hand whenever a change of the code changes a number that is reported."""

DEFAULT_LOCATION_ERROR_SD_M: Final = 43.6
"""Per-axis standard deviation of a fix without any error statement, metres.

95 % radius of conventional GPS collars over all sites, 106.8 m (Lewis et al. 2007, abstract), divided by
2.4477. A fix that uses it is flagged ``assumed_error``.
"""

DEFAULT_LONGEST_BRIDGED_GAP_HOURS: Final = 24.0
"""Longest time between two fixes that is still bridged, hours.

Our choice: most animals repeat themselves daily, so a silence of up to one day has a fix on either side of
each part of the day; a longer one hides whole days, and what happened in them is not known.
"""

DEFAULT_MINIMUM_STAY_HOURS: Final = 1.0
"""Shortest stay inside a zone that is counted as a visit, hours.

Our choice. A path of Brownian character crosses an edge infinitely often once it touches it, so a number of
visits has no meaning without a stated minimum duration.
"""

MOVEMENT_VARIANCE_PRIOR_MEDIAN_M2_PER_S: Final = 1.0
MOVEMENT_VARIANCE_PRIOR_LOG_SD: Final = 4.7
"""Prior of the movement variance: log-normal, median 1 m²/s, standard deviation 4.7 of the natural logarithm.

Its central 95 % reaches from 1e-4 m²/s (about 0.8 m per hour and axis) to 1e4 m²/s (about 6 km per hour and
axis): from a tortoise to a bird on passage. It is proper, so that two fixes already give an answer, and so
wide that a few dozen fixes outweigh it.
"""

NARROWEST_RATIO: Final = 1e-7
"""An error ellipse narrower than this, minor over major axis, is refused: the smoother would lose its digits."""

INTEGRATION_LIMIT: Final = 9e-7
"""Largest error that the time integral of a zone mass may have, as a share of the covered time."""

EDGE_REACH_SD: Final = 6.0
"""Edges further away than this many standard deviations are left out: at most exp(-6²/2) = 1.6e-8 lost."""

EDGE_DEVIATION_FINEST_M: Final = 1e-4
EDGE_DEVIATION_SD_SHARE: Final = 2e-5
"""A curved edge becomes straight pieces within this share of the path's standard deviation of it.

The finest pieces are within a tenth of a millimetre. Moving a straight edge by s metres changes the mass by at
most s/(√(2π)·σ), so the pieces change it by less than 1e-5 at the very moment when the animal is on the edge.
"""

LONGEST_STEP_M: Final = 100_000.0
"""A step between fixes longer than this is cut into parts along its geodesic, each with its own frame."""

WIDE_SPREAD_SD_M: Final = 50_000.0
"""Spread of a path, as standard deviation or distance from the straight path, above which a row is flagged.

Further out the plane frame of a step bends masses by more than about 1e-5.
"""

WIDEST_SPREAD_M: Final = 5e5
"""Largest standard deviation of a path, and distance of its mean from the straight path, metres.

A plane frame can hold no more of the globe: within 6 of them, no zone or piece of one reaches the antipode. Larger
ones, as from fixes that jump to the other side of the Earth, are taken as this wide; the row is flagged
``wide_spread``.
"""

TRIVIAL_NUMERICAL_ERROR: Final = 2e-8
"""Numerical error of a mass that is 0 or 1 because no edge is in reach."""
