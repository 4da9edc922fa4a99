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
