"""Invented water that changes in time and place, known everywhere: what synthetic surveys are taken in.

Temperature and salinity are smooth formulas of depth: a mixed layer over a thermocline, and slowly changing water
below. What changes them is of one kind:

- ``front``: two waters side by side. What makes them up (temperature above and below, depth and thickness of the
  thermocline, ...) goes smoothly from one to the other across a front that drifts.
- ``internal tide``: all water is lifted and lowered by internal waves that come in from one side: the tide itself, a
  weaker neighbour that beats with it, and its first harmonic. Most at half depth, nothing at the surface and the bed.
- ``wandering``: temperature departs from its mean by a few fixed shapes over depth, each times a Gaussian random field
  of covariance exp(-r), r² = (time/scale)² + (distance/length)²: water just as a model of decorrelation imagines it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ..water import speed_of_columns

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

KINDS = ("front", "internal tide", "wandering")
"""What can change the water."""
_HOUR = 3600.0

# Of a water: temperature (degC) above and below the thermocline, its middle and thickness (m), cooling below it
# (degC/m), salinity above and its rise across the thermocline.
_OUTER = np.array([15.4, 10.1, 31.0, 13.0, 0.006, 35.15, 0.20])
_INNER = np.array([13.3, 9.2, 18.0, 17.0, 0.004, 34.45, 0.55])

_TIDE_PERIOD = 12.42 * _HOUR
_PHASE_SPEED = 0.6  # m/s, of an internal tide on a shelf
_WAVES = ((1.0, 1.0), (0.93, 0.30), (2.0, 0.35))  # frequency and height relative to the tide's
_FEATURES = 400  # cosines that make up a random field


@dataclass(frozen=True, eq=False)
class WaterModel:
    """Temperature, salinity and speed of sound at any time and place; made by `water_model`.

    Parameters
    ----------
    kind : str
        Of `KINDS`.
    bottom : float
        Depth, m, at which internal waves no longer move the water.
    numbers : mapping of str to numpy.ndarray
        What the kind is made of.
    latitude, longitude : float
        Of the origin, degrees: where the equation for the speed takes its gravity and salt from.
    speed_error : float
        m/s by which sound is everywhere faster than the equation says.
    """

    kind: str
    bottom: float
    numbers: dict[str, Floats]
    latitude: float
    longitude: float
    speed_error: float = 0.0

    def state(self, time: ArrayLike, east: ArrayLike, north: ArrayLike, depth: ArrayLike) -> tuple[Floats, Floats]:
        """Temperature (degC, ITS-90) and practical salinity.

        Parameters
        ----------
        time, east, north : array_like
            Seconds since the beginning, and metres from the origin.
        depth : array_like
            m below the water surface. All four broadcast together.
        """
        t, x, y, z = (np.asarray(each, dtype=np.float64) for each in (time, east, north, depth))
        if self.kind == "front":
            return _layered(z, self._mixture(t, x, y))
        if self.kind == "internal tide":
            return _layered(z - self._lift(t, x, y) * np.sin(np.pi * np.clip(z / self.bottom, 0.0, 1.0)), _OUTER)
        temperature, salinity = _layered(z, _OUTER)
        for shape, amplitude in zip(self._shapes(z), self._amplitudes(t, x, y), strict=True):
            temperature = temperature + shape * amplitude
        return temperature, np.broadcast_to(salinity, temperature.shape)

    def speed(self, time: ArrayLike, east: ArrayLike, north: ArrayLike, depth: ArrayLike) -> Floats:
        """Speed of sound, m/s; arguments as for `state`."""
        temperature, salinity = self.state(time, east, north, depth)
        z = np.broadcast_to(np.asarray(depth, dtype=np.float64), temperature.shape)
        columns = [np.ascontiguousarray(each).ravel() for each in (temperature, salinity, z)]
        place = {"latitude": np.full(z.size, self.latitude), "longitude": np.full(z.size, self.longitude)}
        speed = speed_of_columns(columns[0], columns[1], depth=columns[2], **place, equation="teos10")
        found: Floats = speed.reshape(z.shape) + self.speed_error
        return found

    def _mixture(self, t: Floats, x: Floats, y: Floats) -> Floats:
        n = self.numbers
        along = x * n["normal"][0] + y * n["normal"][1] - n["start"] - n["drift"] * t
        share = 0.5 * (1.0 + np.tanh(2.0 * along / n["width"]))
        mixed: Floats = _OUTER + np.asarray(share)[..., None] * (_INNER - _OUTER)
        return np.moveaxis(mixed, -1, 0)

    def _lift(self, t: Floats, x: Floats, y: Floats) -> Floats:
        """How far the water at half depth is lowered, m."""
        n = self.numbers
        place = np.stack(np.broadcast_arrays(t, x, y), axis=-1)
        lift: Floats = np.cos(place @ n["waves"].T + n["phase"]) @ n["height"]
        return lift

    def _shapes(self, z: Floats) -> list[Floats]:
        """Departures of temperature over depth, degC for one standard deviation."""
        steep = 1.0 / np.cosh(2.0 * (z - _OUTER[2]) / _OUTER[3]) ** 2  # the thermocline moved
        return [
            self.numbers["spread"][0] * steep,
            self.numbers["spread"][1] * np.exp(-z / 15.0),
        ]

    def _amplitudes(self, t: Floats, x: Floats, y: Floats) -> list[Floats]:
        """A value of each random field, of variance 1."""
        n = self.numbers
        place = np.stack(np.broadcast_arrays(t / n["scales"][0], x / n["scales"][1], y / n["scales"][1]), axis=-1)
        return [
            np.cos(place @ vectors.T + phases) @ heights
            for vectors, phases, heights in zip(n["vectors"], n["phases"], n["heights"], strict=True)
        ]


def _layered(z: Floats, parts: Floats) -> tuple[Floats, Floats]:
    above, below, middle, thickness, cooling, salt, rise = parts
    step = 0.5 * (1.0 + np.tanh(2.0 * (z - middle) / thickness))
    deeper = thickness * np.logaddexp(0.0, (z - middle) / thickness)  # below the thermocline; smoothly 0 above it
    return above + (below - above) * step - cooling * deeper, salt + rise * step


def water_model(
    kind: str,
    rng: np.random.Generator,
    *,
    bottom: float,
    latitude: float,
    longitude: float,
    speed_error: float = 0.0,
    front: tuple[float, float] = (0.0, 20_000.0),
    normal: float = 90.0,
    drift: float = 0.05,
    period: float = _TIDE_PERIOD,
    height: float = 6.0,
    scales: tuple[float, float] = (6 * _HOUR, 10_000.0),
    spread: tuple[float, float] = (1.0, 0.4),
) -> WaterModel:
    """Invent water.

    Parameters
    ----------
    kind : str
        Of `KINDS`.
    rng : numpy.random.Generator
        What draws phases and random fields.
    bottom, latitude, longitude, speed_error
        As for `WaterModel`.
    front : pair of float
        Of a front: where its middle is at the beginning and how wide it is, m along its normal.
    normal : float
        Azimuth, degrees, of the way across the front, and of the way that internal waves go.
    drift : float
        m/s that the front goes along its normal.
    period, height : float
        Of the internal tide, s and m.
    scales : pair of float
        Decorrelation time (s) and length (m) of wandering water.
    spread : pair of float
        Its standard deviations, degC: in the thermocline, and at the surface.

    Raises
    ------
    InputError
        The kind is unknown.

    Examples
    --------
    >>> water = water_model("front", np.random.default_rng(1), bottom=120.0, latitude=56.0, longitude=-11.0)
    >>> water.speed(0.0, [-20e3, 20e3], 0.0, 5.0).round(1)
    array([1508. , 1500.1])
    """
    if kind not in KINDS:
        raise InputError(f"kind of water is {kind!r}: one of {', '.join(KINDS)} would be right")
    way = np.array([np.sin(np.radians(normal)), np.cos(np.radians(normal))])
    numbers: dict[str, Floats]
    if kind == "front":
        numbers = {"normal": way, "start": np.array(front[0]), "width": np.array(front[1]), "drift": np.array(drift)}
    elif kind == "internal tide":
        frequency = 2.0 * np.pi / period * np.array([wave[0] for wave in _WAVES])
        numbers = {
            "waves": np.outer(frequency, [1.0, *(-way / _PHASE_SPEED)]),
            "height": height * np.array([wave[1] for wave in _WAVES]),
            "phase": rng.uniform(0.0, 2.0 * np.pi, len(_WAVES)),
        }
    else:
        fields = len(spread)
        # exp(-r) in three dimensions has the spectrum of a multivariate t distribution with one degree of freedom
        vectors = rng.standard_normal((fields, _FEATURES, 3)) / np.abs(rng.standard_normal((fields, _FEATURES, 1)))
        numbers = {
            "scales": np.array(scales),
            "spread": np.array(spread),
            "vectors": vectors,
            "phases": rng.uniform(0.0, 2.0 * np.pi, (fields, _FEATURES)),
            "heights": rng.rayleigh(1.0, (fields, _FEATURES)) / np.sqrt(_FEATURES),
        }
    return WaterModel(kind, bottom, numbers, latitude, longitude, speed_error)
