"""Areas against pyproj's polygons, across the date line, over land and shallow water; their outlines as GeoJSON."""

from __future__ import annotations

import numpy as np
import pytest
from pyproj import Geod

from ocean_sound.errors import InputError
from ocean_sound.sensors.area import Area, places_in
from ocean_sound.sensors.outlines import cells_outline, reach_outline
from ocean_sound.sensors.sites import Site

GEOD = Geod(ellps="WGS84")


def parallel_box(south, north, west, east):
    """Area of a box along parallels and meridians by pyproj, m2: its parallels in many short geodesics."""
    x = np.linspace(west, east, 2001)
    lon = np.concatenate((x, x[::-1]))
    lat = np.concatenate((np.full(x.size, south), np.full(x.size, north)))
    return abs(GEOD.polygon_area_perimeter(lon, lat)[0])


@pytest.mark.parametrize("box", [(-2.0, 1.0, 10.0, 12.0), (59.0, 61.0, -20.0, -15.0), (30.0, 33.0, 178.0, -177.0)])
def test_weights_are_the_area_of_the_ellipsoid(box):
    area = Area.box(*box, spacing=20e3, depths=[10.0, 20.0, 30.0], bathymetry=100.0)
    south, north, west, east = box
    expected = parallel_box(south, north, west, east if east > west else east + 360.0)
    assert area.weight.sum() == pytest.approx(expected, rel=1e-7)


def test_across_the_date_line_longitudes_run_on():
    area = Area.box(10.0, 11.0, 179.0, -179.0, spacing=20e3, depths=[10.0], bathymetry=100.0)
    assert np.all(np.diff(area.longitude) > 0.0)
    assert area.longitude[-1] > 180.0
    assert np.abs(area.cell_longitude).max() <= 180.0
    assert area.cells_at(10.5, -179.5).tolist() == area.cells_at(10.5, 180.5).tolist()


def test_a_polygon_is_cut_by_its_corners():
    corners = [(0.0, 179.0), (0.0, -179.0), (2.0, -179.0), (2.0, 179.0)]
    area = Area.polygon(corners, spacing=10e3, depths=[10.0], bathymetry=100.0)
    same = Area.box(0.0, 2.0, 179.0, -179.0, spacing=10e3, depths=[10.0], bathymetry=100.0)
    assert area.size == same.size
    triangle = Area.polygon(corners[:3], spacing=5e3, depths=[10.0], bathymetry=100.0)
    lon = np.array([179.0, 181.0, 181.0])
    expected = abs(GEOD.polygon_area_perimeter(lon, [0.0, 0.0, 2.0])[0])
    assert triangle.weight.sum() == pytest.approx(expected, rel=0.03)


def test_land_and_shallow_water(bathymetry_file):
    axis = np.linspace(-1.0, 1.0, 81)
    grid = bathymetry_file(lambda lat, lon: -100.0 * lon + 0.0 * lat, axis, axis)
    area = Area.box(-0.5, 0.5, -0.9, 0.9, spacing=5e3, depths=[10.0, 60.0], shares=[1.0, 3.0], bathymetry=grid)
    lon = area.cell_longitude
    assert lon.min() > 0.0  # the west is land
    # the deeper layer needs more than 60 m, and where it is missing the upper one has all the time
    assert lon[area.cell_depth == 60.0].min() > 0.6
    columns = {}
    for cell in range(area.size):
        key = area.places[1][cell], area.places[2][cell]
        columns.setdefault(key, []).append((area.cell_depth[cell], area.weight[cell]))
    for held in columns.values():
        total = sum(weight for _, weight in held)
        assert held[0][1] == pytest.approx(total if len(held) == 1 else total / 4.0)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Area.box(1, 0, 0, 1, spacing=1e4, depths=[1], bathymetry=9.0), "a south below the north"),
        (lambda: Area.box(0, 1, 0, 1, spacing=1.0, depths=[1], bathymetry=9.0), "m or more would be right"),
        (lambda: Area.box(0, 1, 0, 1, spacing=0, depths=[1], bathymetry=9.0), "spacing is 0 m"),
        (lambda: Area.box(0, 1, 0, 1, spacing=1e4, depths=[5, 2], bathymetry=9.0), "depths are no list"),
        (lambda: Area.box(0, 1, 0, 1, spacing=1e4, depths=[50], bathymetry=9.0), "no cell lies in water of 50 m"),
        (lambda: Area.box(0, 1, 0, 1, spacing=1e4, depths=[5], shares=[1, 2], bathymetry=9.0), "2 shares for 1"),
        (lambda: Area.polygon([(0, 0), (1, 1)], spacing=1e4, depths=[5], bathymetry=9.0), "2 corners"),
        (lambda: Area.polygon([(0, 0), (0, 1), (0, 2)], spacing=1e4, depths=[5], bathymetry=9.0), "on one line"),
        (lambda: Area.polygon([(95, 0), (1, 1), (2, 2)], spacing=1e4, depths=[5], bathymetry=9.0), "no position"),
        (
            lambda: Area.polygon([(80, 0), (80, 120), (80, 240)], spacing=1e5, depths=[5], bathymetry=9.0),
            "goes round a pole",
        ),
    ],
)
def test_what_is_no_area_is_refused(make, message):
    with pytest.raises(InputError, match=message):
        make()


def test_no_cell_holds_a_place_outside():
    area = Area.box(0.0, 1.0, 0.0, 1.0, spacing=2e4, depths=[1.0], bathymetry=9.0)
    with pytest.raises(InputError, match="no cell in water holds latitude 2"):
        area.cells_at(2.0, 0.5)


def test_places_of_a_grid_lie_in_the_polygon():
    area = Area.polygon([(0, 0), (0, 1), (1, 0)], spacing=1e4, depths=[1.0], bathymetry=9.0)
    places = np.array(places_in(area, 2e4))
    assert len(places) > 5
    assert np.all(places.sum(axis=1) < 1.0 + 1e-9)


def shoelace(ring):
    x, y = np.array(ring[:-1]).T
    return 0.5 * np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y)


@pytest.mark.parametrize("seed", range(8))
def test_outlines_hold_the_cells_and_no_more(seed):
    """Areas of rings add up to the cells, rings are closed and rightly turned, and none goes over 180 degrees."""
    area = Area.box(0.0, 1.0, 179.03, -178.0, spacing=11e3, depths=[5.0], bathymetry=50.0)
    chosen = np.random.default_rng(seed).random(area.inside.shape) < 0.6
    feature = cells_outline(area, chosen, {"what": "x"})
    total = 0.0
    for polygon in feature["geometry"]["coordinates"]:
        for k, ring in enumerate(polygon):
            assert ring[0] == ring[-1]
            x = np.array(ring)[:, 0]
            assert np.ptp(x) < 180.0
            assert np.abs(x).max() <= 180.0
            assert (shoelace(ring) > 0.0) == (k == 0)
            total += shoelace(ring)
    assert total == pytest.approx(chosen.sum() * area.step[0] * area.step[1], rel=1e-6)


def test_reach_is_a_polygon_on_both_sides_of_the_date_line():
    site = Site("A", 10.0, 179.99, 5.0)
    bearings = np.arange(0.0, 360.0, 10.0)
    reach = np.full(36, 20e3)
    feature = reach_outline(site, bearings, reach, {})
    rings = [polygon[0] for polygon in feature["geometry"]["coordinates"]]
    assert len(rings) == 2
    assert all(shoelace(ring) > 0.0 for ring in rings)
    measured = sum(GEOD.polygon_area_perimeter(*np.array(ring).T)[0] for ring in rings)
    assert measured == pytest.approx(0.5 * 36 * np.sin(np.radians(10.0)) * 20e3**2, rel=1e-3)
