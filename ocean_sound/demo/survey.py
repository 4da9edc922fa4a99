"""Synthetic survey lines over a seabed known everywhere, through water known everywhere; all of it invented.

An ideal echo sounder goes to and fro over Ostray Bank: every beam's time is that of its exact path, through the water
at its ping, to where it meets the seabed. Only the casts taken on the way and the surface sound speed have errors, and
these are drawn from the accuracies stated with them. So what a correction gets wrong is known to the millimetre.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts import Cast
from ..errors import InputError
from ..profile import Accuracy, Profile
from ..soundings.beams import HIT, below_transducer, carried_on
from ..soundings.columns import INPUTS, OUTPUTS
from ..soundings.positions import earth_radius, flat_depth, flattened, sounding_positions, true_depth
from ..water import find_equation
from .water_model import KINDS, WaterModel, water_model

if TYPE_CHECKING:
    import xarray
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

INVENTED = "INVENTED for demonstrations and tests: no such place, water or survey exists"
ORIGIN = (56.05, -11.0)  # degrees: Ostray Bank, on the outer shelf
START = np.datetime64("2024-08-14T05:00:00", "ns")
_HOUR = 3600.0
_STEP = 1.0  # m between levels of the water and of the casts
_DRAUGHT = 4.0  # m
_SEPARATION = 57.3  # m: the datum above the ellipsoid
_TIDE = (1.1, 12.42 * _HOUR)  # m and s
_HEAVE = ((0.32, 7.9), (0.21, 6.1), (0.12, 11.3))  # m and s
_TURN = 300.0  # s from the end of a line to the beginning of the next
_ACCURATE = 1e-7  # m: how near to the seabed an echo comes from
_MOST_STEPS = 30

# Of each kind of water: number of lines, their length (m) and the hours between casts.
_USUAL: dict[str, tuple[int, float, float]] = {
    "front": (1, 40_000.0, 0.5),
    "internal tide": (20, 12_000.0, 8.0),
    "wandering": (20, 12_000.0, 2.0),
}


@dataclass(frozen=True, eq=False)
class SyntheticSeabed:
    """A smooth seabed: its mean depth and slope, and a few waves and hills on it.

    Parameters
    ----------
    depth : float
        At the origin but for waves and hills, m below the datum.
    slope : tuple of float
        Rise of depth eastward and northward, m per m.
    waves : numpy.ndarray, shape (k, 4)
        Height (m), phase, and wave numbers east and north (rad/m).
    hills : numpy.ndarray, shape (k, 4)
        Height (m, positive: shallower), width (m), and position east and north (m).

    Examples
    --------
    >>> seabed = SyntheticSeabed(100.0, (0.001, 0.0), np.empty((0, 4)), np.array([[5.0, 200.0, 0.0, 0.0]]))
    >>> seabed(np.array([0.0, 3000.0]), 0.0)
    array([ 95., 103.])
    """

    depth: float
    slope: tuple[float, float]
    waves: Floats
    hills: Floats

    def __call__(self, east: ArrayLike, north: ArrayLike) -> Floats:
        """Depth below the datum, m, at metres east and north of the origin."""
        x, y = (np.asarray(each, dtype=np.float64) for each in (east, north))
        found = self.depth + self.slope[0] * x + self.slope[1] * y
        for height, phase, by_east, by_north in self.waves:
            found = found + height * np.cos(by_east * x + by_north * y + phase)
        for height, width, middle_east, middle_north in self.hills:
            found = found - height * np.exp(-((x - middle_east) ** 2 + (y - middle_north) ** 2) / width**2)
        return np.asarray(found, dtype=np.float64)


@dataclass(frozen=True, eq=False)
class Survey:
    """A synthetic survey and the truth about it; made by `synthetic_survey`.

    Attributes
    ----------
    soundings : xarray.Dataset
        What the sounder gave, on `ping` and `beam`, in the layout that is corrected.
    truth : xarray.Dataset
        `depth` (below the water surface), `reduced_depth`, `across_track_distance`, `along_track_distance` and the
        position of each echo; `true_surface_speed` at the transducer of each ping.
    casts : tuple of Cast
        Taken on the way, with errors.
    profiles : tuple of Profile
        Those of the casts, with the uncertainty that the errors were drawn from.
    water : WaterModel
    levels : numpy.ndarray
        Depths, m, between which the true speed is linear.
    seabed : SyntheticSeabed
        Below the datum; the water surface is above that by the water level.
    radius : float
        Of the Earth, m, along the swath.
    """

    soundings: xarray.Dataset
    truth: xarray.Dataset
    casts: tuple[Cast, ...]
    profiles: tuple[Profile, ...]
    water: WaterModel
    levels: Floats
    seabed: SyntheticSeabed
    radius: float

    def true_profile(self, time: np.datetime64, latitude: float, longitude: float) -> Profile:
        """The water as it was: speeds without any error, linear between `levels`."""
        east, north = _plane()(longitude, latitude)
        seconds = float((time - START) / np.timedelta64(1, "ns")) / 1e9
        speed = self.water.speed(seconds, east, north, self.levels)
        return Profile(self.levels, speed, id="truth", time=time, latitude=latitude, longitude=longitude)

    def true_profiles(self) -> tuple[Profile, ...]:
        """The water as it was at each ping."""
        pings = self.soundings[["time", "latitude", "longitude"]]
        columns = (pings[name].to_numpy() for name in ("time", "latitude", "longitude"))
        return tuple(self.true_profile(*place) for place in zip(*columns, strict=True))


@dataclass(frozen=True, eq=False)
class _Track:
    """Where the ship is: lines to and fro along the y axis of a frame turned by the heading of the first."""

    lines: int
    length: float
    spacing: float
    speed: float
    azimuth: float  # degrees, of the first line

    @property
    def hours_on_line(self) -> float:
        return self.lines * self.length / self.speed / _HOUR

    @property
    def end(self) -> float:
        return self.lines * self.length / self.speed + (self.lines - 1) * _TURN

    def pings(self, number: int) -> Floats:
        """Times, s, evenly over what is spent on lines."""
        one = self.length / self.speed
        spent = (np.arange(number) + 0.5) / number * self.lines * one
        return spent + np.minimum(np.floor(spent / one), self.lines - 1) * _TURN

    def at(self, time: Floats) -> tuple[Floats, Floats, Floats]:
        """Metres east and north, and azimuth (degrees)."""
        one = self.length / self.speed
        line = np.clip(np.floor(time / (one + _TURN)), 0, self.lines - 1)
        within = time - line * (one + _TURN)
        turning = np.clip((within - one) / _TURN, 0.0, 1.0)
        forth = line % 2 == 0
        share = np.clip(within / one, 0.0, 1.0)
        along = self.length * (np.where(forth, share, 1.0 - share) - 0.5)
        aside = self.spacing * (line + turning - 0.5 * (self.lines - 1))
        way = np.radians(self.azimuth)
        east, north = along * np.sin(way) + aside * np.cos(way), along * np.cos(way) - aside * np.sin(way)
        return east, north, np.where(forth, self.azimuth, self.azimuth + 180.0)


def synthetic_survey(
    *,
    seed: int = 0,
    kind: str = "front",
    pings: int = 120,
    beams: int = 41,
    max_angle: float = 65.0,
    depth: float = 120.0,
    lines: int | None = None,
    line_length: float | None = None,
    line_spacing: float = 350.0,
    ship_speed: float = 4.0,
    azimuth: float = 80.0,
    along_track_angle: float = 0.0,
    cast_every: float | None = None,
    cast_reach: float | None = None,
    accuracy: Accuracy | None = None,
    sensor_uncertainty: float = 0.2,
    **water: Any,
) -> Survey:
    """Invent a survey.

    Parameters
    ----------
    seed : int
        The same number gives the same survey.
    kind : str
        What changes the water, of `water_model.KINDS`.
    pings, beams : int
        How many pings, evenly over the time on lines (sparser than a real sounder's), and beams at even angles.
    max_angle : float
        The outermost beam's angle from the vertical as steered, degrees.
    depth : float
        Mean depth of the seabed, m.
    lines, line_length, line_spacing, ship_speed, azimuth
        Lines run to and fro (m, m/s), the first along this azimuth (degrees); number and length by kind where not
        given.
    along_track_angle : float
        Degrees by which all beams look forward.
    cast_every : float
        Hours between casts, of which the first is taken at the first ping and one more after the last; by kind where
        not given.
    cast_reach : float, optional
        Depth to which casts go, m; below the deepest seabed where not given, as if taken in the deepest water near by.
    accuracy : Accuracy, optional
        Of the casts: 0.01 degC, 0.01 and 0.1 m, and noise of 0.003 degC, 0.003 and 0.03 m, where not given. Each cast
        draws errors of its own; the sound-speed equation errs alike in all.
    sensor_uncertainty : float
        Standard uncertainty (k = 1) of the sensor of the surface sound speed, m/s: one draw for the survey. Beams are
        steered with what it says.
    **water
        More of `water_model`: `front`, `drift`, `normal`, `period`, `height`, `scales`, `spread`.

    Returns
    -------
    Survey

    Raises
    ------
    InputError
        The kind is unknown, or a number makes no survey.

    Notes
    -----
    The water is taken as level over one swath, the Earth as round (see `soundings.positions`), beams as those of a
    level flat array, which keep sin(angle) over the surface sound speed that they were steered with.

    Examples
    --------
    >>> survey = synthetic_survey(pings=6, beams=5)
    >>> dict(survey.soundings.sizes), len(survey.casts)
    ({'ping': 6, 'beam': 5}, 7)
    >>> survey.truth["depth"].values[0].round(1)
    array([122.9, 122.7, 122.8, 123.2, 123.6])
    """
    if kind not in KINDS:
        raise InputError(f"kind of water is {kind!r}: one of {', '.join(KINDS)} would be right")
    usual = _USUAL[kind]
    track = _Track(usual[0] if lines is None else lines, usual[1] if line_length is None else line_length,
                   line_spacing, ship_speed, azimuth)  # fmt: skip
    every = usual[2] if cast_every is None else cast_every
    _check(track, pings, beams, max_angle, depth, every)
    # each has draws of its own, so that other casts leave the truth as it is
    of_seabed, of_water, of_casts, of_ship = (
        np.random.default_rng(one) for one in np.random.SeedSequence(seed).spawn(4)
    )
    seabed = _seabed(of_seabed, depth)
    levels = np.arange(0.0, 1.25 * depth + 10.0 + _STEP, _STEP)
    error = (find_equation("teos10").standard_error or 0.0) * float(of_water.standard_normal())
    if kind != "wandering":
        water = {"normal": azimuth, **water}
    model = water_model(
        kind, of_water, bottom=depth, latitude=ORIGIN[0], longitude=ORIGIN[1], speed_error=error, **water
    )
    known = accuracy or Accuracy(temperature=0.01, salinity=0.01, pressure=0.1,
                                 temperature_noise=0.003, salinity_noise=0.003, pressure_noise=0.03)  # fmt: skip
    reached = levels if cast_reach is None else levels[levels <= cast_reach]
    casts = tuple(
        _cast(model, track, float(time), number, known, reached, of_casts)
        for number, time in enumerate(np.arange(0.0, track.end + every * _HOUR, every * _HOUR), start=1)
    )
    radius = float(earth_radius(ORIGIN[0], azimuth + 90.0))
    seconds = track.pings(pings)
    frame = track.at(seconds)
    per_ping = _voyage(track, seconds, of_ship.uniform(0.0, 2.0 * np.pi, 1 + len(_HEAVE)))
    speeds = model.speed(seconds[:, None], frame[0][:, None], frame[1][:, None], levels)
    at_face = [np.interp(z, levels, speed) for z, speed in zip(per_ping["transducer_depth"], speeds, strict=True)]
    per_ping["true_surface_speed"] = np.array(at_face)
    per_ping["surface_sound_speed"] = np.array(at_face) + sensor_uncertainty * float(of_ship.standard_normal())
    angles = max_angle * np.linspace(-1.0, 1.0, beams) if beams > 1 else np.zeros(1)
    per_beam = _beams(frame, per_ping, speeds, (levels, seabed, radius), (angles, along_track_angle))
    soundings, truth = _datasets(per_ping, per_beam)
    profiles = tuple(Profile.from_cast(cast, accuracy=known) for cast in casts)
    return Survey(soundings, truth, casts, profiles, model, levels, seabed, radius)


def _check(track: _Track, pings: int, beams: int, max_angle: float, depth: float, every: float) -> None:
    for name, value, allowed in (
        ("pings", pings, pings >= 1),
        ("beams", beams, beams >= 1),
        ("max_angle", max_angle, 0.0 < max_angle <= 75.0),
        ("depth", depth, 30.0 <= depth <= 2000.0),
        ("lines", track.lines, track.lines >= 1),
        ("line_length", track.length, track.length > 0.0),
        ("ship_speed", track.speed, track.speed > 0.0),
        ("cast_every", every, every > 0.0),
    ):
        if not allowed:
            right = {"max_angle": "above 0 and up to 75 degrees", "depth": "30 to 2000 m"}.get(name, "more than 0")
            raise InputError(f"{name} is {value:g}: {right} would be right")


def _seabed(rng: np.random.Generator, depth: float) -> SyntheticSeabed:
    """Gentle: slopes stay below 5 %, so that each beam meets it once."""
    waves = np.empty((3, 4))
    for row, (height, length) in zip(waves, ((0.025, 4100.0), (0.010, 1300.0), (0.003, 420.0)), strict=True):
        way = rng.uniform(0.0, 2.0 * np.pi)
        number = 2.0 * np.pi / length
        row[:] = height * depth, rng.uniform(0.0, 2.0 * np.pi), number * np.sin(way), number * np.cos(way)
    hills = np.column_stack((
        depth * rng.uniform(0.02, 0.04, 4), rng.uniform(250.0, 600.0, 4), rng.uniform(-5e3, 5e3, (4, 2))
    ))  # fmt: skip
    return SyntheticSeabed(depth, (0.0, 0.0), waves, hills)


def _plane(*, inverse: bool = False) -> Any:
    """From longitude and latitude to metres east and north of the origin; inverse: back."""
    from pyproj import Proj

    plane = Proj(proj="aeqd", lat_0=ORIGIN[0], lon_0=ORIGIN[1], ellps="WGS84")
    return lambda first, second: plane(first, second, inverse=inverse)


def _heading(east: Floats, north: Floats, azimuth: Floats) -> Floats:
    """True azimuth of a direction in the plane."""
    from pyproj import Geod

    way, placed = np.radians(azimuth), _plane(inverse=True)
    here, ahead = placed(east, north), placed(east + 50.0 * np.sin(way), north + 50.0 * np.cos(way))
    found: Floats = np.asarray(Geod(ellps="WGS84").inv(*here, *ahead)[0]) % 360.0
    return found


def _cast(
    model: WaterModel,
    track: _Track,
    time: float,
    number: int,
    accuracy: Accuracy,
    levels: Floats,
    rng: np.random.Generator,
) -> Cast:
    """A cast with errors: of calibration, alike on all levels, and noise."""
    east, north, _ = (each[0] for each in track.at(np.array([min(time, track.end)])))
    longitude, latitude = _plane(inverse=True)(float(east), float(north))
    given = {name: getattr(accuracy, name) or 0.0 for name in ("temperature", "salinity", "pressure")}
    noise = {name: getattr(accuracy, f"{name}_noise") for name in given}
    wrong = {
        name: given[name] * rng.standard_normal() + noise[name] * rng.standard_normal(levels.size) for name in given
    }
    wrong["pressure"][0] = 0.0  # the surface is where it is
    temperature, salinity = model.state(time, east, north, np.maximum(levels - wrong["pressure"], 0.0))
    return Cast(
        id=f"OB-{number:02d}",
        values={
            "depth": levels,
            "temperature": temperature + wrong["temperature"],
            "salinity": np.maximum(salinity + wrong["salinity"], 0.0),
        },
        time=_moment(np.array([time]))[0],
        latitude=latitude,
        longitude=longitude,
        attributes={"data": INVENTED},
    )


def _moment(seconds: Floats) -> NDArray[np.datetime64]:
    moments: NDArray[np.datetime64] = START + np.round(seconds * 1e9).astype(np.int64).astype("timedelta64[ns]")
    return moments


def _voyage(track: _Track, seconds: Floats, phases: Floats) -> dict[str, Any]:
    """Where the transducer is at each ping, and how high the water."""
    east, north, azimuth = track.at(seconds)
    longitude, latitude = _plane(inverse=True)(east, north)
    water_level = _TIDE[0] * np.cos(2.0 * np.pi * seconds / _TIDE[1] + phases[0])
    below = np.full(seconds.size, _DRAUGHT)
    for (height, period), phase in zip(_HEAVE, phases[1:], strict=True):
        below += height * np.cos(2.0 * np.pi * seconds / period + phase)
    return {
        "time": _moment(seconds),
        "latitude": np.asarray(latitude),
        "longitude": np.asarray(longitude),
        "heading": _heading(east, north, azimuth),
        "transducer_depth": below,
        "transducer_height": _SEPARATION + water_level - below,
        "water_level": water_level,
    }


def _beams(
    frame: tuple[Floats, ...],
    pings: dict[str, Any],
    speeds: Floats,
    water: tuple[Floats, SyntheticSeabed, float],
    angles: tuple[Floats, float],
) -> dict[str, Floats]:
    """What becomes of each beam of each ping: its time, depth and distances."""
    levels, seabed, radius = water
    names = ("two_way_travel_time", "depth", "across_track_distance", "along_track_distance")
    columns = {name: np.full((speeds.shape[0], angles[0].size), np.nan) for name in names}
    starboard, ahead = np.sin(np.radians(angles[0])), np.sin(np.radians(angles[1]))
    sine = np.hypot(starboard, ahead)
    starboard, ahead = (each / np.where(sine > 0.0, sine, 1.0) for each in (starboard, ahead))
    for ping, (east, north, azimuth) in enumerate(zip(*frame, strict=True)):
        way = np.radians(azimuth)
        by_east = np.cos(way) * starboard + np.sin(way) * ahead
        by_north = np.cos(way) * ahead - np.sin(way) * starboard
        above = float(pings["water_level"][ping])

        def bottom(distance: Floats, here: tuple[Any, ...] = (east, by_east, north, by_north, above)) -> Floats:
            depth: Floats = seabed(here[0] + distance * here[1], here[2] + distance * here[3]) + here[4]
            return depth

        below, steering = (float(pings[name][ping]) for name in ("transducer_depth", "surface_sound_speed"))
        time, depth, distance = _echo(Profile(levels, speeds[ping]), below, radius, sine, steering, bottom)
        for name, values in zip(names, (2.0 * time, depth, distance * starboard, distance * ahead), strict=True):
            columns[name][ping] = values
    columns["across_track_angle"] = np.broadcast_to(angles[0], columns["depth"].shape).copy()
    if angles[1]:
        columns["along_track_angle"] = np.full(columns["depth"].shape, angles[1])
    return columns


def _echo(
    profile: Profile, below: float, radius: float, sine: Floats, steering: float, bottom: Any
) -> tuple[Floats, Floats, Floats]:
    """One-way time, depth and distance of the echo of each beam: the root of depth less that of the seabed, in time."""
    water = below_transducer(flattened(profile, radius), float(flat_depth(below, radius)))
    angle = np.degrees(np.arcsin(np.minimum(sine, 1.0)))
    # the speed of flattened water is larger by radius/(radius - depth); what was steered with is that of the sensor
    steered = np.full(sine.size, steering * radius / (radius - below))

    def over(time: Floats) -> tuple[Floats, Floats, Floats]:
        found = carried_on(water, angle, time, steered)
        depth = np.where(found.status == HIT, true_depth(found.depth, radius), np.nan)
        return depth - bottom(found.across), depth, found.across

    cosine = np.sqrt(1.0 - sine**2)
    rate = water.source_speed * cosine  # how fast it goes down, about
    time = (bottom(np.zeros(sine.size)) - below) / rate * 0.98
    gap, depth, distance = over(time)
    for _ in range(_MOST_STEPS):
        if not (np.abs(gap) > _ACCURATE).any():
            break
        step = np.where(np.abs(gap) > _ACCURATE, -gap / rate, 0.0)
        new_gap, depth, distance = over(time + step)
        turned = np.abs(new_gap - gap) > _ACCURATE
        slope = np.divide(new_gap - gap, step, out=rate.copy(), where=turned & (step != 0.0))
        rate = np.where((slope > 0.2 * rate) & (slope < 5.0 * rate), slope, rate)
        time, gap = time + step, new_gap
    lost = ~(np.abs(gap) <= _ACCURATE)
    return tuple(np.where(lost, np.nan, each) for each in (time, depth, distance))  # type: ignore[return-value]


def _datasets(pings: dict[str, Any], beams: dict[str, Floats]) -> tuple[xarray.Dataset, xarray.Dataset]:
    import xarray as xr

    def on(where: tuple[str, ...], name: str, values: Any) -> tuple[Any, ...]:
        return where, values, {**INPUTS, **OUTPUTS}[name].attributes()

    both, truth = ("ping", "beam"), beams.copy()
    given = {name: truth.pop(name) for name in beams if name in INPUTS}
    face = pings.pop("true_surface_speed")
    soundings = xr.Dataset(
        {
            **{name: on(both, name, values) for name, values in given.items()},
            **{name: on(("ping",), name, values) for name, values in pings.items()},
        },
        attrs={"title": "Synthetic survey of Ostray Bank", "comment": INVENTED},
    )
    truth["reduced_depth"] = truth["depth"] - pings["water_level"][:, None]
    latitude, longitude, heading = (pings[name][:, None] for name in ("latitude", "longitude", "heading"))
    across, along = truth["across_track_distance"], truth["along_track_distance"]
    surface = (pings["transducer_height"] + pings["transducer_depth"])[:, None]
    place = sounding_positions(latitude, longitude, heading, across, along, height=surface)
    truth["sounding_latitude"], truth["sounding_longitude"] = place
    known = xr.Dataset(
        {name: on(both, name, values) for name, values in truth.items()},
        attrs={"title": "The truth about a synthetic survey", "comment": INVENTED},
    )
    words = {"long_name": "true speed of sound at the transducer", "units": "m s-1"}
    known["true_surface_speed"] = ("ping", face, words)
    return soundings, known


def only_casts(survey: Survey, keep: ArrayLike) -> Survey:
    """The same survey with fewer casts.

    Parameters
    ----------
    survey : Survey
    keep : array_like of int
        Positions of the casts kept, in the list of all.
    """
    wanted = np.atleast_1d(np.asarray(keep, dtype=np.int64)).tolist()
    return replace(
        survey,
        casts=tuple(survey.casts[each] for each in wanted),
        profiles=tuple(survey.profiles[each] for each in wanted),
    )
