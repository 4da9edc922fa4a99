"""Plans: what they accept, and what they say of each field at fault."""

from __future__ import annotations

import re

import pytest

from ocean_sound.errors import PlanError
from ocean_sound.files import looks_like_toml
from ocean_sound.plans import read_rays_plan

GOOD = """
[water]
file = "cast.csv"
[source]
depth = 30.0
[rays]
max_range = 5000
number = 11
"""


def test_a_good_plan_is_read_with_its_defaults(tmp_path):
    path = tmp_path / "plan.toml"
    path.write_text(GOOD)
    plan = read_rays_plan(path)
    assert (plan.water.file, plan.source.depth, plan.rays.max_range, plan.rays.number) == ("cast.csv", 30.0, 5000.0, 11)
    assert (plan.rays.lowest_angle, plan.seabed.depth, plan.shadow.wanted) == (-20.0, None, False)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("depth = 30.0", "", "field 'source.depth' is missing: give a number at least 0 and at most 12000"),
        ("depth = 30.0", "depth = -3", "field 'source.depth' is -3: give a number at least 0 and at most 12000"),
        ("depth = 30.0", 'depth = "deep"', "field 'source.depth' is 'deep': give a number"),
        ("depth = 30.0", "depth = nan", "field 'source.depth' is nan: give a number"),
        ("depth = 30.0", "depht = 30.0", "field 'source.depht' is unknown: did you mean 'depth'?"),
        ("number = 11", "number = 1.5", "field 'rays.number' is 1.5: give a whole number at least 1"),
        ("number = 11", "colour = 1", "field 'rays.colour' is unknown: known here: max_range, lowest_angle"),
        ("[source]", "[sources]", "field 'source' is missing: give a table [source] with depth"),
        ("[source]", "[sources]", "field 'sources' is unknown: did you mean 'source'?"),
        ('file = "cast.csv"', "file = 3", "field 'water.file' is 3: give a text"),
        ('file = "cast.csv"', 'file = "c.csv"\ncolumns = {depth = 3}', "field 'water.columns.depth' is 3: give a text"),
        ("[shadow]", "", ""),
    ],
)
def test_each_fault_is_told_with_its_field(tmp_path, old, new, message):
    path = tmp_path / "plan.toml"
    path.write_text(GOOD.replace(old, new))
    if not message:
        read_rays_plan(path)
        return
    with pytest.raises(PlanError, match=re.escape(f"{path}: ") + ".*" + re.escape(message)) as caught:
        read_rays_plan(path)
    assert all(line.startswith(f"{path}: field ") for line in str(caught.value).splitlines())


def test_all_faults_are_told_at_once(tmp_path):
    path = tmp_path / "plan.toml"
    path.write_text(GOOD.replace("30.0", "-1").replace("5000", "0"))
    with pytest.raises(PlanError, match=r"(?s)source\.depth.*rays\.max_range"):
        read_rays_plan(path)


def test_what_is_not_toml_or_not_there_is_told(tmp_path):
    path = tmp_path / "plan.toml"
    path.write_text("[water\nfile = 3")
    with pytest.raises(PlanError, match=r"plan\.toml: is not TOML: .*line 1"):
        read_rays_plan(path)
    with pytest.raises(PlanError, match=r"other\.toml: can't be read: No such file"):
        read_rays_plan(tmp_path / "other.toml")


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (GOOD, True),
        ("# a plan\nwater.file = 'x'\n", True),
        ('title = "x"\n', True),
        ("depth,speed\n0,1500\n", False),
        ("station = 5\ndepth,speed\n0,1500\n", False),
        ("", False),
    ],
)
def test_plans_are_told_from_casts(tmp_path, text, expected):
    path = tmp_path / "something"
    path.write_text(text)
    assert looks_like_toml(path) is expected


SECTION = """
[water]
files = ["a.csv", "b.csv"]
[seabed]
points = [[0.0, 900.0], [20000.0, 300.0]]
kinds = [[0.0, "clay"], [5000.0, "sand"]]
[surface]
wind_speed = 5
[source]
depth = 30.0
[rays]
max_range = 5000
[arrivals]
receiver_depths = [10.0, 20.0]
receiver_ranges = [4000]
[loss]
frequency = 300
[shadow]
wanted = true
at_depths = [50.0]
"""
GRID = """
[water]
grid = "levitus.nc"
start = [31.5, -64.0]
end = [32.0, -64.5]
[source]
depth = 30.0
[rays]
max_range = 5000
[shadow]
wanted = true
"""
MANY = GRID.replace("end = [32.0, -64.5]\n", "") + "[ensemble]\nbearings = [0.0, 90.0]\n"


@pytest.mark.parametrize("text", [SECTION, GRID, MANY])
def test_a_plan_of_a_section_is_read(tmp_path, text):
    path = tmp_path / "plan.toml"
    path.write_text(text)
    plan = read_rays_plan(path)
    assert plan.needs_section
    if text is SECTION:
        assert plan.seabed.kinds == [[0.0, "clay"], [5000.0, "sand"]]
        assert (plan.loss.method, plan.loss.phases, plan.arrivals.max_bounces) == ("auto", "kept", 4)


def test_one_profile_over_a_flat_seabed_needs_no_section(tmp_path):
    path = tmp_path / "plan.toml"
    path.write_text(GOOD + "[seabed]\ndepth = 100.0\n")
    assert not read_rays_plan(path).needs_section


@pytest.mark.parametrize(
    ("text", "old", "new", "message"),
    [
        (GOOD, 'file = "cast.csv"', "", "field 'water.file' is missing: give file (one cast), files"),
        (
            GOOD,
            'file = "cast.csv"',
            'file = "c.csv"\nfiles = ["d.csv"]',
            "field 'water.files' stands beside 'water.file'",
        ),
        (
            GOOD,
            'file = "cast.csv"',
            'file = "c.csv"\ntime = "2024"',
            "'water.time' makes no sense with one cast: it goes with grid",
        ),
        (
            GOOD,
            'file = "cast.csv"',
            'file = "c.csv"\nreach = 3.0',
            "'water.reach' makes no sense with one cast: it goes with files",
        ),
        (
            GOOD,
            "[source]",
            '[seabed]\nbathymetry = "g.nc"\n[source]',
            "'seabed.bathymetry' makes no sense below one cast",
        ),
        (GOOD, "[source]", '[seabed]\nkind = "sand"\n[source]', "'seabed.kind' needs to know where the seabed is"),
        (
            GOOD,
            "[source]",
            '[seabed]\ndepth = 9.0\nkind = "mud"\n[source]',
            "'seabed.kind' is 'mud': give clay, silt, sand",
        ),
        (
            GOOD,
            "max_range = 5000",
            "max_range = 5000\nlowest_angle = 30.0",
            "'rays.lowest_angle' is 30, above 'rays.highest_angle', 20",
        ),
        (
            GOOD,
            "[source]",
            '[ensemble]\ntimes = ["2024-01-01", "2024-02-01"]\n[source]',
            "'ensemble.times' needs water at more than one place or time",
        ),
        (
            GOOD,
            "[source]",
            "[ensemble]\nsource_depths = [1.0, 2.0]\n[source]",
            "'ensemble' has nothing to find: give [loss], or shadow.wanted = true",
        ),
        (GOOD, "[source]", "[shadow]\nat_depths = [5.0]\n[source]", "'shadow.at_depths' goes with wanted = true"),
        (
            SECTION,
            "[[0.0, 900.0], [20000.0, 300.0]]",
            "[[0.0, 900.0], [20000.0]]",
            "'seabed.points' has [20000.0]: give range and depth",
        ),
        (
            SECTION,
            '[5000.0, "sand"]',
            '["sand", 5000.0]',
            "'seabed.kinds' has ['sand', 5000.0]: give a range in m and a kind",
        ),
        (SECTION, '[5000.0, "sand"]', '[5000.0, "mud"]', "'seabed.kinds' is 'mud': give clay"),
        (
            SECTION,
            "wind_speed = 5",
            "wind_speed = -5",
            "'surface.wind_speed' is -5: give a number at least 0 and at most 100",
        ),
        (SECTION, "frequency = 300", "", "field 'loss.frequency' is missing: give a number"),
        (
            SECTION,
            "frequency = 300",
            'frequency = 300\nmethod = "magic"',
            "'loss.method' is 'magic': give 'auto' or 'beams' or 'modes'",
        ),
        (
            SECTION,
            "frequency = 300",
            "frequency = 300\nat_ranges = [10.0, 9000.0]",
            "'loss.at_ranges' has 9000, beyond 'rays.max_range': give at most 5000 m",
        ),
        (
            SECTION,
            "frequency = 300",
            "frequency = 300\nat_depths = [10.0, 10.0]",
            "'loss.at_depths' is [10.0, 10.0]: give numbers of metres that increase",
        ),
        (SECTION, "[4000]", "[4000, 7000]", "'arrivals.receiver_ranges' has 7000, beyond 'rays.max_range'"),
        (SECTION, "[4000]", "[3000, 4000, 4500]", "'arrivals.receiver_depths' has 2 numbers and 'receiver_ranges' 3"),
        (SECTION, "[4000]", "[0]", "'arrivals.receiver_ranges' is 0: give"),
        (GRID, "end = [32.0, -64.5]", "", "'water.end' is missing: a grid needs a line, by start and end or by along"),
        (
            GRID,
            "end = [32.0, -64.5]",
            "end = [132.0, -64.5]",
            "'water.end' is [132.0, -64.5]: give latitude and longitude",
        ),
        (GRID, "end = [32.0, -64.5]", "end = [32.0]", "'water.end' is [32.0]: give a list, each a number"),
        (
            GRID,
            "end = [32.0, -64.5]",
            "along = [[31.0, -64.5], [32.0, -64.5]]",
            "'water.along' stands beside 'water.start'",
        ),
        (
            GRID,
            "[source]",
            "[seabed]\ndepth = 10.0\npoints = [[0.0, 1.0], [9.0, 2.0]]\n[source]",
            "'seabed.points' stands beside 'seabed.depth'",
        ),
        (
            MANY,
            "start = [31.5, -64.0]",
            "start = [31.5, -64.0]\nend = [32.0, -64.0]",
            "'water.end' stands beside 'ensemble.bearings'",
        ),
        (MANY, "bearings = [0.0, 90.0]", "", "'ensemble' has none: give one of files, source_depths, bearings, times"),
        (
            MANY,
            "bearings = [0.0, 90.0]",
            'bearings = [0.0, 90.0]\nworkers = 2\nscheduler = "tcp://a:1"',
            "'ensemble.workers' stands beside",
        ),
    ],
)
def test_what_makes_no_sense_together_is_told_by_its_field(tmp_path, text, old, new, message):
    path = tmp_path / "plan.toml"
    assert old in text
    path.write_text(text.replace(old, new, 1))
    with pytest.raises(
        PlanError, match=re.escape(f"{path}: field ") + ".*" + re.escape(message.removeprefix("field "))
    ):
        read_rays_plan(path)
