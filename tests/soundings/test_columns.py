"""The table of variables, the reasons, and the block."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.errors import InputError
from ocean_sound.soundings.columns import (
    CASES,
    FLAG_OF_REASON,
    INPUTS,
    OUTPUTS,
    REASON,
    REASON_OF_DIRECTION,
    REASONS,
    PingBlock,
    missing_line,
)
from ocean_sound.soundings.directions import DIRECTION_STATUSES


def test_every_reason_has_its_code_and_a_qartod_flag():
    # QARTOD, Manual for the Use of Real-Time Oceanographic Data Quality Control Flags (2014), table 1
    assert [reason.code for reason in REASONS] == list(range(len(REASONS)))
    assert {reason.flag for reason in REASONS} == {1, 2, 3, 4, 9}
    assert FLAG_OF_REASON.tolist() == [reason.flag for reason in REASONS]
    assert [REASON[reason.name] for reason in REASONS] == list(range(len(REASONS)))
    assert all(" " not in reason.name for reason in REASONS)


def test_every_status_of_a_direction_has_a_reason():
    assert len(REASON_OF_DIRECTION) == len(DIRECTION_STATUSES)
    assert REASON_OF_DIRECTION[0] == REASON["none"]
    names = [REASONS[code].name for code in REASON_OF_DIRECTION]
    assert names[1:] == ["no_angle", "no_direction", "no_speed", "no_attitude", "not_at_face", "not_downward"]


def test_no_name_is_read_and_written():
    assert not set(INPUTS) & set(OUTPUTS)
    for names in CASES.values():
        assert set(names) <= {*INPUTS, *OUTPUTS}


def test_attributes_are_those_of_cf():
    flag = OUTPUTS["sounding_flag"].attributes()
    assert flag["standard_name"] == "quality_flag"
    assert flag["flag_values"].dtype == OUTPUTS["sounding_flag"].dtype
    reason = OUTPUTS["sounding_reason"].attributes()
    assert len(reason["flag_values"]) == len(reason["flag_meanings"].split()) == len(REASONS)
    assert OUTPUTS["depth"].attributes()["positive"] == "down"
    assert OUTPUTS["sounding_height"].attributes()["positive"] == "up"
    for column in (*INPUTS.values(), *OUTPUTS.values()):
        assert column.units or column.kind in {"time", "code"}


def test_a_block_gives_columns_that_broadcast():
    block = PingBlock(
        {"heading": np.array([1.0, 2.0])},
        {"across_track_angle": np.arange(6.0).reshape(2, 3)},
        7,
        np.zeros((2, 3), bool),
    )
    assert block.shape == (2, 3)
    assert block.names == ("heading", "across_track_angle")
    assert block.of("heading").tolist() == [[1.0], [2.0]]
    part = block.part(1, 2)
    assert part.start == 8
    assert part.of("across_track_angle").tolist() == [[3.0, 4.0, 5.0]]
    assert part.impossible.shape == (1, 3)


@pytest.mark.parametrize(
    ("pings", "beams", "impossible"),
    [
        ({}, {}, None),
        ({"heading": np.zeros(3)}, {"across_track_angle": np.zeros((2, 3))}, None),
        ({}, {"across_track_angle": np.zeros(3)}, None),
        ({}, {"across_track_angle": np.zeros((2, 3)), "two_way_travel_time": np.zeros((2, 4))}, None),
        ({}, {"across_track_angle": np.zeros((2, 3))}, np.zeros((3, 3), bool)),
    ],
)
def test_a_block_of_unequal_columns_is_refused(pings, beams, impossible):
    with pytest.raises(InputError, match=r"columns of \(n,\) and \(n, m\) for its beams"):
        PingBlock(pings, beams, 0, impossible)


def test_all_that_is_missing_is_named_at_once():
    assert missing_line("beams", CASES["beams"], "a.nc") is None
    line = missing_line("beams", ["transducer_depth"], "a.nc")
    assert line.startswith("a.nc: two_way_travel_time [s], across_track_angle [degree] are missing; optional are")
    assert "surface_sound_speed" in line
    assert "recorded_depth" not in line
