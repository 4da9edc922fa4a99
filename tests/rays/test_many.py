"""Ensembles against their members, one by one."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays import ensemble, find_shadow
from ocean_sound.rays.loss import loss
from ocean_sound.rays.many import _Sums
from ocean_sound.section import Section

pytestmark = [pytest.mark.kernels, pytest.mark.long]

RANGES, DEPTHS = np.linspace(0.0, 4000.0, 21), np.linspace(0.0, 200.0, 11)


def waters():
    speeds = ([1520.0, 1500.0, 1497.0], [1510.0, 1500.0, 1497.0], [1501.0, 1500.0, 1497.0])
    return [Profile([0.0, 80.0, 200.0 - 20.0 * (j == 2)], speed, id=f"cast {j}") for j, speed in enumerate(speeds)]


def test_shares_are_those_of_the_members_one_by_one():
    members = waters()
    found = ensemble(members, source_depth=20.0, ranges=RANGES, depths=DEPTHS, workers=0)
    count, wet = np.zeros((11, 21)), np.zeros((11, 21))
    for water in members:
        inside = water.depth[-1] >= DEPTHS
        alone = find_shadow(water, source_depth=20.0, max_range=4000.0, depths=DEPTHS[inside], ranges=RANGES)
        count[inside] += alone.masks["no_bounce"]
        wet[inside] += 1
    assert np.array_equal(found.shadow_share_no_bounce.values, count / wet)
    assert np.array_equal(found.water_members.values, wet)
    assert found.member_name.values.tolist() == ["cast 0", "cast 1", "cast 2"]
    assert set(np.unique(found.shadow_share_no_bounce.values)) >= {0.0, 1.0 / 3.0}


def test_nothing_depends_on_the_number_of_workers():
    many = [*waters(), Section.from_profile(waters()[0], seabed=180.0, max_range=5000.0)]
    told = []
    alone = ensemble(many, source_depth=[20.0, 20.0, 30.0, 20.0], ranges=RANGES, depths=DEPTHS, workers=0)
    beside = ensemble(
        many, source_depth=[20.0, 20.0, 30.0, 20.0], ranges=RANGES, depths=DEPTHS, workers=2,
        progress=lambda done, of: told.append((done, of)),
    )  # fmt: skip
    assert alone.identical(beside)
    assert told == [(1, 4), (2, 4), (3, 4), (4, 4)]
    assert alone.source_depth.values.tolist() == [20.0, 20.0, 30.0, 20.0]


def test_a_dask_cluster_by_its_address_gives_the_same():
    distributed = pytest.importorskip("distributed")
    asked = {"source_depth": 20.0, "ranges": RANGES, "depths": DEPTHS}
    alone = ensemble(waters(), workers=0, **asked)
    with distributed.LocalCluster(
        n_workers=1, threads_per_worker=2, processes=False, protocol="tcp", dashboard_address=None
    ) as cluster:
        assert cluster.scheduler_address.startswith("tcp://")
        assert ensemble(waters(), scheduler=cluster.scheduler_address, **asked).identical(alone)


def test_mean_and_spread_are_those_of_numpy_where_some_are_unknown():
    rng = np.random.default_rng(1)
    values = rng.normal(80.0, 7.0, (6, 4, 5))
    values[rng.random(values.shape) < 0.3] = np.nan
    values[:, 0, 0] = np.nan
    values[1:, 0, 1] = np.nan
    values[0, 0, 1] = 70.0
    sums = _Sums((4, 5))
    for one in values:
        sums.add(one)
    mean, spread = sums.results()
    known = np.isfinite(values).sum(axis=0)
    assert np.array_equal(sums.count, known)
    for i in range(4):
        for j in range(5):
            column = values[:, i, j][np.isfinite(values[:, i, j])]
            assert mean[i, j] == pytest.approx(column.mean() if column.size else np.nan, nan_ok=True)
            assert spread[i, j] == pytest.approx(column.std(ddof=1) if column.size > 1 else np.nan, nan_ok=True)


def test_mean_and_spread_of_loss_are_those_of_the_members():
    members = [Section.from_profile(water, seabed=170.0, max_range=4000.0) for water in waters()]
    ranges, depths = np.array([0.0, 1500.0, 2500.0, 4000.0]), np.array([20.0, 60.0, 175.0])
    found = ensemble(members, source_depth=20.0, ranges=ranges, depths=depths, shadow=False, frequency=100.0,
                     phases="dropped", workers=0)  # fmt: skip
    alone = np.array(
        [
            loss(water, source_depth=20.0, frequency=100.0, ranges=ranges[1:], depths=depths, phases="dropped")
            .transmission_loss.transpose("depth", "range").to_numpy()
            for water in members
        ]
    )  # fmt: skip
    mean, spread = found.transmission_loss_mean.values, found.transmission_loss_spread.values
    assert np.isnan(mean[:, 0]).all()  # at range 0 there is none
    assert np.isnan(mean[2]).all()  # below the seabed neither
    assert mean[:2, 1:] == pytest.approx(alone[:, :2].mean(axis=0), rel=1e-12)
    assert spread[:2, 1:] == pytest.approx(alone[:, :2].std(axis=0, ddof=1), rel=1e-9)
    assert found.transmission_loss_members.values[:, 3].tolist() == [3, 3, 0]
    assert found.attrs["loss_frequency"] == 100.0
    assert not any(name.startswith("shadow_share") for name in found)


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"waters": []}, "an ensemble of no members"),
        ({"shadow": False}, "needs something to find"),
        ({"method": "beams"}, "method: goes with a loss; give its frequency"),
        ({"source_depth": [1.0, 2.0]}, "2 source depths for 3 members"),
        ({"names": ["a"]}, "1 names for 3 members"),
        ({"ranges": [0.0]}, "ranges must go beyond 0 m"),
        ({"depths": [10.0, 5.0]}, "depths must be a list of increasing numbers"),
        ({"workers": -1}, "-1 workers"),
        ({"source_depth": [10.0, 10.0, 190.0]}, "member 3, cast 2: source depth 190 m is below the seabed"),
        ({"depths": [190.0]}, "member 3, cast 2: has no water at the depths asked for"),
    ],
)
def test_what_does_not_fit_is_told(changes, message):
    given = {"waters": waters(), "source_depth": 20.0, "ranges": [0.0, 500.0], "depths": [5.0, 20.0], "workers": 0}
    given |= changes
    with pytest.raises(InputError, match=message):
        ensemble(given.pop("waters"), **given)
