"""What the tests of sensors share: a sea of closed forms, and small grids of the seabed on disk."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from ocean_sound.grids import open_bathymetry
from ocean_sound.profile import Profile
from ocean_sound.sensors.losses import LossSettings, compute_losses
from ocean_sound.sensors.waters import Member

ALPHA = 1e-3  # dB/m


def spherical(section, *, source_depth, frequency, ranges, depths, **_):
    """Spherical spreading and absorption: what water of one speed without boundaries does to sound."""
    slant = np.hypot(np.asarray(ranges)[:, None], np.asarray(depths)[None, :] - source_depth)
    return 20.0 * np.log10(slant) + ALPHA * slant


@pytest.fixture
def still():
    """Water of one speed."""
    return Member("still", (Profile([0.0, 100.0], [1500.0, 1500.0], id="still"),))


@pytest.fixture
def losses_of(still):
    """Losses of closed form around sites over 100 m of water."""

    def compute(sites, *, folder=None, members=None, bathymetry=100.0, engine=spherical, scheduler=None, **settings):
        grid = {"frequency": 12e3, "max_range": 10e3, "depths": np.linspace(0.0, 90.0, 10), "bearings": 24,
                "ranges": 100, "kind": None, **settings}  # fmt: skip
        return compute_losses(
            sites, members or [still], settings=LossSettings(**grid), bathymetry=bathymetry, folder=folder,
            engine=engine, scheduler=scheduler,
        )  # fmt: skip

    return compute


@pytest.fixture
def bathymetry_file(tmp_path):
    """A function that writes heights from a formula of latitude and longitude, and opens them."""

    def write(height, latitude, longitude, name="seabed.nc"):
        lat, lon = np.meshgrid(latitude, longitude, indexing="ij")
        path = tmp_path / name
        xr.Dataset(
            {"z": (("lat", "lon"), np.broadcast_to(height(lat, lon), lat.shape), {"units": "m", "positive": "up"})},
            {
                "lat": ("lat", latitude, {"units": "degrees_north"}),
                "lon": ("lon", longitude, {"units": "degrees_east"}),
            },
        ).to_netcdf(path)
        return open_bathymetry(path)

    return write
