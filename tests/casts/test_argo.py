import netCDF4
import numpy as np
import pytest

from ocean_sound.casts import read_blocks, read_casts
from ocean_sound.errors import CastFileError

FILL = np.float32(99999.0)
N, LEVELS = 4, 3


def chars(text, width):
    return np.array(list(text.ljust(width)), "S1")


@pytest.fixture
def argo(tmp_path):
    """An invented file by the Argo user's manual: four profiles of three levels; the last holds no temperature."""
    path = tmp_path / "invented_prof.nc"
    with netCDF4.Dataset(path, "w", format="NETCDF3_CLASSIC") as dataset:
        for name, size in (("N_PROF", N), ("N_LEVELS", LEVELS), ("N_PARAM", 3), ("STRING8", 8), ("STRING16", 16)):
            dataset.createDimension(name, size)

        def put(name, dims, values, kind="S1", **attributes):
            fill = {"fill_value": FILL} if kind == "f4" else {"fill_value": 999999.0} if kind == "f8" else {}
            variable = dataset.createVariable(name, kind, dims, **fill)
            variable.setncatts(attributes)
            variable[:] = values

        put("PLATFORM_NUMBER", ("N_PROF", "STRING8"), np.stack([chars("1234567", 8)] * N))
        put(
            "PROJECT_NAME",
            ("N_PROF", "STRING16"),
            np.stack([np.frombuffer(b"Oc\xe9an    ".ljust(16, b"\0"), "S1")] * N),
        )
        put("CYCLE_NUMBER", ("N_PROF",), [1, 1, 2, 3], "i4")
        put("DIRECTION", ("N_PROF",), np.array(list("AADA"), "S1"))
        put("DATA_MODE", ("N_PROF",), np.array(list("RDAD"), "S1"))
        put(
            "JULD", ("N_PROF",), [27000.5, 27000.5, 999999.0, 27000.5], "f8", units="days since 1950-01-01 00:00:00 UTC"
        )
        put("JULD_QC", ("N_PROF",), np.array(list("1191"), "S1"))
        put("LATITUDE", ("N_PROF",), [10.0, -20.0, 30.0, 0.0], "f8")
        put("LONGITUDE", ("N_PROF",), [200.0, -20.0, 30.0, 0.0], "f8")
        put("POSITION_QC", ("N_PROF",), np.array(list("1141"), "S1"))
        pres = [[1, 2, 3], [1, 2, FILL], [1, 2, 3], [1, 2, 3]]
        temp = [[10, 11, 12], [10, 11, FILL], [10, 11, 12], [FILL] * 3]
        adjusted = [[FILL] * 3, [10.5, 11.5, FILL], [FILL] * 3, [FILL] * 3]
        for name, values, better in (("PRES", pres, pres), ("TEMP", temp, adjusted)):
            put(name, ("N_PROF", "N_LEVELS"), np.array(values, "f4"), "f4")
            put(
                f"{name}_QC",
                ("N_PROF", "N_LEVELS"),
                np.array([list("158"), list("23 "), list("049"), list("999")], "S1"),
            )
            put(f"{name}_ADJUSTED", ("N_PROF", "N_LEVELS"), np.array(better, "f4"), "f4")
            put(
                f"{name}_ADJUSTED_QC",
                ("N_PROF", "N_LEVELS"),
                np.array([list("   "), list("14 "), list("111"), list("999")], "S1"),
            )
    return path


def test_what_an_argo_file_says(argo):
    (block,) = read_blocks(argo)
    assert block.id == ("1234567_001_ascending", "1234567_001_ascending_2", "1234567_002_descending")
    assert block.row_size.tolist() == [3, 2, 3]
    real_time, delayed, empty_adjusted = block
    # Argo reference table 2: 1, 2, 5, 8 usable; 0 no check; 3 probably bad; 4 bad; 9 missing
    assert real_time.temperature.tolist() == [10.0, 11.0, 12.0]
    assert real_time.flags["temperature"].tolist() == [1, 1, 1]
    assert delayed.temperature.tolist() == [10.5, 11.5]
    assert delayed.flags["temperature"].tolist() == [1, 4]
    assert empty_adjusted.temperature.tolist() == [10.0, 11.0, 12.0]  # mode A, but ADJUSTED is all fill
    assert empty_adjusted.flags["temperature"].tolist() == [2, 4, 4]  # 'missing' beside a value: the source says none
    assert real_time.longitude == -160.0
    assert real_time.time == np.datetime64("1950-01-01") + np.timedelta64(27000 * 24 + 12, "h")
    assert np.isnat(empty_adjusted.time)
    assert real_time.attributes["data_mode"] == "real time"
    assert empty_adjusted.attributes["direction"] == "descending"
    assert real_time.attributes["project"] == "Oc?an"  # a byte that is not ASCII


def test_what_is_doubtful_or_left_out_is_said(argo):
    (block,) = read_blocks(argo)
    assert [why for _, why in block.left_out] == ["holds no pressure together with temperature or salinity"]
    assert "profile 4 of 4 (1234567_003_ascending)" in block.left_out[0][0]
    assert any("profile 4 of 4" in note for note in block.notes[0])
    assert "position is doubtful: its flag in the file is '4'" in block.notes[2]
    assert "time is doubtful: its flag in the file is '9'" in block.notes[2]
    assert "adjusted values of pressure, temperature" in block.notes[1]


def test_one_parameter_may_have_a_mode_of_its_own(argo):
    with netCDF4.Dataset(argo, "a") as dataset:
        names = dataset.createVariable("STATION_PARAMETERS", "S1", ("N_PROF", "N_PARAM", "STRING16"))
        names[:] = np.stack([np.stack([chars("PRES", 16), chars("TEMP", 16), chars("", 16)])] * N)
        modes = dataset.createVariable("PARAMETER_DATA_MODE", "S1", ("N_PROF", "N_PARAM"))
        modes[:] = np.array([list("RR ")] * N, "S1")
    cast = list(read_casts(argo))[1]
    assert cast.temperature.tolist() == [10.0, 11.0]
    assert cast.flags["temperature"].tolist() == [1, 3]


def test_what_no_adjustment_saved_is_kept_and_bad(argo):
    """Manual: a delayed-mode value that can't be adjusted is fill, flagged 4; the raw one must not stand in as good."""
    with netCDF4.Dataset(argo, "a") as dataset:
        dataset["TEMP_QC"][1] = np.array(list("111"), "S1")
        dataset["TEMP_ADJUSTED"][1] = [10.5, FILL, FILL]
        dataset["TEMP_ADJUSTED_QC"][1] = np.array(list("149"), "S1")
    cast = list(read_casts(argo))[1]
    assert cast.temperature.tolist() == [10.5, 11.0]
    assert cast.flags["temperature"].tolist() == [1, 4]
    with netCDF4.Dataset(argo, "a") as dataset:
        dataset["TEMP_ADJUSTED"][1] = FILL
        dataset["TEMP_ADJUSTED_QC"][1] = np.array(list("444"), "S1")
    cast = list(read_casts(argo))[1]
    assert (cast.temperature.tolist(), cast.flags["temperature"].tolist()) == ([10.0, 11.0], [4, 4])
    with netCDF4.Dataset(argo, "a") as dataset:  # delayed mode that leaves nothing and says nothing of it
        dataset["TEMP_ADJUSTED_QC"][1] = np.array(list("   "), "S1")
    cast = list(read_casts(argo))[1]
    assert (cast.temperature.tolist(), cast.flags["temperature"].tolist()) == ([10.0, 11.0], [3, 3])


def test_a_synthetic_file_with_a_mode_for_each_parameter(argo):
    """Salinity delayed, temperature as received, in one profile; the profile's own mode says D."""
    with netCDF4.Dataset(argo, "a") as dataset:
        for name, value in (("PSAL", 35.0), ("PSAL_ADJUSTED", 35.5)):
            dataset.createVariable(name, "f4", ("N_PROF", "N_LEVELS"), fill_value=FILL)[:] = value
            flags = dataset.createVariable(f"{name}_QC", "S1", ("N_PROF", "N_LEVELS"))
            flags[:] = np.full((N, LEVELS), b"1")
        names = dataset.createVariable("STATION_PARAMETERS", "S1", ("N_PROF", "N_PARAM", "STRING16"))
        names[:] = np.stack([np.stack([chars("PSAL", 16), chars("TEMP", 16), chars("PRES", 16)])] * N)
        modes = dataset.createVariable("PARAMETER_DATA_MODE", "S1", ("N_PROF", "N_PARAM"))
        modes[:] = np.array([list("DRR")] * N, "S1")
    cast = list(read_casts(argo))[1]
    assert cast.salinity[:2].tolist() == [35.5, 35.5]
    assert cast.temperature[:2].tolist() == [10.0, 11.0]
    assert "adjusted values of salinity" in cast.notes
    assert "values of pressure, temperature as received, not adjusted" in cast.notes


def test_other_files_of_argo_are_refused_by_their_own_name(tmp_path):
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as dataset:
        dataset.createDimension("N_MEASUREMENT", 2)
        dataset.createDimension("STRING16", 16)
        dataset.createVariable("DATA_TYPE", "S1", ("STRING16",))[:] = chars("Argo trajectory", 16)
        dataset.createVariable("PRES", "f4", ("N_MEASUREMENT",))[:] = [1, 2]
        dataset.createVariable("TEMP", "f4", ("N_MEASUREMENT",))[:] = [1, 2]
    with pytest.raises(CastFileError, match=r"a\.nc: is a file of 'Argo trajectory', which holds no profiles"):
        list(read_casts(tmp_path / "a.nc"))


def test_the_wrong_order_of_dimensions(tmp_path):
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as dataset:
        for name, size in (("N_PROF", 2), ("N_LEVELS", 3)):
            dataset.createDimension(name, size)
        dataset.createVariable("DATA_MODE", "S1", ("N_PROF",))[:] = np.array(list("RR"), "S1")
        for name in ("PRES", "TEMP"):
            dataset.createVariable(name, "f4", ("N_LEVELS", "N_PROF"))[:] = np.ones((3, 2))
    with pytest.raises(CastFileError, match=r"PRES lies along \(N_LEVELS, N_PROF\); in an Argo profile file it must"):
        list(read_casts(tmp_path / "a.nc"))


def test_no_profile_to_use(argo):
    with netCDF4.Dataset(argo, "a") as dataset:
        dataset["PRES"][:] = FILL
        dataset["PRES_ADJUSTED"][:] = FILL
    with pytest.raises(CastFileError, match=r"no usable level: each of its 4 profiles holds no pressure"):
        list(read_casts(argo))


def test_cut_short(argo, tmp_path):
    data = argo.read_bytes()
    for size in (10, 500, len(data) // 2, len(data) - 5):
        short = tmp_path / f"short{size}.nc"
        short.write_bytes(data[:size])
        with pytest.raises(CastFileError, match=rf"short{size}\.nc: .*(cut short|can't be read)"):
            list(read_casts(short))
