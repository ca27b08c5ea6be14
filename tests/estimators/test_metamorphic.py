"""Properties that zone use must keep whatever the track and the zone: hypothesis draws both.

Tolerances are the stated numerical errors of the rows involved; each row's mass is rounded to nine decimals, and
that rounding is part of the stated error.
"""

import math
from dataclasses import dataclass

import numpy as np
import pytest
import shapely
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from estimators import Track, Zone, ZoneShape, ZoneUseOptions, estimate_zone_use, month_spans
from estimators.frames import WGS84, normalised_lon_deg
from tests.estimators.simulated import START_MS

HOUR_MS = 3_600_000
PROFILE = settings(max_examples=70, deadline=None, derandomize=True)
FEWER = settings(PROFILE, max_examples=35)


@dataclass(frozen=True)
class Scene:
    """A small random track of a few fixes and a star-shaped zone near it."""

    lon_deg: float
    lat_deg: float
    seed: int
    fixes: int
    sd_m: float
    step_m: float
    estimator: str

    @property
    def options(self):
        return ZoneUseOptions(estimator=self.estimator)

    def columns(self):
        """Times (irregular, in order), positions and covariances."""
        draws = np.random.default_rng(self.seed)
        time_ms = START_MS + np.cumsum(draws.integers(HOUR_MS // 4, 4 * HOUR_MS, self.fixes))
        way = np.cumsum(draws.normal(0.0, self.step_m, (self.fixes, 2)), axis=0)
        way -= way.mean(axis=0)
        lon, lat = self.place(way)
        tilt = draws.uniform(-0.8, 0.8, self.fixes)
        major, minor = self.sd_m**2 * draws.uniform(0.5, 2.0, (2, self.fixes))
        return time_ms, lon, lat, np.column_stack([major, tilt * np.sqrt(major * minor), minor])

    def track(self):
        time_ms, lon, lat, covariance = self.columns()
        return Track.from_fixes(time_ms, lon, lat, covariance, np.zeros(self.fixes, bool))

    def place(self, offsets_m):
        """Longitudes running on around the scene's own, and latitudes, of plane offsets."""
        n = len(offsets_m)
        azimuth = np.degrees(np.arctan2(offsets_m[:, 0], offsets_m[:, 1]))
        lon, lat, _ = WGS84.fwd(np.full(n, self.lon_deg), np.full(n, self.lat_deg), azimuth, np.hypot(*offsets_m.T))
        return self.lon_deg + np.mod(np.asarray(lon) - self.lon_deg + 180.0, 360.0) - 180.0, np.asarray(lat)

    def star(self, scale=1.0):
        """Ring of a star around a place near the track, longitudes running on."""
        draws = np.random.default_rng(self.seed + 1)
        corners = int(draws.integers(3, 16))
        centre = draws.normal(0.0, 1.5 * self.step_m, 2)
        angles = 2.0 * np.pi * (np.arange(corners) + draws.uniform(0.0, 0.8, corners)) / corners
        radius = draws.uniform(0.5, 4.0, corners) * (self.step_m + self.sd_m)
        lon, lat = self.place(centre + np.column_stack([np.cos(angles), np.sin(angles)]) * radius[:, None])
        middle_lon, middle_lat = self.place(centre[None, :])
        ring = np.column_stack([middle_lon + scale * (lon - middle_lon), middle_lat + scale * (lat - middle_lat)])
        return shapely.Polygon(ring)


def scenes(*, highest_lat_deg=75.0):
    return st.builds(
        Scene,
        lon_deg=st.one_of(st.sampled_from([0.0, 179.9999, -179.9999]), st.floats(-180.0, 180.0)),
        lat_deg=st.floats(-highest_lat_deg, highest_lat_deg),
        seed=st.integers(0, 10_000),
        fixes=st.integers(2, 9),
        sd_m=st.floats(1.0, 3000.0),
        step_m=st.floats(1.0, 8000.0),
        estimator=st.sampled_from(["random_walk", "random_walk", "brownian_bridge"]),
    )


def zone_of(polygon, *, from_ms=None, until_ms=None):
    return Zone(ZoneShape.from_geojson(shapely.geometry.mapping(polygon)), from_ms, until_ms)


def whole(track):
    return [(int(track.time_ms[0]), int(track.time_ms[-1]))]


def figures(track, zones, options, tracked=None):
    """Per zone: expected hours, time inside along the path, the error of the former, covered hours, over all months."""
    use = estimate_zone_use(track, whole(track) if tracked is None else tracked, zones, options)
    covered = sum(facts.covered_hours for facts in use.months)
    sums = np.zeros((len(zones), 3))
    for row in use.rows:
        if row.probability_mass is not None:
            assert 0.0 <= row.probability_mass <= 1.0
            assert 0.0 <= row.time_fraction <= 1.0
            assert row.numerical_error <= 1e-6
            sums[row.zone_index] += row.covered_hours * np.array(
                [row.probability_mass, row.time_fraction, row.numerical_error]
            )
    return sums, covered


# Rounding of hours to six decimals and of fractions to nine, per row.
ROUNDING_HOURS = 2e-6


@given(scene=scenes(), share=st.floats(0.0, 1.0))
@PROFILE
def test_the_parts_of_a_time_sum_to_the_whole(scene, share):
    """A zone in force until an instant and one from then on: expected hours and hours inside add up."""
    track, star = scene.track(), scene.star()
    start_ms, end_ms = whole(track)[0]
    cut_ms = start_ms + round(share * (end_ms - start_ms))
    zones = [zone_of(star), zone_of(star, until_ms=cut_ms), zone_of(star, from_ms=cut_ms)]
    sums, _ = figures(track, zones, scene.options)
    assert sums[0, 0] == pytest.approx(sums[1, 0] + sums[2, 0], abs=sums[:, 2].sum() + ROUNDING_HOURS)
    assert sums[0, 1] == pytest.approx(sums[1, 1] + sums[2, 1], abs=ROUNDING_HOURS)


@given(scene=scenes(), first=st.floats(0.0, 1.0), second=st.floats(0.0, 1.0))
@FEWER
def test_the_parts_of_a_month_sum_to_the_whole(scene, first, second):
    """Tracked time cut at two instants, each part asked for alone: the parts of the month add up to it."""
    track, zones = scene.track(), [zone_of(scene.star())]
    start_ms, end_ms = whole(track)[0]
    cuts = sorted(start_ms + round(share * (end_ms - start_ms)) for share in (first, second))
    parts = [span for span in zip([start_ms, *cuts], [*cuts, end_ms], strict=True) if span[0] < span[1]]
    sums, covered = figures(track, zones, scene.options)
    of_parts = [figures(track, zones, scene.options, [span]) for span in parts]
    assert covered == pytest.approx(sum(part[1] for part in of_parts), abs=ROUNDING_HOURS)
    total = sum(part[0] for part in of_parts)
    assert total[0, 0] == pytest.approx(sums[0, 0], abs=sums[0, 2] + total[0, 2] + ROUNDING_HOURS)
    assert total[0, 1] == pytest.approx(sums[0, 1], abs=ROUNDING_HOURS)


@given(scene=scenes(), zone_name=st.sampled_from(["UTC", "Pacific/Auckland", "America/St_Johns", "Asia/Kathmandu"]))
@FEWER
def test_months_sum_to_the_whole_in_any_time_zone(scene, zone_name):
    """The same track around a turn of the month: what is inside does not depend on where the month is cut."""
    time_ms, lon, lat, covariance = scene.columns()
    time_ms = time_ms - time_ms[len(time_ms) // 2] + month_spans(START_MS, START_MS + 1, zone_name)[0].start_ms
    track = Track.from_fixes(time_ms, lon, lat, covariance, np.zeros(len(lon), bool))
    zones = [zone_of(scene.star())]
    here = ZoneUseOptions(time_zone=zone_name, estimator=scene.estimator)
    there = ZoneUseOptions(time_zone="Pacific/Honolulu", estimator=scene.estimator)
    (cut, _), (other, _) = figures(track, zones, here), figures(track, zones, there)
    assert cut[0, 0] == pytest.approx(other[0, 0], abs=cut[0, 2] + other[0, 2] + ROUNDING_HOURS)
    assert cut[0, 1] == pytest.approx(other[0, 1], abs=ROUNDING_HOURS)


@given(scene=scenes())
@PROFILE
def test_zone_and_complement_are_the_whole(scene):
    """A star, a box around it with the star as a hole, and the box: the first two are the third."""
    track, star = scene.track(), scene.star()
    around = star.envelope.buffer(2.0, join_style="mitre")
    with_hole = shapely.Polygon(around.exterior.coords, [star.exterior.coords])
    sums, covered = figures(track, [zone_of(star), zone_of(with_hole), zone_of(around)], scene.options)
    assert sums[0, 0] + sums[1, 0] == pytest.approx(sums[2, 0], abs=sums[:, 2].sum() + ROUNDING_HOURS)
    assert sums[0, 1] + sums[1, 1] == pytest.approx(covered, abs=ROUNDING_HOURS)


@given(scene=scenes(), angle=st.floats(0.0, math.pi), shift=st.floats(-0.4, 0.4))
@PROFILE
def test_splitting_a_zone_sums(scene, angle, shift):
    """A cut through a star at any angle: parts sum to the whole, and the parts as one MultiPolygon are the whole."""
    track, star = scene.track(), scene.star()
    size = max(np.ptp(star.bounds[::2]), np.ptp(star.bounds[1::2]))
    normal = np.array([math.cos(angle), math.sin(angle)])
    along = np.array([-normal[1], normal[0]])
    foot = np.array(star.centroid.coords[0]) + shift * size * normal
    half = shapely.Polygon(
        [
            foot + 9 * size * along,
            foot - 9 * size * along,
            foot + 9 * size * (normal - along),
            foot + 9 * size * (normal + along),
        ]
    )
    inside, outside = star.intersection(half), star.difference(half)
    assume(not inside.is_empty and not outside.is_empty and min(inside.area, outside.area) > 1e-6 * star.area)
    parts = [part for piece in (inside, outside) for part in getattr(piece, "geoms", [piece]) if part.area > 1e-12]
    assume(min(part.area for part in parts) > 1e-6 * star.area)
    zones = [zone_of(star), *(zone_of(part) for part in parts)]
    sums, _ = figures(track, zones, scene.options)
    # The cut moves corners by rounding, at 1e-13 degrees, some 1e-8 m.
    geometry = 1e-7 * len(track)
    assert sums[0, 0] == pytest.approx(sums[1:, 0].sum(), abs=sums[:, 2].sum() + ROUNDING_HOURS + geometry)
    assert sums[0, 1] == pytest.approx(sums[1:, 1].sum(), abs=ROUNDING_HOURS)


@given(scene=scenes(), other=st.integers(20_000, 30_000))
@FEWER
def test_union_is_at_most_the_sum_and_at_least_each(scene, other):
    """Two overlapping stars: union + intersection = sum; union ≤ sum; union ≥ each."""
    track, one = scene.track(), scene.star()
    two = Scene(**{**vars(scene), "seed": other}).star()
    union, shared = one.union(two), one.intersection(two)
    assume(not shared.is_empty and shared.area > 1e-6 * min(one.area, two.area))
    assume(all(part.area > 1e-6 * one.area for part in getattr(shared, "geoms", [shared])))
    sums, _ = figures(track, [zone_of(one), zone_of(two), zone_of(union), zone_of(shared)], scene.options)
    slack = sums[:, 2].sum() + ROUNDING_HOURS + 1e-7 * len(track)
    for column in (0, 1):
        assert sums[2, column] + sums[3, column] == pytest.approx(sums[0, column] + sums[1, column], abs=slack)
        assert sums[2, column] <= sums[0, column] + sums[1, column] + slack
        assert sums[2, column] >= max(sums[0, column], sums[1, column]) - slack


@given(scene=scenes(), scale=st.floats(0.05, 0.999))
@PROFILE
def test_shrinking_a_zone_never_raises_its_mass(scene, scale):
    """A star drawn in towards its centre lies inside itself."""
    track = scene.track()
    sums, _ = figures(track, [zone_of(scene.star()), zone_of(scene.star(scale))], scene.options)
    assert sums[1, 0] <= sums[0, 0] + sums[:, 2].sum() + ROUNDING_HOURS
    assert sums[1, 1] <= sums[0, 1] + ROUNDING_HOURS


@given(scene=scenes(), order=st.integers(0, 10_000), twins=st.integers(0, 2))
@PROFILE
def test_permuted_input_gives_the_same_bytes(scene, order, twins):
    """Any order of the fixes, some of them sharing an instant: not one bit differs."""
    time_ms, lon, lat, covariance = scene.columns()
    lon[:twins] += 1e-5
    time_ms[:twins] = time_ms[-1]
    shuffle = np.random.default_rng(order).permutation(len(lon))
    assumed = np.arange(len(lon)) % 3 == 0
    one = Track.from_fixes(time_ms, lon, lat, covariance, assumed)
    two = Track.from_fixes(time_ms[shuffle], lon[shuffle], lat[shuffle], covariance[shuffle], assumed[shuffle])
    zones = [zone_of(scene.star())]
    assert repr(estimate_zone_use(one, whole(one), zones, scene.options)) == repr(
        estimate_zone_use(two, whole(two), zones, scene.options)
    )


@given(scene=scenes())
@FEWER
def test_a_kept_fit_gives_the_same_bytes(scene):
    """Parameters of an earlier answer given back, as stored ones are, and another zone before: the same rows."""
    track, zone = scene.track(), zone_of(scene.star())
    first = estimate_zone_use(track, whole(track), [zone], scene.options)
    again = estimate_zone_use(track, whole(track), [zone], scene.options, first.parameters)
    assert repr(again) == repr(first)
    after = estimate_zone_use(track, whole(track), [zone_of(scene.star(0.7)), zone], scene.options)
    assert [vars(row) | {"zone_index": 0} for row in after.rows if row.zone_index == 1] == [vars(r) for r in first.rows]


@given(scene=scenes(), turn=st.floats(-180.0, 180.0))
@PROFILE
def test_turning_all_longitudes_changes_no_mass(scene, turn):
    """By any angle, across ±180° too: at most 1e-6 of the covered time."""
    time_ms, lon, lat, covariance = scene.columns()
    here = scene.track()
    there = Track.from_fixes(time_ms, normalised_lon_deg(lon + turn), lat, covariance, np.zeros(len(lon), bool))
    star = scene.star()
    turned = shapely.transform(star, lambda xy: xy + np.array([turn, 0.0]))
    (first, covered), (second, _) = (
        figures(track, [zone_of(shape)], scene.options) for track, shape in ((here, star), (there, turned))
    )
    assert second[0, 0] == pytest.approx(first[0, 0], abs=1e-6 * covered)
    assert second[0, 1] == pytest.approx(first[0, 1], abs=1e-6 * covered)


@given(scene=scenes(highest_lat_deg=60.0), which=st.integers(0, 8), away_m=st.floats(0.0, 5000.0))
@FEWER
def test_a_fix_with_a_huge_error_changes_nothing_much(scene, which, away_m):
    """A second fix at the instant of another, or on its own half-way in time, that knows the place to 10,000 km."""
    time_ms, lon, lat, covariance = scene.columns()
    which %= len(lon)
    zones = [zone_of(scene.star())]
    before, covered = figures(scene.track(), zones, scene.options)
    astray_lon, astray_lat, _ = WGS84.fwd(lon[which], lat[which], 70.0, away_m)
    middle = np.append(time_ms, (time_ms[which] + time_ms[which - 1]) // 2)
    for times in (np.append(time_ms, time_ms[which]), middle):
        if scene.estimator == "brownian_bridge" and times is middle:
            continue  # independent bridges do believe every fix
        track = Track.from_fixes(
            times,
            np.append(lon, astray_lon),
            np.append(lat, astray_lat),
            np.vstack([covariance, [1e14, 0.0, 1e14]]),
            np.zeros(len(lon) + 1, bool),
        )
        after, _ = figures(track, zones, scene.options)
        assert after[0, 0] == pytest.approx(before[0, 0], abs=1e-5 * covered)


@given(scene=scenes(highest_lat_deg=70.0))
@FEWER
def test_no_movement_variance_and_exact_fixes_give_the_time_fraction(scene):
    """σ² → 0 and errors of a millimetre: the bridge is the straight path, its mass the chord's share."""
    time_ms, lon, lat, _ = scene.columns()
    tiny = np.tile([1e-6, 0.0, 1e-6], (len(lon), 1))
    track = Track.from_fixes(time_ms, lon, lat, tiny, np.zeros(len(lon), bool))
    fit = {"movement_variance_m2_per_s": [1e-12], "weight": [1.0], "median_m2_per_s": 1e-12, "log_sd": 0.0}
    options = ZoneUseOptions(estimator="brownian_bridge")
    use = estimate_zone_use(track, whole(track), [zone_of(scene.star())], options, fit)
    for row in use.rows:
        # A crossing blurs the mass over some millimetres of a step of metres or more.
        assert row.probability_mass == pytest.approx(row.time_fraction, abs=0.02 / scene.step_m + 1e-6)


@pytest.mark.parametrize("estimator", ["random_walk", "brownian_bridge"])
@pytest.mark.parametrize("lon_deg", [10.0, 179.995])
def test_dense_exact_fixes_converge_to_the_time_fraction(estimator, lon_deg):
    """A winding path, seen ever more often and ever better: mass and time fraction meet, and meet the truth."""
    scene = Scene(lon_deg, 40.0, 0, 0, 0.0, 0.0, estimator)
    ring = np.column_stack(scene.place(np.array([[-390.0, -330.0], [330.0, -250.0], [260.0, 330.0], [-150.0, 220.0]])))
    zone, gaps = zone_of(shapely.Polygon(ring)), []
    for step_s, sd_m in ((900, 30.0), (180, 6.0), (36, 1.2)):
        angle = np.arange(0, 6 * 3600 + 1, step_s) / 3600.0 * 2.0
        way = 400.0 * np.column_stack([np.sin(1.3 * angle), np.cos(angle)])
        lon, lat = scene.place(way)
        time_ms = START_MS + (np.arange(len(angle)) * step_s * 1000).astype(np.int64)
        track = Track.from_fixes(
            time_ms, lon, lat, np.tile([sd_m**2, 0, sd_m**2], (len(lon), 1)), np.zeros(len(lon), bool)
        )
        sums, covered = figures(track, [zone], scene.options)
        gaps.append(abs(sums[0, 0] - sums[0, 1]) / covered)
        assert 0.2 < sums[0, 1] / covered < 0.8
    assert gaps[2] < 0.003
    assert gaps[2] < 0.5 * gaps[0]
