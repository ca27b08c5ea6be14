"""The task: a pure function of what it is sent."""

import json
from dataclasses import replace

import numpy as np
import pytest

from estimators import TrackError, ZoneUseOptions
from service.recompute import task
from service.recompute.task import AnimalInput, Fitted, ZoneInput, compute_animal
from service.recompute.warm_up import warm_up
from tests.service.store.sent import HOUR_MS, START_MS, square, walk

SQUARE = ZoneInput("reserve", 1, json.dumps(square(-0.01, -0.01, 0.02)), "straight", None, None, None)


def _animal(rows, **attributes):
    count = len(rows)
    sd_m = np.array([np.nan if row[5] is None else row[5] for row in rows], dtype=float)
    return AnimalInput(
        np.zeros(count, np.int64),
        ("",),
        np.array([row[2] for row in rows], np.int64),
        np.array([row[3] for row in rows], float),
        np.array([row[4] for row in rows], float),
        np.stack([sd_m**2, 0.0 * sd_m, sd_m**2], axis=-1),
        attributes,
        50.0,
        ZoneUseOptions(),
        (SQUARE,),
        START_MS + 10_000 * HOUR_MS,
    )


def _flags(result):
    return {flag for facts in result.months for flag in facts.flags}


def test_implied_deployment_is_flagged():
    """The flag stands in every month when no deployment was stated, and in none when one was."""
    rows = walk("seal", 24 * 40)
    assert all("implied_deployment" in facts.flags for facts in compute_animal(_animal(rows)).months)
    stated = [{"start": "2023-11-14T22:13:20Z", "end": None, "tag": None}]
    assert "implied_deployment" not in _flags(compute_animal(_animal(rows, deployments=stated)))


def test_default_error_is_that_of_the_animal_else_of_the_programme():
    """Fixes without a statement are computed as if they had stated the default, and flagged."""
    without, stated = walk("seal", 60, sd_m=None), walk("seal", 60, sd_m=50.0)
    by_default, by_statement = compute_animal(_animal(without)), compute_animal(_animal(stated))
    assert by_default.rows == by_statement.rows != ()
    assert _flags(by_default) - _flags(by_statement) == {"assumed_error"}
    own = compute_animal(_animal(without, default_error_sd_m=500.0))
    assert own.rows == compute_animal(_animal(walk("seal", 60, sd_m=500.0))).rows != by_default.rows


def test_fixes_outside_deployments_do_not_count():
    """A fix before the deployment changes nothing at all."""
    stated = [{"start": "2023-11-15", "end": "2023-11-18", "tag": None}]
    rows = walk("seal", 100)
    inside = [row for row in rows if 1_700_006_400_000 <= row[2] < 1_700_265_600_000]
    assert len(inside) == 72
    assert compute_animal(_animal(rows, deployments=stated)) == compute_animal(_animal(inside, deployments=stated))


@pytest.mark.parametrize("count", [0, 1])
def test_nothing_tracked_gives_no_rows(count):
    """No fix or one fix: no month, no row, no failure."""
    result = compute_animal(_animal(walk("seal", count)))
    assert (result.months, result.rows) == ((), ())


@pytest.mark.parametrize("count", [1, 2])
def test_tracked_time_with_next_to_no_fixes(count):
    """A stated deployment with hardly a fix in it is tracked time that is not known."""
    stated = [{"start": "2023-11-14", "end": "2023-11-20", "tag": None}]
    result = compute_animal(_animal(walk("seal", count), deployments=stated))
    [month] = result.months
    assert month.tracked_hours == 6 * 24
    assert month.covered_hours == count - 1


def test_same_input_same_result_in_any_order():
    """The order of the fixes never shows."""
    animal = _animal(walk("seal", 100))
    order = np.random.default_rng(5).permutation(100)
    columns = ("tag", "time_ms", "lon_deg", "lat_deg", "covariance_m2")
    shuffled = replace(animal, **{name: getattr(animal, name)[order] for name in columns})
    assert compute_animal(shuffled).rows == compute_animal(animal).rows


def test_kept_fit_gives_the_same_rows():
    """Parameters that went through JSON give the very rows of a fresh fit; those of another track are not used."""
    animal = _animal(walk("seal", 200))
    fresh = compute_animal(animal)
    parameters = json.loads(json.dumps(fresh.parameters))
    assert compute_animal(replace(animal, fitted=Fitted(fresh.track_digest, parameters))) == fresh
    foreign = {**parameters, "movement_variance_m2_per_s": [1e4] * len(parameters["weight"])}
    assert compute_animal(replace(animal, fitted=Fitted(fresh.track_digest, foreign))).rows != fresh.rows
    assert compute_animal(replace(animal, fitted=Fitted("other", foreign))) == fresh


def test_digest_tells_inputs_apart():
    """Whatever the rows depend on changes the digest; the kept fit does not."""
    animal = _animal(walk("seal", 30))
    other_options = replace(animal.options, minimum_stay_hours=2.0)
    changed = [
        _animal(walk("seal", 31)),
        _animal(walk("seal", 30), estimator="brownian_bridge"),
        _animal(walk("seal", 30), longest_bridged_gap_hours=3.0),
        replace(animal, options=other_options),
        replace(animal, zones=()),
        replace(animal, zones=(replace(SQUARE, until_ms=START_MS + HOUR_MS),)),
    ]
    digests = {compute_animal(each).digest for each in [animal, *changed]}
    assert len(digests) == len(changed) + 1


def test_unusable_fix_is_a_typed_failure():
    """What cannot be computed with is an error of the estimators."""
    with pytest.raises(TrackError, match="not positive definite"):
        compute_animal(replace(_animal(walk("seal", 3)), covariance_m2=-np.ones((3, 3))))


def test_warm_up_computes():
    """The first tiny computation works."""
    warm_up()


def test_prepared_zones_are_forgotten_before_they_fill_the_memory(monkeypatch):
    """A worker meets more zones than it can keep; the rows are the same."""
    rows = walk("seal", 48)
    kept = compute_animal(_animal(rows))
    monkeypatch.setattr(task, "_VERTICES_KEPT", 0)
    monkeypatch.setattr(task, "_kept_shapes", {})
    others = [replace(SQUARE, geometry=json.dumps(square(-0.01 - k, -0.01, 0.02))) for k in range(3)]
    for other in others:
        compute_animal(replace(_animal(rows), zones=(other, SQUARE)))
        assert len(task._kept_shapes) <= 2
    assert compute_animal(_animal(rows)).rows == kept.rows
