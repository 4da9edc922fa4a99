"""The files in profiles/: that they are what their README says, and stable water."""

from __future__ import annotations

import runpy
from pathlib import Path

import gsw
import numpy as np
import pytest

from ocean_sound.casts import read_casts
from ocean_sound.files.packaged import packaged_profile, packaged_profiles
from ocean_sound.profile import Profile

FOLDER = Path(__file__).parents[2] / "profiles"
MADE = runpy.run_path(str(FOLDER / "make.py"))
INVENTED = ("ostray_firth", "ostray_edge", "ostray_deep")


def cast_of(name):
    (cast,) = read_casts(packaged_profile(name))
    return cast


@pytest.mark.parametrize("name", sorted(MADE["texts"]()))
def test_computed_files_follow_from_their_formulas(name):
    # The last digit of a logarithm or power may differ between machines: numbers are compared, not bytes.
    made = MADE["texts"]()[name].splitlines()
    kept = (FOLDER / name).read_text(encoding="utf-8").splitlines()
    assert len(kept) == len(made)
    for one, other in zip(kept, made, strict=True):
        if one[:1].isdigit() and other[:1].isdigit():
            numbers = [[float(field) for field in line.split(",")] for line in (one, other)]
            assert numbers[0] == pytest.approx(numbers[1], rel=1e-12, abs=1.1e-4 if "invented" in name else 0.0)
        else:
            assert one == other


# Munk's formula evaluated independently with numpy, to the digits given (checks munk.c.*).
@pytest.mark.parametrize(
    ("depth", "speed"),
    [
        (0, 1548.521015),
        (100, 1538.573679),
        (200, 1530.287317),
        (1000, 1501.381592),
        (1300, 1500.0),
        (2000, 1504.616182),
        (5000, 1551.910737),
    ],
    ids=lambda value: str(value) if isinstance(value, int) else "",
)
def test_munk_values(depth, speed):
    assert Profile.from_cast(cast_of("munk")).at(depth) == pytest.approx(speed, abs=1e-6)


def test_munk_is_read_to_the_last_bit():
    depth, speed = MADE["munk"]()
    profile = Profile.from_cast(cast_of("munk"))
    assert np.array_equal(profile.depth, depth)
    assert np.array_equal(profile.speed, speed)
    assert profile.features().axis_depth == 1300.0


@pytest.mark.parametrize("name", [*INVENTED, "ostray_edge_later"])
def test_invented_casts_say_so_and_are_stable(name):
    path = packaged_profile(name)
    assert path.read_text(encoding="utf-8").startswith("# data: INVENTED")
    cast = cast_of(name)
    absolute = gsw.SA_from_SP(cast.salinity, cast.pressure, cast.longitude, cast.latitude)
    conservative = gsw.CT_from_t(absolute, cast.temperature, cast.pressure)
    assert gsw.Nsquared(absolute, conservative, cast.pressure, cast.latitude)[0].min() >= 0.0
    assert not np.isnat(cast.time)


def test_the_story_of_the_readme():
    firth, edge, deep = (Profile.from_cast(cast_of(name)).features() for name in INVENTED)
    assert firth.sonic_layer_speed - firth.surface_speed == pytest.approx(15.0, abs=0.5)
    assert firth.sonic_layer_depth == pytest.approx(7.5, abs=0.5)
    assert edge.sonic_layer_depth == pytest.approx(20.0, abs=0.5)
    assert edge.steepest_gradient < -1.0
    assert deep.axis_depth == pytest.approx(1100.0, abs=20.0)
    assert deep.critical_depth == pytest.approx(2900.0, abs=50.0)


@pytest.mark.parametrize("number", [1, 2, 3])
def test_gsw_casts_are_those_of_the_package(number):
    archive = Path(gsw.__file__).parent / "tests" / "gsw_cv_v3_0.npz"
    if not archive.exists():
        pytest.skip("this gsw carries no check casts")
    cast = cast_of(f"gsw_check_cast_{number}")
    with np.load(archive) as values:
        for name, key in (("pressure", "p"), ("temperature", "t"), ("salinity", "SP")):
            column = values[f"{key}_chck_cast"][:, number - 1]
            assert np.array_equal(getattr(cast, name), column[np.isfinite(column)])
        assert cast.latitude == values["lat_chck_cast"][number - 1]
        assert (cast.longitude - values["long_chck_cast"][number - 1]) % 360.0 == 0.0


@pytest.mark.parametrize("name", [name for name in packaged_profiles() if name.endswith(".csv")])
def test_every_packaged_file_gives_profiles(name):
    # one bottle cast of the cruise has suspect salinities only
    casts = list(read_casts(packaged_profile(name)))
    profiles = [Profile.from_cast(cast, use_suspect="33RR" in name) for cast in casts]
    assert profiles
    for profile in profiles:
        assert 1390.0 < profile.speed.min() <= profile.speed.max() < 1600.0
