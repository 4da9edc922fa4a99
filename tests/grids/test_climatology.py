"""Climatologies: against xarray's interpolation and gsw, over the turn of the year, and what is asked or refused."""

from __future__ import annotations

import gsw
import numpy as np
import pytest
import xarray as xr

from ocean_sound.errors import InputError
from ocean_sound.grids import open_climatology
from ocean_sound.water import sound_speed

DEPTH = np.array([0.0, 100.0, 1000.0, 5000.0])
LATITUDE, LONGITUDE = np.array([40.0, 41.0]), np.array([-30.5, -29.5])


def write(path, temperature, salinity=None, *, time=None, salt=None, warm=None, depth=DEPTH, z=None):
    """A small grid; temperature and salinity are functions of (time index, depth)."""
    warm = {"units": "degC", "standard_name": "sea_water_temperature"} | (warm or {})
    salt = {"units": "1", "standard_name": "sea_water_practical_salinity"} | (salt or {})
    count = 1 if time is None else len(time[0])
    shape = (count, depth.size, 2, 2)

    def field(of):
        columns = np.array([[of(k, d) for d in depth] for k in range(count)])
        return np.broadcast_to(columns[:, :, None, None], shape)

    dims = ("time", "depth", "lat", "lon")
    fields = {"temp": (dims, field(temperature), warm)}
    if salinity is not None:
        fields["salt"] = (dims, field(salinity), salt)
    axes = {
        "lat": ("lat", LATITUDE, {"units": "degrees_north"}),
        "lon": ("lon", LONGITUDE, {"units": "degrees_east"}),
        "depth": ("depth", depth, {"units": "m", "positive": "down"} | (z or {})),
    }
    if time is not None:
        axes["time"] = ("time", np.asarray(time[0], float), time[1])
    xr.Dataset(fields, axes).to_netcdf(path)
    return path


def warm(_, depth):
    return 2.0 + 18.0 * np.exp(-depth / 800.0)


def salty(_, depth):
    return 35.0 + depth * 1e-4


class TestKinds:
    def test_in_situ_and_practical_are_taken_as_they_are(self, tmp_path):
        column = open_climatology(write(tmp_path / "a.nc", warm, salty)).at(40.3, -30.1)
        assert column.depth.tolist() == DEPTH.tolist()
        assert column.temperature == pytest.approx(warm(0, DEPTH), abs=1e-12)
        assert column.salinity == pytest.approx(salty(0, DEPTH), abs=1e-12)

    @pytest.mark.parametrize("kind", ["potential", "conservative"])
    @pytest.mark.parametrize("salt", ["practical", "absolute"])
    def test_others_are_converted_by_teos10(self, tmp_path, kind, salt):
        attributes = {"standard_name": f"sea_water_{kind}_temperature"}
        path = write(
            tmp_path / "a.nc", warm, salty, warm=attributes, salt={"standard_name": f"sea_water_{salt}_salinity"}
        )
        column = open_climatology(path).at(40.5, -30.0)
        pressure = gsw.p_from_z(-DEPTH, 40.5)
        given = salty(0, DEPTH)
        absolute = given if salt == "absolute" else gsw.SA_from_SP(given, pressure, -30.0, 40.5)
        # back from what we got: the conversions of gsw the other way round
        back = gsw.SP_from_SA(absolute, pressure, -30.0, 40.5)
        assert column.salinity == pytest.approx(back, abs=1e-9)
        if kind == "potential":
            again = gsw.pt0_from_t(absolute, column.temperature, pressure)
        else:
            again = gsw.CT_from_t(absolute, column.temperature, pressure)
        assert again == pytest.approx(warm(0, DEPTH), abs=1e-6)

    def test_potential_read_as_in_situ_would_be_1_9_m_per_s_wrong_at_5000_dbar(self, tmp_path):
        # The figure is that of the task this package was written for; here it is found again by way of gsw.
        potential = {"standard_name": "sea_water_potential_temperature"}
        depth = np.array([0.0, -gsw.z_from_p(5000.0, 40.5)])
        right = open_climatology(write(tmp_path / "p.nc", lambda *_: 1.6, lambda *_: 34.9, warm=potential, depth=depth))
        wrong = open_climatology(write(tmp_path / "t.nc", lambda *_: 1.6, lambda *_: 34.9, depth=depth))
        speeds = [
            sound_speed(column.temperature[1], column.salinity[1], pressure=5000.0, latitude=40.5, longitude=-30.0)
            for column in (right.at(40.5, -30.0), wrong.at(40.5, -30.0))
        ]
        assert speeds[0] - speeds[1] == pytest.approx(1.9, abs=0.15)

    def test_what_is_not_said_is_asked(self, tmp_path):
        bare = {"standard_name": ""}
        path = write(tmp_path / "a.nc", warm, salty, warm=bare, salt={"standard_name": "sea_water_salinity"})
        with pytest.raises(
            InputError, match=r"no standard name, .* give temperature= as 'in-situ', 'potential' or 'conservative'"
        ):
            open_climatology(path)
        with pytest.raises(
            InputError, match="'sea_water_salinity' leaves open what it is; give salinity= as 'practical' or 'absolute'"
        ):
            open_climatology(path, temperature="potential")
        column = open_climatology(path, temperature="in-situ", salinity="practical").at(40.0, -30.5)
        assert column.temperature == pytest.approx(warm(0, DEPTH))

    def test_a_kind_against_the_standard_name(self, tmp_path):
        path = write(tmp_path / "a.nc", warm, salty)
        with pytest.raises(InputError, match="temperature temp is in-situ by its standard name, not potential"):
            open_climatology(path, temperature="potential")
        with pytest.raises(InputError, match="temperature is 'warm'; 'in-situ', 'potential' or 'conservative' would"):
            open_climatology(path, temperature="warm")
        with pytest.raises(InputError, match="temperature_scale is 'ITS'"):
            open_climatology(path, temperature_scale="ITS")

    def test_potential_needs_salinity_which_may_stand_in_another_file(self, tmp_path):
        potential = {"standard_name": "sea_water_potential_temperature"}
        alone = write(tmp_path / "t.nc", warm, warm=potential)
        with pytest.raises(InputError, match=r"is potential and it holds no salinity, .* give .* salinity_path="):
            open_climatology(alone)
        other = write(tmp_path / "s.nc", warm, salty, depth=np.array([0.0, 500.0, 5000.0]))
        column = open_climatology(alone, salinity_path=other).at(40.0, -30.0)
        assert column.salinity == pytest.approx(salty(0, DEPTH), abs=1e-9)
        with pytest.raises(InputError, match=r"no variable is a salinity .* it holds temp: say which"):
            open_climatology(alone, salinity_path=alone)

    def test_scales_and_units(self, tmp_path):
        path = write(tmp_path / "k.nc", lambda k, d: warm(k, d) + 273.15, salty, warm={"units": "K"})
        assert open_climatology(path).at(40.0, -30.0).temperature == pytest.approx(warm(0, DEPTH))
        old = open_climatology(write(tmp_path / "o.nc", warm, salty), temperature_scale="IPTS-68").at(40.0, -30.0)
        # Saunders (1990), WOCE Newsletter 10: t90 = t68 / 1.00024
        assert old.temperature == pytest.approx(warm(0, DEPTH) / 1.00024, abs=1e-12)
        with pytest.raises(InputError, match="temperature temp is in 'furlong'; degC or K"):
            open_climatology(write(tmp_path / "u.nc", warm, warm={"units": "furlong"}))
        with pytest.raises(InputError, match="salinity salt is in 'kg'; 1, PSU or g/kg"):
            open_climatology(write(tmp_path / "v.nc", warm, salty, salt={"units": "kg"}))

    def test_levels_of_pressure_and_of_height(self, tmp_path):
        pressure = write(tmp_path / "p.nc", warm, salty, z={"units": "dbar"})
        assert open_climatology(pressure).at(40.5, -30.0).depth == pytest.approx(-gsw.z_from_p(DEPTH, 40.5))
        height = write(tmp_path / "h.nc", warm, salty, depth=-DEPTH[::-1], z={"positive": "up"})
        column = open_climatology(height).at(40.5, -30.0)
        assert column.depth.tolist() == DEPTH.tolist()
        assert column.temperature == pytest.approx(warm(0, -DEPTH), abs=1e-9)
        with pytest.raises(InputError, match="axis depth is in furlong; m or dbar"):
            open_climatology(write(tmp_path / "f.nc", warm, z={"units": "furlong"})).at(40.0, -30.0)


MIDDLES = (np.arange(12) + 0.5) * 365.2425 / 12.0


class TestSeasons:
    @pytest.mark.parametrize(
        ("values", "attributes"),
        [
            (MIDDLES * 24.0, {"units": "hour since 0000-01-01 00:00:00", "modulo": " "}),
            (MIDDLES, {"units": "days since 1955-01-01", "climatology": "climatology_bounds"}),
            (np.arange(12) + 0.5, {"units": "months since 1955-01-01"}),
            (np.arange(1.0, 13.0), {"axis": "T", "units": "month", "modulo": " "}),
        ],
        ids=["modulo", "climatology", "months", "numbers"],
    )
    def test_linear_between_the_middles_of_months_and_over_new_year(self, tmp_path, values, attributes):
        path = write(tmp_path / "m.nc", lambda k, _: float(k), salty, time=(values, attributes))
        water = open_climatology(path)

        def month(time):
            return water.at(40.0, -30.0, time).temperature[0]

        assert month("2026-01-16T05:00") == pytest.approx(0.0, abs=0.01)
        assert month("2024-07-16T12:00") == pytest.approx(6.0, abs=0.05)
        assert month("2025-03-01T22:00") == pytest.approx(1.5, abs=0.05)
        # half-way between December (11) and January (0)
        assert month("2025-12-31T23:59") == pytest.approx(5.5, abs=0.02)
        assert month("2026-01-01T00:01") == pytest.approx(5.5, abs=0.02)
        many = water.along([40.0, 41.0], [-30.0, -30.0], np.array(["2025-12-31T23:59", "2024-07-16T12:00"], "M8[s]"))
        assert many.temperature[:, 0] == pytest.approx([5.5, 6.0], abs=0.05)
        with pytest.raises(InputError, match="changes with the time of year, and no time is given"):
            month(None)

    def test_real_dates_are_no_season(self, tmp_path):
        time = ([0.0, 31.0], {"units": "days since 2015-01-01"})
        water = open_climatology(write(tmp_path / "m.nc", lambda k, _: 31.0 * k, salty, time=time))
        assert water.at(40.0, -30.0, "2015-01-11").temperature[0] == pytest.approx(10.0)
        with pytest.raises(
            InputError, match="holds dates from 2015-01-01T00:00:00 to 2015-02-01T00:00:00; a time between"
        ):
            water.at(40.0, -30.0, "2016-01-11")


def test_which_variable_is_asked_where_more_than_one_could_be(tmp_path):
    path = write(tmp_path / "a.nc", warm, salty)
    with xr.open_dataset(path, decode_times=False) as data:
        more = data.load().assign(t_sd=data["temp"])
    more.to_netcdf(tmp_path / "b.nc")
    with pytest.raises(
        InputError, match="temp, t_sd could each be the temperature; say which by temperature_variable="
    ):
        open_climatology(tmp_path / "b.nc")
    assert open_climatology(tmp_path / "b.nc", temperature_variable="temp").at(40.0, -30.0).temperature.size == 4
    with pytest.raises(InputError, match="has no variable 'x'; it has temp"):
        open_climatology(path, temperature_variable="x")


class TestRealGrids:
    def test_levitus_against_xarray(self, real_data):
        path = real_data / "climatology" / "levitus_annual_north_atlantic.nc"
        with pytest.raises(InputError, match="no standard name, which leaves open what it is; give temperature="):
            open_climatology(path)
        water = open_climatology(path, temperature="in-situ", salinity="practical")
        with xr.open_dataset(path, decode_times=False) as data:
            place = {"YAXLEVITR": 32.3, "XAXLEVITR": 360.0 - 64.6}
            oracle = data[["TEMP", "SALT"]].interp(place).load()
        column = water.at(32.3, -64.6)
        whole = np.isfinite(oracle.TEMP.to_numpy())
        assert whole.sum() >= 17
        both = np.isin(column.depth, oracle.ZAXLEVITR.to_numpy()[whole])
        np.testing.assert_allclose(column.temperature[both], oracle.TEMP.to_numpy()[whole], atol=1e-5)
        np.testing.assert_allclose(column.salinity[both], oracle.SALT.to_numpy()[whole], atol=1e-5)

    def test_levitus_over_greenwich_and_on_land(self, real_data):
        path = real_data / "climatology" / "levitus_annual_north_atlantic.nc"
        water = open_climatology(path, temperature="in-situ", salinity="practical")
        with pytest.raises(InputError, match=r"has no water at latitude 40.5, longitude -4.5: it is land there"):
            water.at(40.5, -4.5)
        with pytest.raises(
            InputError, match=r"longitude 10 lies outside the grid of TEMP, which reaches from 280.5 to 359.5"
        ):
            water.at(40.0, 10.0)
        assert water.at(5.0, -0.2).depth[0] == 0.0  # half a cell beyond the last meridian of the window

    def test_months_of_the_atlas(self, real_data):
        path = real_data / "climatology" / "ocean_atlas_monthly_temp_north_atlantic.nc"
        with pytest.raises(InputError, match=r"TEMP has no unit; give temperature_unit= as 'degC' or 'K'"):
            open_climatology(path, temperature="in-situ")
        water = open_climatology(path, temperature="in-situ", temperature_unit="degC")
        winter, summer = (water.at(42.5, -61.5 + 360.0, time) for time in ("2020-01-16T06:00", "2020-08-15"))
        assert winter.salinity is None
        assert summer.temperature[0] - winter.temperature[0] > 8.0
        with xr.open_dataset(path, decode_times=False) as data:
            oracle = data["TEMP"].isel(TIME=0).interp(YAX_SUBSET=42.5, XAX_SUBSET=298.5).load().to_numpy()
        np.testing.assert_allclose(winter.temperature, oracle[np.isfinite(oracle)], atol=0.01)
