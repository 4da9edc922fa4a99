"""The check casts that the gsw package carries: three ocean casts, with values from another implementation."""

from __future__ import annotations

from pathlib import Path

import gsw
import numpy as np
import pytest

from ocean_sound.water import (
    absolute_salinity,
    compressibility,
    conservative_temperature,
    density,
    depth_from_pressure,
    pressure_from_depth,
    sound_speed,
)

FILE = Path(gsw.__file__).parent / "tests" / "gsw_cv_v3_0.npz"
pytestmark = [
    pytest.mark.skipif(not FILE.exists(), reason="this gsw comes without its check casts"),
    pytest.mark.filterwarnings("ignore::ocean_sound.water.OutOfRangeWarning"),
]


@pytest.fixture(scope="module")
def cast():
    """The columns, and the position of each cast."""
    with np.load(FILE) as file:
        return {name: file[name] for name in file.files}


@pytest.fixture(scope="module")
def state(cast):
    where = {"latitude": cast["lat_chck_cast"], "longitude": cast["long_chck_cast"]}
    return (cast["t_chck_cast"], cast["SP_chck_cast"]), {"pressure": cast["p_chck_cast"], **where}


def close(values, cast, name):
    """Within the accuracy that the check values state for themselves."""
    expected = cast[name]
    good = np.isfinite(expected)
    assert good.any()
    assert np.abs(values - expected)[good].max() <= float(cast[f"{name}_ca"].max())


def test_speed(cast, state):
    water, where = state
    close(sound_speed(*water, **where), cast, "sound_speed")
    close(sound_speed(*water, **where, equation="teos10-exact"), cast, "sound_speed_t_exact")


def test_density_and_compressibility(cast, state):
    water, where = state
    close(density(*water, **where), cast, "rho")
    close(compressibility(*water, **where), cast, "kappa")
    close(compressibility(*water, **where, exact=True), cast, "kappa_t_exact")


def test_absolute_salinity_and_conservative_temperature(cast, state):
    (t, sp), where = state
    p = where["pressure"]
    sa = absolute_salinity(sp, p, latitude=where["latitude"], longitude=where["longitude"])
    close(sa, cast, "SA_from_SP")
    close(conservative_temperature(sa, t, p), cast, "CT_from_t")


def test_depth(cast, state):
    _, where = state
    close(-depth_from_pressure(where["pressure"], where["latitude"]), cast, "z_from_p")
    depth = depth_from_pressure(where["pressure"], where["latitude"])
    np.testing.assert_allclose(pressure_from_depth(depth, where["latitude"]), where["pressure"], atol=1e-6)
