import numpy as np
import pytest

from ocean_sound.casts import VARIABLES
from ocean_sound.errors import InputError
from ocean_sound.files import FLAG_MEANINGS, FLAG_VALUES, attributes, header, unit_text

# CF standard-name table, version 83 (17 October 2023): names and canonical units.
STANDARD = {
    "temperature": "sea_water_temperature",
    "salinity": "sea_water_practical_salinity",
    "pressure": "sea_water_pressure_due_to_sea_water",
    "depth": "depth",
    "conductivity": "sea_water_electrical_conductivity",
    "sound_speed": "speed_of_sound_in_sea_water",
    "density": "sea_water_density",
    "absolute_salinity": "sea_water_absolute_salinity",
    "conservative_temperature": "sea_water_conservative_temperature",
    "latitude": "latitude",
    "longitude": "longitude",
    "time": "time",
}


@pytest.mark.parametrize(("name", "standard_name"), STANDARD.items())
def test_standard_names_are_those_of_the_table(name, standard_name):
    assert attributes(name)["standard_name"] == standard_name


def test_depth_counts_downward_and_temperature_is_on_a_scale():
    assert attributes("depth")["positive"] == "down"
    assert attributes("temperature")["units_metadata"] == "temperature: on_scale"  # CF 1.11, section 3.1.2


def test_flags_by_cf_section_3_5():
    found = attributes("salinity_flag")
    assert found["flag_values"].dtype == np.int8
    assert tuple(found["flag_values"]) == FLAG_VALUES == (1, 2, 3, 4, 9)
    assert len(found["flag_meanings"].split()) == len(FLAG_VALUES)
    assert found["flag_meanings"] == FLAG_MEANINGS


def test_a_caller_may_change_what_it_gets():
    attributes("depth")["units"] = "furlong"
    assert attributes("depth")["units"] == "m"


def test_every_quantity_has_units_or_is_a_label():
    for name in ("range", "travel_time", "launch_angle", "sound_speed_uncertainty", "turns"):
        assert {"long_name", "units"} <= set(attributes(name))


def test_unknown_name():
    with pytest.raises(InputError, match="no CF attributes for a variable named 'colour'"):
        attributes("colour")


def test_heads_of_columns():
    assert header("depth") == "depth [m]"
    assert header("salinity") == "salinity [PSS-78]"
    assert header("turns") == "turns"
    assert unit_text("nothing of ours") is None
    assert all(unit_text(name) for name in VARIABLES)
