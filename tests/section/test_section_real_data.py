"""Sections of real water: casts off Bermuda in April 2016 over GEBCO, and the Levitus climatology."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr
from pyproj import Geod

from ocean_sound.casts import read_casts
from ocean_sound.errors import InputError
from ocean_sound.grids import open_climatology
from ocean_sound.profile import Profile
from ocean_sound.section import Section, Track
from ocean_sound.water import sound_speed

LINE = [(30.796, -63.491), (32.3, -64.573)]


@pytest.fixture(scope="module")
def casts(real_data):
    return [cast for cast in read_casts(real_data / "exchange" / "BIOS20160414_ct1.zip") if len(cast) > 1]


@pytest.fixture(scope="module")
def seabed_grid(real_data):
    return real_data / "bathymetry" / "gebco2025_6min_bermuda.nc"


@pytest.fixture(scope="module")
def section(casts, seabed_grid):
    track = Track.of(LINE)
    _, off = track.nearest([cast.latitude for cast in casts], [cast.longitude for cast in casts])
    near = [cast for cast, away in zip(casts, off, strict=True) if away < 15e3]
    return Section.from_casts(near, along=track, reach=15e3, apart=2e3, seabed=seabed_grid)


@pytest.fixture(scope="module")
def climatology(real_data):
    path = real_data / "climatology" / "levitus_annual_north_atlantic.nc"
    return open_climatology(path, temperature="in-situ", salinity="practical")


def test_casts_stand_where_pyproj_has_them(section):
    geod = Geod(ellps="WGS84")
    # the first cast is the start of the line, and the deep station lies by it
    assert section.places[0] == pytest.approx(0.0, abs=1.0)
    deep = next(j for j, cast in enumerate(section.profiles) if cast.depth[-1] > 4000.0)
    cast = section.profiles[deep]
    latitude, longitude = section.track.at(section.places[deep])
    off = geod.inv(cast.longitude, cast.latitude, float(longitude), float(latitude))[2]
    ends = [geod.inv(cast.longitude, cast.latitude, b, a)[2] for a, b in LINE]
    assert off < 15e3
    assert section.places[deep] == pytest.approx(np.sqrt(ends[0] ** 2 - off**2), rel=1e-3)
    assert section.max_range == pytest.approx(geod.line_length([-63.491, -64.573], [30.796, 32.3]), rel=1e-12)


def test_the_field_is_the_casts_where_they_are(section):
    assert section.overshoot < 0.05
    assert section.fit.departure < 0.03
    assert section.fit.between < 0.2
    for place, cast in zip(section.places, section.profiles, strict=True):
        used = cast.depth <= section.deepest
        away = np.abs(section.speed_at(place, cast.depth[used]) - cast.speed[used])
        # averaged over 10 m: fine structure goes, the equation's own error is 0.05
        assert np.sqrt(np.mean(away**2)) < 0.1


def test_the_seabed_is_that_of_the_grid(section, seabed_grid):
    with xr.open_dataset(seabed_grid) as grid:
        heights = grid["Height"].interp(
            lat=("x", section.track.at(section.seabed.ranges)[0]), lon=("x", section.track.at(section.seabed.ranges)[1])
        )
        assert section.seabed.depths == pytest.approx(-heights.to_numpy(), abs=0.5)
    assert 1000.0 < section.seabed.depths[-1] < 2000.0  # on the slope of Bermuda
    assert 4200.0 < section.seabed.depths[0] < 5000.0


def test_what_was_done_is_said(section):
    said = "\n".join(section.notes)
    for words in (
        "seabed from gebco2025_6min_bermuda.nc",
        "assumed to be of sand",
        "BIOS20160414_10323_4 left out",
        "reaches 1202 m: below by BIOS20160414_10323_5",
        "the speed grows as by pressure alone",
        "the casts were taken over 5.2 days",
        "flattened: the Earth's radius is 63",
    ):
        assert words in said
    assert 0.05 < section.uncertainty_at(50e3, 100.0) < 0.5
    assert np.isnan(section.uncertainty_at(50e3, 3000.0))


def test_lent_water_agrees_with_a_cast_that_went_there(casts):
    """The deep cast cut at 1200 m and lent the water of another 63 km away, against what it measured itself."""
    deep = Profile.from_cast(next(cast for cast in casts if cast.id == "BIOS20160414_10323_5"))
    other = Profile.from_cast(next(cast for cast in casts if cast.id == "BIOS20160414_61288_1"))
    cut = deep.at_levels(deep.depth[deep.depth < 1200.0])
    section = Section.from_casts([cut, other], seabed=3300.0)
    z = np.linspace(1200.0, 3300.0, 200)
    error = section.speed_at(0.0, z) - deep.at(z)
    assert np.abs(error).max() < 1.5
    assert np.sqrt(np.mean(error**2)) < 0.5


def test_a_line_over_land_or_out_of_the_grid_is_told(casts, seabed_grid):
    with pytest.raises(InputError, match=r"gebco2025_6min_bermuda.nc: is land .* km along the line"):
        Section.from_casts(casts[:2], along=[(32.302, -64.798), (31.0, -64.7)], reach=1e6, seabed=seabed_grid)
    with pytest.raises(InputError, match=r"gebco2025_6min_bermuda.nc: longitude .* lies outside the grid"):
        Section.from_casts(casts[:2], along=[(31.0, -64.7), (32.0, -50.7)], reach=1e6, seabed=seabed_grid)
    with pytest.raises(InputError, match=r"cast 'BIOS20160414_10323_2' lies 46.2 km off the track"):
        Section.from_casts(casts, along=LINE, seabed=seabed_grid)


def test_a_section_through_the_climatology(climatology, seabed_grid):
    section = Section.from_grid(climatology, (28.5, -69.0), (34.0, -59.0), seabed=seabed_grid)
    for j in (0, 5, 12):
        profile = section.profiles[j]
        column = climatology.at(profile.latitude, profile.longitude)
        direct = sound_speed(column.temperature, column.salinity, depth=column.depth, latitude=profile.latitude)
        found = section.speed_at(section.places[j], column.depth)
        assert found == pytest.approx(np.asarray(direct), abs=0.03)
    assert section.overshoot < 0.02
    assert np.isnan(section.uncertainty_at(0.0, 100.0))
    assert "its uncertainty is not known" in section.notes[0]
    # the deep sound channel of the Sargasso Sea, 1000 to 1300 m
    axis = section.profile_at(500e3).features().axis_depth
    assert axis is not None
    assert 900.0 < axis < 1400.0


def test_a_line_of_the_climatology_over_land_is_told(climatology):
    with pytest.raises(
        InputError, match=r"has no water at latitude 36.0000, longitude -80.0000, 0.0 km along the line"
    ):
        Section.from_grid(climatology, (36.0, -80.0), (44.0, -40.0))
    with pytest.raises(InputError, match="spacing is -1 m"):
        Section.from_grid(climatology, (28.5, -69.0), (34.0, -59.0), spacing=-1.0)


def test_what_a_grid_does_not_say_is_asked(real_data):
    with pytest.raises(InputError, match="temperature="):
        Section.from_grid(real_data / "climatology" / "levitus_annual_north_atlantic.nc", (28.5, -69.0), (34.0, -59.0))
    monthly = real_data / "climatology" / "ocean_atlas_monthly_temp_north_atlantic.nc"
    grid = open_climatology(monthly, temperature="in-situ", temperature_unit="degC")
    with pytest.raises(InputError, match="holds no salinity, so no sound speed"):
        Section.from_grid(grid, (28.5, -69.0), (34.0, -59.0), time="2020-06-01")
    with pytest.raises(InputError, match="changes with the time of year"):
        Section.from_grid(grid, (28.5, -69.0), (34.0, -59.0))


def test_without_smoothing_the_field_is_the_casts_to_the_tolerance(casts):
    pair = [cast for cast in casts if cast.id in {"BIOS20160414_10323_9", "BIOS20160414_10323_10"}]
    section = Section.from_casts(pair, smooth=0.0, tolerance=0.02)
    assert section.fit.departure < 0.04
    for place, cast in zip(section.places, section.profiles, strict=True):
        assert np.abs(section.speed_at(place, cast.depth) - cast.speed).max() <= section.fit.departure + 1e-9
