"""Why cells are deaf: the parts add up; and cures against a search through all candidates."""

from __future__ import annotations

import numpy as np
import pytest
from pyproj import Geod

from ocean_sound.sensors.area import Area
from ocean_sound.sensors.coverage import Hearing, Noise, Target, losses_at
from ocean_sound.sensors.curing import CAUSES, PARTS, cures, deafness
from ocean_sound.sensors.hearing import Receiver
from ocean_sound.sensors.sites import Site

from .conftest import ALPHA, spherical

AREA = Area.box(29.95, 30.05, -60.06, -59.94, spacing=1000.0, depths=[20.0, 70.0], bathymetry=100.0)
SENSORS = [Site("A", 30.0, -60.0, 40.0), Site("B", 30.03, -60.03, 40.0)]
OTHERS = [Site("A deep", 30.0, -60.0, 80.0), Site("C", 29.97, -59.98, 40.0)]
HEARING = Hearing(Target(150.0), Receiver(8.0, 1000.0, self_noise=30.0), Noise([50.0], calm=40.0))


def shadowed(section, *, source_depth, ranges, depths, **rest):
    """20 dB more in the upper half for shallow sensors, 6 dB less from the seabed where there is one."""
    loss = spherical(section, source_depth=source_depth, ranges=ranges, depths=depths, **rest)
    loss += 20.0 * ((np.asarray(depths) < 45.0) & (source_depth < 60.0))[None, :]
    return loss - (6.0 if section.seabed.kind is not None else 0.0)


@pytest.fixture
def lost(losses_of):
    everyone = [*SENSORS, *OTHERS]
    common = {"engine": shadowed, "ranges": 200, "depths": np.linspace(0.0, 90.0, 91), "bearings": 72}
    whole = losses_at(losses_of(everyone, kind="sand", **common), AREA)
    free = losses_at(losses_of(everyone, kind="sand", boundaries=False, **common), AREA)
    return whole, free


@pytest.fixture
def found(lost):
    return deafness(
        lost[0][:, :2], lost[1][:, :2], area=AREA, sensors=SENSORS, absorption=1000.0 * ALPHA, hearing=HEARING
    )


def test_the_parts_add_up_to_what_is_missing(found, lost):
    assert found.parts.shape[0] == len(PARTS)
    assert found.parts.sum(axis=0) == pytest.approx(found.missing, abs=1e-9)
    best = lost[0][:, :2].min(axis=1).astype(float)
    allowed = HEARING.allowed(50.0)
    assert found.missing == pytest.approx(best - allowed, abs=1e-9)


def test_each_part_is_what_was_put_in(found):
    parts = dict(zip(PARTS, found.parts[:, 0], strict=True))
    upper = AREA.cell_depth < 45.0
    assert parts["refraction"] == pytest.approx(np.where(upper, 20.0, 0.0), abs=0.2)
    assert parts["boundaries"] == pytest.approx(-6.0, abs=1e-4)
    quiet = 10.0 * np.log10(10.0**4 + 10.0**3)
    loud = 10.0 * np.log10(10.0**5 + 10.0**3)
    assert parts["noise"] == pytest.approx(loud - quiet)
    assert parts["budget"] == pytest.approx(-(150.0 - quiet - 30.0 - 8.0))
    names = np.array(CAUSES)[found.cause[0][found.cause[0] >= 0]]
    assert set(names) <= {"refraction", "spreading", "noise"}
    assert "refraction" in names


def test_cures_equal_a_search(found, lost):
    whole = lost[0]
    everyone = [*SENSORS, *OTHERS]
    cure = cures(found, whole, candidates=everyone, sensors=SENSORS, hearing=HEARING)
    allowed = HEARING.allowed(50.0)
    geod = Geod(ellps="WGS84")
    kinds = set()
    for cell in range(AREA.size):
        missing = found.missing[0, cell]
        if missing <= 0.0:
            assert (cure.threshold[0, cell], cure.depth[0, cell], cure.place[0, cell]) == (0.0, 0.0, 0.0)
            continue
        assert cure.threshold[0, cell] == pytest.approx(-missing)
        depth = 40.0 if whole[0, 2, cell] <= allowed else np.nan
        assert cure.depth[0, cell] == pytest.approx(depth, nan_ok=True)
        places = [
            (min(geod.inv(a.longitude, a.latitude, b.longitude, b.latitude)[2] for b in SENSORS), c)
            for c, a in enumerate(everyone)
            if whole[0, c, cell] <= allowed and c == 3
        ]
        place, site = min(places) if places else (np.nan, -1)
        assert cure.place[0, cell] == pytest.approx(place, nan_ok=True)
        assert cure.site[0, cell] == site
        kinds.add((np.isnan(depth), np.isnan(place)))
    assert len(kinds) > 1


def test_beyond_the_range_nothing_is_said(losses_of):
    area = Area.box(29.7, 30.3, -60.1, -59.9, spacing=5000.0, depths=[20.0], bathymetry=100.0)
    loss = losses_at(losses_of(SENSORS), area)
    found = deafness(loss, loss, area=area, sensors=SENSORS, absorption=1.0, hearing=HEARING)
    far = ~np.isfinite(loss.min(axis=1))
    assert far.any()
    assert np.isnan(found.missing[far]).all()
    assert np.isnan(found.parts[:, far]).all()
    assert np.all(found.cause[far] == -1)
    cure = cures(found, loss, candidates=SENSORS, sensors=SENSORS, hearing=HEARING)
    assert np.isnan(cure.threshold[far]).all()
