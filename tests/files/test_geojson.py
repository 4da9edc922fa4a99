"""Lines as GeoJSON: RFC 7946 by its own rules, and by geodesics of pyproj."""

from __future__ import annotations

import json
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.errors import OutputError
from ocean_sound.files.geojson import collection, line, write_geojson


def pieces(feature):
    geometry = feature["geometry"]
    assert geometry["type"] in {"LineString", "MultiLineString"}
    return geometry["coordinates"] if geometry["type"] == "MultiLineString" else [geometry["coordinates"]]


def test_a_line_away_from_the_date_line_stays_as_it_is():
    feature = line([10.0, 11.0, 12.0], [20.0, 21.0, 22.5], {"depth": 60.0})
    assert feature["type"] == "Feature"
    assert feature["properties"] == {"depth": 60.0}
    assert feature["geometry"] == {"type": "LineString", "coordinates": [[20.0, 10.0], [21.0, 11.0], [22.5, 12.0]]}


def test_a_line_across_the_date_line_is_cut_as_the_rfc_does():
    """The example of RFC 7946, section 3.1.9: from 45 N 170 E across to 45 N 170 W."""
    feature = line([45.0, 45.0], [170.0, -170.0], {})
    assert feature["geometry"] == {
        "type": "MultiLineString",
        "coordinates": [[[170.0, 45.0], [180.0, 45.0]], [[-180.0, 45.0], [-170.0, 45.0]]],
    }


@pytest.mark.parametrize(
    ("longitude", "ends"),
    [
        ([-170.0, 170.0], [[-170.0, -180.0], [180.0, 170.0]]),  # westward
        ([190.0, 200.0], [[-170.0, -160.0]]),  # 0-360
        ([170.0, 180.0], [[170.0, 180.0]]),  # up to the line, not across
        ([180.0, 170.0], [[180.0, 170.0]]),
        ([180.0, 190.0], [[-180.0, -170.0]]),
        ([170.0, 180.0, 190.0], [[170.0, 180.0], [-180.0, -170.0]]),  # a point on the line itself
        ([179.0, -179.0, 179.0], [[179.0, 180.0], [-180.0, -180.0], [180.0, 179.0]]),  # there and back
    ],
)
def test_each_way_of_meeting_the_date_line(longitude, ends):
    found = pieces(line(np.zeros(len(longitude)), longitude, {}))
    assert [[piece[0][0], piece[-1][0]] for piece in found] == ends


@given(st.lists(st.tuples(st.floats(-80, 80), st.floats(-540, 540)), min_size=2, max_size=6), st.sampled_from([0, 360]))
def test_pieces_join_at_the_date_line_and_nowhere_leave_the_map(places, turn):
    lat, lon = (np.array(column) for column in zip(*places, strict=True))
    found = pieces(line(lat, lon + turn, {}))
    for piece in found:
        across = np.array([point[0] for point in piece])
        assert np.all(np.abs(across) <= 180.0)
        assert np.all(np.abs(np.diff(across)) <= 180.0 + 1e-6)  # no segment goes round the other way
    for before, after in pairwise(found):
        assert abs(before[-1][0]) == abs(after[0][0]) == 180.0
        assert before[-1][0] == -after[0][0]
        assert before[-1][1] == after[0][1]
    # apart from what was put in at the cuts, the points are those given
    inner = [point for piece in found for point in piece]
    for a, b in zip(lat, lon, strict=True):
        assert any(abs(y - a) < 1e-6 and abs((x - b + 180.0) % 360.0 - 180.0) < 1e-6 for x, y in inner)


def test_what_is_written_is_json_and_never_half(tmp_path):
    goal = tmp_path / "zones.geojson"
    write_geojson(goal, collection([line([0.0, 1.0], [2.0, 3.0], {"name": "Ærø"})]))
    assert json.loads(goal.read_text(encoding="utf-8"))["features"][0]["properties"]["name"] == "Ærø"
    with pytest.raises(OutputError, match="exists already"):
        write_geojson(goal, collection([]))
    with pytest.raises(ValueError, match="not JSON compliant"):
        write_geojson(tmp_path / "b.geojson", collection([line([0.0, 1.0], [2.0, 3.0], {"depth": float("nan")})]))
    assert [path.name for path in tmp_path.iterdir()] == ["zones.geojson"]
