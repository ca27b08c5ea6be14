"""Values that anyone can look up or derive, each with its source, asked of the estimators themselves."""

import math

import numpy as np
import pytest
from scipy.special import ndtr

from estimators import (
    Track,
    Zone,
    ZoneShape,
    ZoneUseOptions,
    covariance_from_radius,
    estimate_zone_use,
    gaussian_mass_in_polygon,
)
from estimators.brownian_bridge import BrownianBridge
from estimators.frames import MEAN_RADIUS_M, WGS84, earth_centred_m
from estimators.gaussian_path import covered_steps, path_between_fixes
from tests.estimators.simulated import START_MS, box, whole_span

FAR = 60.0
DAY_MS = 86_400_000
HOUR_MS = 3_600_000


def mass(ring, *, mean=(0.0, 0.0), covariance=((1.0, 0.0), (0.0, 1.0))):
    closed = np.array([*ring, ring[0]], dtype=float)
    return float(gaussian_mass_in_polygon(np.array([mean], dtype=float), np.array([covariance]), [closed])[0])


def ellipse(half_x, half_y, corners=4000):
    """Polygon of the area of an ellipse."""
    angles = 2.0 * np.pi * np.arange(corners) / corners
    swell = math.sqrt((2.0 * math.pi / corners) / math.sin(2.0 * math.pi / corners))
    return list(zip(swell * half_x * np.cos(angles), swell * half_y * np.sin(angles), strict=True))


# --- circular and elliptical normals -------------------------------------------------------------------------


@pytest.mark.parametrize(("radius", "share"), [(1, 0.393469), (math.sqrt(2), 0.632121), (2, 0.864665), (3, 0.988891)])
def test_share_of_a_circular_normal_within_a_radius(radius, share):
    """1 - exp(-r²/2) (derived; the Rayleigh distribution)."""
    assert mass(ellipse(radius, radius)) == pytest.approx(share, abs=1e-6)


@pytest.mark.parametrize(("share", "radius"), [(0.5, 1.177410), (0.9, 2.145966), (0.95, 2.447747), (0.99, 3.034854)])
def test_radius_of_a_share_of_a_circular_normal(share, radius):
    """√(-2 ln(1 - p)) (derived; 1.177 for one half is the circular error probable of Bowditch's tables)."""
    assert mass(ellipse(radius, radius)) == pytest.approx(share, abs=1e-6)


@pytest.mark.parametrize(("share", "radius"), [(0.68, 1.509592), (0.682689, 1.515173)])
def test_radius_of_68_percent(share, radius):
    """√(-2 ln(1 - p)) at 0.68 and at Φ(1) - Φ(-1) (derived): two readings of "68 %", 0.4 % apart."""
    assert mass(ellipse(radius, radius)) == pytest.approx(share, abs=1e-6)
    stated = covariance_from_radius("radius68_m", np.array([1509.592]))
    assert math.sqrt(stated[0, 0]) == pytest.approx(1000.0, abs=1e-3)


@pytest.mark.parametrize(("variance_in_rmse2", "radius"), [(0.5, 1.7308), (1.0, 2.4477)])
def test_95_percent_accuracy_of_a_position(variance_in_rmse2, radius):
    """1.7308 RMSE_r and 2.4477 RMSE_x hold 95 % (FGDC-STD-007.3-1998, from memory)."""
    sd = math.sqrt(variance_in_rmse2)
    assert mass(ellipse(radius / sd, radius / sd)) == pytest.approx(0.95, abs=1e-5)


@pytest.mark.parametrize(("share", "quantile"), [(0.5, 1.386294), (0.9, 4.605170), (0.95, 5.991465), (0.99, 9.210340)])
def test_chi_square_with_two_degrees_of_freedom(share, quantile):
    """Quantiles of chi-square, 2 df (tables; -2 ln(1 - p)), on a tilted normal: its ellipse of that size."""
    covariance = np.array([[4.0, 1.2], [1.2, 1.0]])
    circle = np.array(ellipse(math.sqrt(quantile), math.sqrt(quantile)))
    ring = circle @ np.linalg.cholesky(covariance).T
    assert mass(ring, covariance=covariance) == pytest.approx(share, abs=1e-6)


@pytest.mark.parametrize(("share", "quantile"), [(0.95, 3.841459), (0.99, 6.634897)])
def test_chi_square_with_one_degree_of_freedom(share, quantile):
    """Quantiles of chi-square, 1 df (tables): a strip of that half-width."""
    half = math.sqrt(quantile)
    assert mass([(-half, -FAR), (half, -FAR), (half, FAR), (-half, FAR)]) == pytest.approx(share, abs=1e-6)


@pytest.mark.parametrize(("share", "area_in_sd2"), [(0.95, 18.822741), (0.50, 4.355172)])
def test_area_of_an_isopleth(share, area_in_sd2):
    """-2π ln(1 - p) σ₁σ₂ (derived): the ellipse of that area holds the share."""
    scale = math.sqrt(area_in_sd2 / math.pi)
    assert mass(ellipse(3.0 * scale, 0.5 * scale), covariance=((9.0, 0.0), (0.0, 0.25))) == pytest.approx(
        share, abs=1e-6
    )


def test_mass_share_is_not_area_share():
    """Beyond an edge at half a standard deviation lie Φ(-0.5) = 0.308538 of the mass (tables), not 0.238 as of area."""
    beyond = mass([(0.5, -FAR), (FAR, -FAR), (FAR, FAR), (0.5, FAR)])
    assert beyond == pytest.approx(0.308538, abs=1e-6)
    assert beyond == pytest.approx(float(ndtr(-0.5)), abs=2e-8)


# --- Owen's T: the mass of {x > h, 0 < y < a x} ---------------------------------------------------------------


def owens_wedge(h, a):
    return mass([(h, 0.0), (FAR, 0.0), (FAR, a * FAR), (h, a * h)])


@pytest.mark.parametrize(
    ("h", "a", "expected"),
    [
        (0.0625, 0.25, 0.0389119302347),
        (6.5, 0.4375, 2.00057730485e-11),
        (7.0, 0.96875, 6.39906271939e-13),
        (4.78125, 0.0625, 1.06329748047e-7),
        (2.0, 0.5, 0.00862507798552),
        (1.0, 0.9999975, 0.0667418089782),
        (0.5, 0.5, 0.0644886028475),
        (0.5, 2.0, 0.141580603654),
        (1.0, 2.0, 0.0784681869931),
    ],
)
def test_owens_t(h, a, expected):
    """Test set of Patefield and Tandy 2000 (J. Stat. Softw. 5(5); from memory, recomputed); the last three derived.

    The two smallest are nothing at the stated accuracy of a mass, 2e-8, and must come out so.
    """
    assert owens_wedge(h, a) == pytest.approx(expected, abs=1e-8)


def test_identities_of_owens_t():
    """T(h, 1) = Φ(h)(1 - Φ(h))/2; T(0, a) = atan(a)/2π; even in h, odd in a (Owen 1956)."""
    for h in (0.3, 1.0, 2.2):
        assert owens_wedge(h, 1.0) == pytest.approx(0.5 * ndtr(h) * ndtr(-h), abs=1e-8)
    for a in (0.2, 1.0, 5.0):
        assert mass([(0, 0), (FAR, 0), (FAR, a * FAR)]) == pytest.approx(math.atan(a) / (2 * math.pi), abs=1e-8)
    left = mass([(-1.0, 0.0), (-1.0, 0.7), (-FAR, 0.7 * FAR), (-FAR, 0.0)])
    below = mass([(1.0, 0.0), (1.0, -0.7), (FAR, -0.7 * FAR), (FAR, 0.0)])
    assert left == pytest.approx(owens_wedge(1.0, 0.7), abs=1e-9)
    assert abs(below) == pytest.approx(owens_wedge(1.0, 0.7), abs=1e-9)


# --- Brownian bridges -------------------------------------------------------------------------------------------


def bridge_path(sd_m, variance_m2_per_s, duration_s):
    lon, lat = np.array([5.0, 5.0]), np.array([0.0, 0.0])
    errors = np.array([[s * s, 0.0, s * s] for s in sd_m])
    track = Track.from_fixes(np.array([0, duration_s * 1000]), lon, lat, errors, np.zeros(2, bool))
    steps = covered_steps(track, 1e12)
    marginals = BrownianBridge(track, 1e12).marginals(variance_m2_per_s)
    return path_between_fixes(track, steps, marginals, variance_m2_per_s, 1.0)


def time_mean(path):
    return path.covariance_m2[0, 0, 0] + path.covariance_m2[0, 1, 0] / 2.0 + path.covariance_m2[0, 2, 0] / 3.0


@pytest.mark.parametrize("share", [0.1, 0.5, 0.8])
def test_variance_of_a_bridge(share):
    """σ²Tα(1 - α), in the middle σ²T/4, on average σ²T/6 (derived; Horne et al. 2007)."""
    path = bridge_path((1e-6, 1e-6), 3.0, 7200)
    assert path.covariance_at_m2(0, share)[0, 0] == pytest.approx(3.0 * 7200 * share * (1 - share), rel=1e-9)
    assert path.covariance_at_m2(0, 0.5)[1, 1] == pytest.approx(3.0 * 7200 / 4.0, rel=1e-9)
    assert time_mean(path) == pytest.approx(3.0 * 7200 / 6.0, rel=1e-9)


def test_time_mean_of_the_errors_of_the_ends():
    """(δ₁² + δ₂²)/3 for two independent ends (derived from Horne et al. 2007, Appendix A)."""
    assert time_mean(bridge_path((30.0, 60.0), 1e-12, 3600)) == pytest.approx((900.0 + 3600.0) / 3.0, rel=1e-9)


def test_variance_judged_from_equal_steps_and_residuals():
    """Residual d at every left-out fix, no error: σ² = d²/Δt, 166.667 m²/min; 244.949 m in the middle of 24 h."""
    lon, lat, _ = WGS84.fwd(np.zeros(5), np.zeros(5), np.full(5, 90.0), np.array([0.0, 100.0, 0.0, 100.0, 0.0]))
    track = Track.from_fixes(np.arange(5) * HOUR_MS, lon, lat, np.tile([1e-6, 0.0, 1e-6], (5, 1)), np.zeros(5, bool))
    bridge = BrownianBridge(track, 10 * HOUR_MS)
    variances = np.linspace(2.0, 4.0, 20001)
    best = variances[int(np.argmax([bridge.log_likelihood(v) for v in variances]))]
    assert best * 60.0 == pytest.approx(166.667, abs=0.01)
    middle = bridge_path((1e-6, 1e-6), best, 86400).covariance_at_m2(0, 0.5)
    assert math.sqrt(middle[0, 0]) == pytest.approx(244.949, abs=0.01)


UNIT_M = 500.0


def share_of_bridge(zone, start, end):
    """Mean share of a bridge with σ²T = 1 (in units of 500 m) inside a zone; ends exact, in units east of 5° E."""
    lon, lat, _ = WGS84.fwd([5.0, 5.0], [0.0, 0.0], [90.0, 90.0], [start * UNIT_M, end * UNIT_M])
    track = Track.from_fixes(
        np.array([START_MS, START_MS + HOUR_MS]),
        np.array(lon),
        np.array(lat),
        np.tile([1e-6, 0.0, 1e-6], (2, 1)),
        np.zeros(2, bool),
    )
    fixed = {"movement_variance_m2_per_s": [UNIT_M**2 / 3600.0], "weight": [1.0], "median_m2_per_s": 1.0, "log_sd": 0.0}
    options = ZoneUseOptions(estimator="brownian_bridge")
    return estimate_zone_use(track, whole_span(track), [zone], options, fixed).rows[0].probability_mass


def beyond_edge(distance):
    """Everything east of an edge so many units east of 5° E."""
    west, _, _ = WGS84.fwd(5.0, 0.0, 90.0, distance * UNIT_M)
    return box(west, -1.0, 7.0, 1.0)


def test_bridge_on_an_edge_is_half_inside():
    """The share of a bridge from an edge to itself on one side is uniform, mean one half (Lévy; derived)."""
    assert share_of_bridge(beyond_edge(0.0), 0.0, 0.0) == pytest.approx(0.5, abs=1e-6)


@pytest.mark.parametrize(("distance", "expected"), [(0.25, 0.247901), (0.5, 0.104420), (1.0, 0.010642)])
def test_bridge_beside_an_edge(distance, expected):
    """½exp(-2b²) - √(2π) b Φ(-2b) (derived by quadrature and in closed form)."""
    assert share_of_bridge(beyond_edge(distance), 0.0, 0.0) == pytest.approx(expected, abs=2e-6)


@pytest.mark.parametrize(("start", "end", "expected"), [(-0.5, -1.0, 0.041621), (-0.5, 1.0, 0.628954)])
def test_bridge_towards_and_across_an_edge(start, end, expected):
    """Mean share beyond the edge, from half a unit this side to one unit this or that side (derived)."""
    assert share_of_bridge(beyond_edge(0.0), start, end) == pytest.approx(expected, abs=2e-6)


@pytest.mark.parametrize(("radius", "expected"), [(0.25, 0.236625), (0.5, 0.570585), (1.0, 0.933457)])
def test_bridge_within_a_circle(radius, expected):
    """Mean share of a plane bridge from a place to itself within a radius of it (derived by quadrature)."""
    swell = math.sqrt((2.0 * math.pi / 720) / math.sin(2.0 * math.pi / 720))
    azimuth = -0.5 * np.arange(720)
    lon, lat, _ = WGS84.fwd(np.full(720, 5.0), np.zeros(720), azimuth, np.full(720, swell * radius * UNIT_M))
    ring = np.column_stack([lon, lat]).tolist()
    disc = Zone(ZoneShape.from_geojson({"type": "Polygon", "coordinates": [[*ring, ring[0]]]}))
    assert share_of_bridge(disc, 0.0, 0.0) == pytest.approx(expected, abs=2e-6)


# --- the ellipsoid and what an edge means ---------------------------------------------------------------------


def area_m2(zone):
    """Area inside the boundaries that the kernels use, their pieces taken as geodesics."""
    total = 0.0
    for edges in zone.shape.boundaries:
        for root in edges.root[: edges.level_first_root[1]]:
            places = edges.vertices_m[edges.node_first[root] : edges.node_last[root] + 1]
            lon = np.degrees(np.arctan2(places[:, 1], places[:, 0]))
            horizontal = np.hypot(places[:, 0], places[:, 1])
            lat = np.degrees(np.arctan2(places[:, 2], horizontal * (1.0 - 0.00669437999014)))
            total += WGS84.polygon_area_perimeter(lon, lat)[0]
    return total


def ring_zone(ring, edges="straight"):
    return Zone(ZoneShape.from_geojson({"type": "Polygon", "coordinates": [ring]}, edges))


def corners(west, south, east, north):
    return [[west, south], [east, south], [east, north], [west, north], [west, south]]


def test_axes_of_the_ellipsoid():
    """WGS 84: a = 6378137 m, 1/f = 298.257223563, b = 6356752.314245 m; mean radius 6371008.7714 m."""
    equator, pole = earth_centred_m(np.array([0.0, 0.0]), np.array([0.0, 90.0]))
    assert equator == pytest.approx([6378137.0, 0.0, 0.0], abs=1e-6)
    assert pole == pytest.approx([0.0, 0.0, 6356752.314245], abs=1e-6)
    assert 1.0 - (pole[2] / equator[0]) ** 2 == pytest.approx(0.00669437999014, abs=1e-14)
    assert (2.0 * equator[0] + pole[2]) / 3.0 == pytest.approx(MEAN_RADIUS_M, abs=1e-4)


def test_area_of_an_octant_and_of_the_whole():
    """Octant 63758202715511.06 m²; eight of them 510065621.724 km² (WGS 84; derived), edges followed by 2 km chords."""
    octant = area_m2(ring_zone([[0, 0], [90, 0], [0, 90], [0, 0]], "geodesic"))
    assert octant == pytest.approx(63758202715511.06, rel=3e-8)
    assert 8.0 * octant / 1e6 == pytest.approx(510065621.724, rel=3e-8)


@pytest.mark.parametrize(
    ("lat", "km2"),
    [(0, 12308.4639), (30, 10642.3934), (45, 8686.4950), (60, 6123.1409), (80, 2058.2749)],
)
def test_area_between_parallels(lat, km2):
    """1° cells (derived by series and by an equal-area projection): straight edges follow the parallel."""
    assert area_m2(ring_zone(corners(8, lat, 9, lat + 1))) / 1e6 == pytest.approx(km2, abs=2e-4)


def test_area_of_a_polar_cap():
    """North of 80°: 3908572.762 km² (derived)."""
    cap = ring_zone([[lon, 80] for lon in (0, 90, 180, -90, 0)])
    assert area_m2(cap) / 1e6 == pytest.approx(3908572.762, abs=0.01)


@pytest.mark.parametrize(("edges", "m2"), [("geodesic", 12305128751.04), ("straight", 12304814950.07)])
@pytest.mark.parametrize("west", [8.5, 179.5])
def test_area_of_a_square_here_and_across_the_antimeridian(west, edges, m2):
    """1–2° N, one degree wide, geodesic edges against parallels (derived); the same across ±180°."""
    found = area_m2(ring_zone(corners(west, 1, west + 1, 2), edges))
    assert found == pytest.approx(m2, abs=60.0)


@pytest.mark.parametrize(("edges", "km2"), [("geodesic", 61033.52), ("straight", 61231.41)])
def test_the_meaning_of_an_edge_matters(edges, km2):
    """0–10° E, 60–61° N: 0.32 % between geodesic and straight edges (derived)."""
    assert area_m2(ring_zone(corners(0, 60, 10, 61), edges)) / 1e6 == pytest.approx(km2, abs=0.01)


def test_flinders_peak_to_buninyong():
    """54972.271 m, azimuths 306°52'05.37" and 127°10'25.07" (worked example of the Australian geodetic manual)."""

    def degrees(d, m, s):
        return math.copysign(abs(d) + m / 60 + s / 3600, d)

    from_lon, from_lat = degrees(144, 25, 29.52440), degrees(-37, 57, 3.72030)
    to_lon, to_lat = degrees(143, 55, 35.38390), degrees(-37, 39, 10.15610)
    azimuth, back, length = WGS84.inv(from_lon, from_lat, to_lon, to_lat)
    assert length == pytest.approx(54972.271, abs=5e-4)
    assert azimuth % 360 == pytest.approx(degrees(306, 52, 5.37), abs=2e-6)
    assert back % 360 == pytest.approx(degrees(127, 10, 25.07), abs=2e-6)


# --- time ------------------------------------------------------------------------------------------------------


def test_months_weigh_by_their_covered_time():
    """30 days all inside, 3 days all outside: 0.909091 of the time, not the mean 0.5 of the months (derived)."""
    june_ms = START_MS + 151 * DAY_MS
    # In June at one place, then a gap too long to bridge, then three days at another.
    days = np.concatenate([np.arange(0.0, 30.01, 0.5), np.arange(31.5, 34.51, 0.5)])
    n = len(days)
    track = Track.from_fixes(
        june_ms + (days * DAY_MS).astype(np.int64),
        np.where(days <= 30.0, 5.0, 8.0),
        np.zeros(n),
        np.tile([25.0, 0.0, 25.0], (n, 1)),
        np.zeros(n, bool),
    )
    use = estimate_zone_use(track, whole_span(track), [box(4, -1, 6, 1)], ZoneUseOptions())
    hours = np.array([facts.covered_hours for facts in use.months])
    masses = {row.month: row.probability_mass for row in use.rows}
    months = np.array([masses.get(facts.month, 0.0) for facts in use.months])
    assert hours.tolist() == [720.0, 72.0]
    assert hours @ months / hours.sum() == pytest.approx(0.909091, abs=1e-6)
    assert months.mean() == pytest.approx(0.5, abs=1e-6)
