"""Tracks: against pyproj's geodesics directly."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pyproj import Geod

from ocean_sound.errors import InputError
from ocean_sound.section import Track

GEOD = Geod(ellps="WGS84")
LATITUDE, LONGITUDE = np.array([10.0, 12.0, 11.0, 40.0]), np.array([175.0, 179.0, -178.0, -170.0])


def test_distances_and_places_are_those_of_the_geodesics():
    track = Track(LATITUDE, LONGITUDE)
    legs = [GEOD.line_length(LONGITUDE[j : j + 2], LATITUDE[j : j + 2]) for j in range(3)]
    assert track.ranges == pytest.approx(np.concatenate(([0.0], np.cumsum(legs))), rel=1e-12)
    latitude, longitude = track.at(track.ranges)
    assert latitude == pytest.approx(LATITUDE, abs=1e-9)
    assert (longitude - LONGITUDE + 180.0) % 360.0 - 180.0 == pytest.approx(0.0, abs=1e-9)
    # a third along the second leg
    middle = GEOD.npts(179.0, 12.0, -178.0, 11.0, 2)[0]
    found = track.at(track.ranges[1] + legs[1] / 3.0)
    assert (float(found[1]) - middle[0]) % 360.0 == pytest.approx(0.0, abs=1e-9)
    assert float(found[0]) == pytest.approx(middle[1], abs=1e-9)
    assert track.azimuth_at(legs[0] + 1.0) == pytest.approx(GEOD.inv(179.0, 12.0, -178.0, 11.0)[0])


@given(st.floats(0.0, 1.0), st.floats(-20000.0, 20000.0), st.booleans())
def test_the_nearest_point_is_where_the_perpendicular_was_dropped_from(part, away, turned):
    track = Track.between((31.0, 179.5), (32.5, -179.0))
    place = part * track.length
    latitude, longitude = track.at(place)
    # the azimuth there, from a point a little on
    ahead = track.at(place + 10.0)
    azimuth, _, _ = GEOD.inv(longitude, latitude, ahead[1], ahead[0])
    east, north, _ = GEOD.fwd(longitude, latitude, azimuth + 90.0, away)
    found, off = track.nearest([north], [east + 360.0 * turned if east < 0 else east])
    assert found[0] == pytest.approx(place, abs=2.0)
    assert off[0] == pytest.approx(abs(away), abs=0.1)


def test_the_nearest_point_of_many_legs_is_no_farther_than_any_looked_at():
    track = Track(LATITUDE[:3], LONGITUDE[:3])
    rng = np.random.default_rng(4)
    latitude, longitude = rng.uniform(9.0, 13.0, 20), 175.0 + rng.uniform(0.0, 7.0, 20)
    _, off = track.nearest(latitude, longitude)
    there = track.at(np.linspace(0.0, track.length, 20001))
    for lat, lon, distance in zip(latitude, longitude, off, strict=True):
        some = np.asarray(GEOD.inv(np.full(20001, lon), np.full(20001, lat), there[1], there[0])[2])
        assert distance <= some.min() + 0.01


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Track([1.0], [2.0]), "1 latitudes and 1 longitudes; two or more"),
        (lambda: Track([1.0, 95.0], [2.0, 3.0]), "latitude 95, longitude 3 is no position"),
        (lambda: Track([1.0, np.nan], [2.0, 3.0]), "latitude nan"),
        (lambda: Track([1.0, 1.0], [180.0, -180.0]), "points 0 and 1 .* are both at 1, 180: distances that increase"),
        (lambda: Track.between((1.0,), (2.0, 3.0)), r"start is \(1.0,\); latitude and longitude"),
        (lambda: Track.of([1.0, 2.0]), "places are no list of"),
    ],
)
def test_what_can_be_no_track_is_told(make, message):
    with pytest.raises(InputError, match=message):
        make()


def test_a_track_is_handed_on_and_never_changed():
    track = Track(LATITUDE, LONGITUDE)
    assert Track.of(track) is track
    with pytest.raises(ValueError, match="read-only"):
        track.latitude[0] = 0.0
    assert LATITUDE.flags.writeable
