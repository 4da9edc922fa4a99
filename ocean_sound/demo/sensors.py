"""The part of the demonstration for someone placing sensors: receivers for tags on fish around an invented bank."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..casts import read_casts
from ..figures import coverage_map_figure, save_figure
from ..files import packaged_profile, write_dataset
from ..grids import open_bathymetry
from ..profile import Profile
from ..reports import sensors_report, write_report
from ..sensors import Area, Hearing, LossSettings, Member, Noise, Receiver, Site, Target, Task, Wanted, place_sensors

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    import xarray

CASTS = ("invented/ostray_edge.csv", "invented/ostray_edge_later.csv")
TITLE, INVENTED = "Receivers at Ostray Edge", "invented data"
SOUTH, NORTH, WEST, EAST = 56.008, 56.040, -11.290, -11.226
FREQUENCY, SOURCE_LEVEL = 40e3, 150.0  # Hz, dB re 1 uPa at 1 m
ABSORPTION = 11.0  # dB/km, of this water at this frequency by Francois and Garrison (1982)
FISH, HANGING = (15.0, 60.0), 50.0  # depths, m
NUMBER = 3


def receivers(folder: Path) -> Iterator[str]:
    """Choose places for receivers, and write the page that says what they hear."""
    write_dataset(_bank(), folder / "receivers-seabed.nc", replace=True)
    bathymetry = open_bathymetry(folder / "receivers-seabed.nc")
    members = [
        Member(cast.id, (Profile.from_cast(cast),))
        for cast in (next(iter(read_casts(packaged_profile(name)))) for name in CASTS)
    ]
    area = Area.box(SOUTH, NORTH, WEST, EAST, spacing=200.0, depths=FISH, bathymetry=bathymetry)
    places = [(lat, lon) for lat in (56.016, 56.032) for lon in (-11.276, -11.258, -11.240)]
    noise = Noise.of(FREQUENCY, FREQUENCY, wind_speeds=[3.0, 8.0, 14.0], shares=[0.3, 0.5, 0.2])
    task = Task(
        area=area,
        members=members,
        bathymetry=bathymetry,
        hearing=Hearing(Target(SOURCE_LEVEL), Receiver(detection_threshold=10.0, bandwidth=1000.0), noise),
        settings=LossSettings(
            frequency=FREQUENCY, max_range=2000.0, depths=np.linspace(FISH[0], FISH[1], 8), bearings=8, ranges=40,
            absorption=ABSORPTION, wind_speed=7.0, smooth=10.0,
        ),
        candidates=[Site(f"site {k}", lat, lon, HANGING) for k, (lat, lon) in enumerate(places, start=1)],
        wanted=Wanted(NUMBER),
    )  # fmt: skip
    found = place_sensors(task)
    write_dataset(found.to_dataset(), folder / "receivers.nc", replace=True)
    picture = coverage_map_figure(found.to_dataset(), level=found.level, title=TITLE, remark=INVENTED)
    save_figure(picture, folder / "receivers.png", replace=True)
    page = sensors_report(
        found,
        title=TITLE,
        remark="Invented data: place, casts, seabed and tags.",
        inputs=[*map(packaged_profile, CASTS), folder / "receivers-seabed.nc"],
        sources=[INVENTED],
    )
    write_report(folder / "receivers.html", page, replace=True)
    told = found.summary()
    yield "6. Receivers for tags on fish around a bank at Ostray Edge (invented casts and seabed)"
    yield f"   {len(places)} candidate sites, {NUMBER} receivers, two waters: {told['choice']['method']} choice,"
    yield f"   one hears a tag with {found.level:.0%} or more over {found.covered():.0%} of the area (receivers.html)"
    for sensor in told["sensors"]:
        reach = sensor["detection_range"]
        yield (
            f"     {sensor['name']}: adds {sensor['gain']:.0%}; hears to {reach['50%']:.0f} m "
            f"({reach['10%']:.0f} to {reach['90%']:.0f} m by wind and water)"
        )


def _bank() -> xarray.Dataset:
    """The invented seabed: a bank of 90 m that rises from 200 m."""
    import xarray as xr

    latitude, longitude = np.linspace(55.97, 56.08, 45), np.linspace(-11.36, -11.15, 48)
    y, x = np.meshgrid(latitude, longitude, indexing="ij")
    height = 110.0 * np.exp(-(((y - 56.026) / 0.010) ** 2) - ((x + 11.262) / 0.014) ** 2) - 200.0
    about = {"standard_name": "height_above_mean_sea_level", "long_name": "height of the seabed", "units": "m"}
    return xr.Dataset(
        {"height": (("latitude", "longitude"), height, about | {"positive": "up"})},
        {
            "latitude": ("latitude", latitude, {"standard_name": "latitude", "units": "degrees_north"}),
            "longitude": ("longitude", longitude, {"standard_name": "longitude", "units": "degrees_east"}),
        },
        {"title": "an invented bank at Ostray Edge, for demonstrations; not for navigation"},
    )
