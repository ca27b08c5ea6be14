"""Speed of the zone-mass integral, beside a raster sum of the same true error; growth with fixes and far zones."""

import tracemalloc
from collections.abc import Iterator

import numpy as np

from estimators import Zone, ZoneUseOptions, estimate_zone_use
from estimators.gaussian_path import GaussianPath, covered_steps, path_between_fixes
from estimators.random_walk import RandomWalk
from estimators.zone_mass import Cells, integrated_zone_mass
from tests.benchmarks.raster_sum import RasterSum
from tests.benchmarks.scenario import STEP_SD_M, home_track, star_zone, whole_span
from tests.benchmarks.timing import Row, median_s

FIXES = 20_000
LONGEST_GAP_MS = 86_400_000.0
RASTER_ERROR = 1e-4
RASTER_STEPS = 200
RASTERS = ((50.0, 8), (50.0, 16), (25.0, 16), (12.5, 32), (6.25, 32), (3.125, 32), (3.125, 64), (2.0, 64), (1.0, 128))


def rows() -> Iterator[Row]:
    """All figures of this file."""
    path, cells = _path_and_cells(FIXES)
    yield from _kernel("zone of 4.6 km around the home", star_zone(300, 4_600.0), path, cells)
    yield from _kernel("zone of 15 km, the home at its edge", star_zone(300, 15_000.0, lon_deg=9.857), path, cells)
    yield from _against_raster(path, cells, star_zone(300, 4_600.0))
    yield from _growth()
    yield from _far_zones()


def _path_and_cells(fixes: int) -> tuple[GaussianPath, Cells]:
    track = home_track(fixes)
    variance = STEP_SD_M**2 / 3600.0
    model = RandomWalk(track, LONGEST_GAP_MS)
    path = path_between_fixes(track, covered_steps(track, LONGEST_GAP_MS), model.marginals(variance), variance, 1.0)
    steps = np.arange(len(path.steps))
    return path, Cells(steps, steps, np.zeros(len(steps)), np.ones(len(steps)), np.full(len(steps), 3_600_000.0))


def _kernel(name: str, zone: Zone, path: GaussianPath, cells: Cells) -> list[Row]:
    edges = zone.shape.boundaries[0]
    sums = integrated_zone_mass(path, edges, cells, len(path.steps))
    error = float((sums[:, 1] / cells.duration_ms).max())
    near, pairs = float(np.mean(sums[:, 2] > 0.0)), float(sums[:, 2].sum())
    seconds = median_s(lambda: integrated_zone_mass(path, edges, cells, len(path.steps)))
    return [
        Row(
            f"{name}: near share; pairs of node and near edge per fix",
            f"{near:.3f}; {pairs / FIXES:.0f}",
            "a quarter near",
        ),
        Row("largest numerical_error of a step", f"{error:.1e}", "1e-6"),
        Row("zone-mass integral, all of it, per pair", f"{seconds / pairs * 1e9:.0f} ns", "50 ns"),
        Row("zone-mass integral, fixes per second, one core", f"{FIXES / seconds:,.0f}", "100,000"),
    ]


def _against_raster(path: GaussianPath, cells: Cells, zone: Zone) -> list[Row]:
    """Both methods on the same near steps; the raster is refined until its error is at most `RASTER_ERROR`.

    Two measures of the raster's error: of one step (root mean square), and of the mean of a month's near steps,
    in which errors of either sign cancel.
    """
    sums = integrated_zone_mass(path, zone.shape.boundaries[0], cells, len(path.steps))
    some = np.nonzero(sums[:, 2] > 0.0)[0][:RASTER_STEPS]
    exact = sums[some, 0] / cells.duration_ms[some]
    few = Cells(some, some, np.zeros(len(some)), np.ones(len(some)), cells.duration_ms[some])
    exact_s = median_s(lambda: integrated_zone_mass(path, zone.shape.boundaries[0], few, len(path.steps)))
    raster = RasterSum(path, zone.shape, 10.0, 45.0)
    found: dict[str, Row] = {}
    for cell_m, moments in RASTERS:
        mask = raster.mask(cell_m)
        error = raster.masses(some, mask, cell_m, moments) - exact
        for measure, size in (("of one step", np.sqrt(np.mean(error**2))), ("of their mean", abs(error.mean()))):
            if measure not in found and size <= RASTER_ERROR:
                seconds = median_s(lambda m=mask, c=cell_m, n=moments: raster.masses(some, m, c, n), repeats=1)
                what = (
                    f"raster / integral at error {measure} ≤ 1e-4 ({cell_m:g} m, {moments} moments, {len(some)} steps)"
                )
                found[measure] = Row(what, f"{seconds / exact_s:.1f} times", "50")
    return list(found.values())


def _growth() -> list[Row]:
    zones = [star_zone(300, 4_600.0)]
    seconds, peaks = [], []
    for fixes in (5_000, 50_000):
        track = home_track(fixes)
        seconds.append(median_s(lambda t=track: estimate_zone_use(t, whole_span(t), zones, ZoneUseOptions())))
        tracemalloc.start()
        estimate_zone_use(track, whole_span(track), zones, ZoneUseOptions())
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
    return [
        Row("10 times the fixes: time", f"{seconds[1] / seconds[0]:.1f} times", "11"),
        Row("10 times the fixes: memory", f"{peaks[1] / peaks[0]:.1f} times", "11"),
    ]


def _far_zones() -> list[Row]:
    track = home_track(8_760)
    near = [star_zone(300, 4_600.0)]
    far: list[Zone] = [star_zone(300, 4_900.0, seed=k, lon_deg=60.0 + k) for k in range(100)]

    def seconds(zones: list[Zone]) -> float:
        return median_s(lambda: estimate_zone_use(track, whole_span(track), zones, ZoneUseOptions()))

    alone, with_far = seconds(near), seconds(near + far)
    return [Row("100 zones that no track comes near: more time", f"{100.0 * (with_far / alone - 1.0):.1f} %", "5 %")]
