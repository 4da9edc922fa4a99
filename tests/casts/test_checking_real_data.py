"""Checks over real open casts: how often they blame what the source calls good, and whether they find what is bad."""

from __future__ import annotations

from collections import Counter

import gsw
import netCDF4
import numpy as np
import pytest

from ocean_sound.casts import Cast, CastBlock, check_block, read_blocks
from ocean_sound.errors import CastFileError
from ocean_sound.profile.speeds import speeds_of_block

FOLDERS = ("argo", "exchange", "csv", "cf_profiles", "wod")
LARGEST_SHARE = 0.005


@pytest.fixture(scope="module")
def blocks(real_data):
    """Every block of casts that can be read, with the file it is from."""
    found = []
    for path in sorted(path for folder in FOLDERS for path in (real_data / folder).iterdir()):
        try:
            found += [(f"{path.parent.name}/{path.name}", block) for block in read_blocks(path)]
        except CastFileError:
            continue  # that each is read, or refused with the true reason, is asserted where reading is tested
    assert sum(name.startswith("argo/") for name, _ in found) == 13
    return found


def without_flags(block):
    return CastBlock(
        row_size=block.row_size,
        values=block.values,
        id=block.id,
        time=block.time,
        latitude=block.latitude,
        longitude=block.longitude,
    )


def test_false_alarms(blocks, record_property):
    """Under 0.5 % of what the source flags good is flagged by any one test, and of the levels by all of them."""
    good, blamed = Counter(), Counter()
    for _, block in blocks:
        _, report = check_block(block)
        of_level = {"good": np.zeros(block.starts[-1], bool), "blamed": np.zeros(block.starts[-1], bool)}
        for test, flags in report.levels.items():
            for name, flag in flags.items():
                if name in block.flags:
                    fine = block.flags[name] == 1
                    bad = fine & ((flag == 3) | (flag == 4))
                    good[test] += int((fine & (flag != 2)).sum())
                    blamed[test] += int(bad.sum())
                    of_level["good"] |= fine
                    of_level["blamed"] |= bad
        good["levels, all tests"] += int(of_level["good"].sum())
        blamed["levels, all tests"] += int(of_level["blamed"].sum())
    assert good["levels, all tests"] > 45_000
    for test, count in good.items():
        line = f"{blamed[test]} of {count}, {100.0 * blamed[test] / count:.3f} %"
        record_property(test, line)
        print(f"{test}: {line}")  # noqa: T201 - the figures belong in the note on the work
        assert blamed[test] < LARGEST_SHARE * count, (test, line)


def test_nothing_bad_at_the_source_gets_better(blocks):
    for name, block in blocks:
        seen, _ = check_block(block)
        for variable, before in block.flags.items():
            after = seen.flags[variable]
            for flag in (3, 4, 9):
                assert (after[before == flag] >= flag).all(), (name, variable, flag)
        for before, after in zip(block.notes, seen.notes, strict=True):
            assert after[: len(before)] == before
            assert len(after) > len(before)


@pytest.fixture(scope="module")
def raw_4901079(real_data):
    """The values of this float as they were sent, and the flags that its data centre gave them."""
    with netCDF4.Dataset(real_data / "argo" / "4901079_prof.nc") as dataset:
        dataset.set_auto_mask(False)
        values = {
            ours: np.asarray(dataset[name][:], float)
            for ours, name in (("pressure", "PRES"), ("temperature", "TEMP"), ("salinity", "PSAL"))
        }
        salinity_flags = np.asarray(dataset["PSAL_QC"][:])
    rows = values["pressure"] < 99_000.0
    casts = [
        Cast(
            id=str(index),
            values={name: np.where(v[index] > 99_000.0, np.nan, v[index])[rows[index]] for name, v in values.items()},
        )
        for index in range(len(rows))
    ]
    return CastBlock.from_casts(casts), salinity_flags[rows]


def speeds(values):
    absolute = gsw.SR_from_SP(values["salinity"])
    conservative = gsw.CT_from_t(absolute, values["temperature"], values["pressure"])
    return gsw.sound_speed(absolute, conservative, values["pressure"])


def test_the_known_bad_levels_of_4901079_are_caught(raw_4901079):
    """The MANIFEST: 'c up to 1592 m/s from bad levels', salinities of 0 to 51 among them, all without source flags."""
    block, salinity_flags = raw_4901079
    assert not block.flags
    seen, _ = check_block(block)
    good = np.all([seen.flags[name] == 1 for name in block.values], axis=0)
    speed = speeds(block.values)
    assert np.nanmax(speed) > 1592.0
    assert np.nanmax(speed[good]) < 1545.0
    bad = salinity_flags == b"4"
    assert bad.sum() == 16
    missed = bad & good
    # One is the first level of the first cast, which nothing above contradicts: 33.77 above 34.63.
    assert block.values["salinity"][missed].round(2).tolist() == [33.77]
    absurd = (block.values["salinity"] < 10.0) | (block.values["salinity"] > 40.0)
    assert absurd.sum() == 11
    assert (seen.flags["salinity"][absurd] == 4).all()


def test_sentinels_of_expendable_probes_are_caught(blocks):
    """The MANIFEST: 'flagged levels often hold the sentinel 99.9 degC'; here without the source's flags."""
    found = 0
    for _, block in blocks:
        temperature = block.values.get("temperature")
        if temperature is not None and (temperature > 99.0).any():
            seen, _ = check_block(without_flags(block))
            assert (seen.flags["temperature"][temperature > 99.0] == 4).all()
            found += 1
    if not found:
        pytest.skip("no file with such sentinels could be read")


def test_pressure_that_turns_back_is_flagged(blocks):
    """What remains of every cast of depth or pressure goes one way."""
    for name, block in blocks:
        seen, _ = check_block(block)
        vertical = "pressure" if "pressure" in block.values else "depth"
        for index in range(len(block)):
            rows = slice(block.starts[index], block.starts[index + 1])
            used = seen.flags[vertical][rows] == 1
            steps = np.diff(block.values[vertical][rows][used])
            assert (steps > 0).all() or (steps < 0).all(), (name, block.id[index])


def test_what_reaches_a_profile_is_good_and_its_speed_possible(blocks):
    """No level flagged 3, 4 or 9 does; speeds lie between those of the coldest and of the warmest sea at their depth.

    The bounds are common practice: fresh ice melt to 36 degC at the surface; -1.5 degC to the 22 degC of the Red Sea at
    1000 m and below.
    """
    levels = 0
    for name, block in blocks:
        seen, _ = check_block(block)
        speeds = speeds_of_block(seen, salinity=35.0)
        measured = speeds.level[speeds.level >= 0]
        direct = np.repeat(speeds.direct, speeds.row_size)[speeds.level >= 0]
        for variable, used_by in (("sound_speed", direct), ("temperature", ~direct), ("salinity", ~direct)):
            if variable not in seen.flags:
                continue
            usable = np.isin(seen.flags[variable], [1, 2])
            # a cast without one usable salinity has it assumed here
            has = np.repeat(np.logical_or.reduceat(usable, block.starts[:-1]), block.row_size)
            rows = measured[used_by]
            assert usable[rows[has[rows]]].all(), (name, variable)
        low = np.interp(speeds.depth, [0.0, 1000.0, 6000.0], [1400.0, 1450.0, 1535.0])
        high = np.interp(speeds.depth, [0.0, 1000.0, 6000.0], [1565.0, 1550.0, 1640.0])
        assert (speeds.speed > low).all(), name
        assert (speeds.speed < high).all(), name
        levels += measured.size
    assert levels > 60_000
