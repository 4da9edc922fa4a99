"""The noise of the sea by frequency: turbulence, shipping, wind and thermal motion, or a measured spectrum."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

LOWEST, HIGHEST = 1.0, 1e6
"""Hz: where the curves hold."""
PARTS = ("turbulence", "shipping", "wind", "thermal")


def ambient_noise_parts(frequency: ArrayLike, *, wind_speed: ArrayLike, shipping: ArrayLike = 0.5) -> dict[str, Floats]:
    """Spectrum level of the noise of the sea by cause, dB re 1 uPa²/Hz.

    Parameters
    ----------
    frequency : array_like
        Hz, 1 to 1,000,000.
    wind_speed : array_like
        m/s, 0 to 50.
    shipping : array_like
        How much traffic, from 0 (none near) to 1 (heavy).

    Returns
    -------
    dict
        By the names in `PARTS`, in the broadcast shape.

    Raises
    ------
    InputError
        If a number lies outside its range.

    Notes
    -----
    The empirical fits to Wenz's curves (Wenz 1962, JASA 34:1936) given by Coates (1990, Underwater Acoustic Systems)
    and repeated by Stojanovic (2007, ACM Mobile Computing and Communications Review 11(4):34); coefficients from
    memory. They are means over deep water: rain, ice, animals and near ships are not in them, and single places differ
    by 5 to 10 dB (common practice). Wenz's own rule of fives for the wind is 2 to 10 dB lower up to 20 knots, and 14 at
    40.

    Examples
    --------
    >>> parts = ambient_noise_parts(1000.0, wind_speed=5.0)
    >>> {name: round(float(level), 1) for name, level in parts.items()}
    {'turbulence': 17.0, 'shipping': 39.2, 'wind': 60.9, 'thermal': -15.0}
    """
    f = _within(frequency, LOWEST, HIGHEST, "frequency", "Hz") / 1000.0
    wind = _within(wind_speed, 0.0, 50.0, "wind speed", "m/s")
    traffic = _within(shipping, 0.0, 1.0, "shipping", "(none to heavy)")
    log = np.log10(f)
    parts = {
        "turbulence": 17.0 - 30.0 * log,
        "shipping": 40.0 + 20.0 * (traffic - 0.5) + 26.0 * log - 60.0 * np.log10(f + 0.03),
        "wind": 50.0 + 7.5 * np.sqrt(wind) + 20.0 * log - 40.0 * np.log10(f + 0.4),
        "thermal": -15.0 + 20.0 * log,
    }
    shape = np.broadcast_shapes(*(part.shape for part in parts.values()))
    return {name: np.broadcast_to(part, shape) for name, part in parts.items()}


def ambient_noise(frequency: ArrayLike, *, wind_speed: ArrayLike, shipping: ArrayLike = 0.5) -> Floats:
    """Spectrum level of the noise of the sea, all causes together, dB re 1 uPa²/Hz.

    Arguments, errors and sources are those of `ambient_noise_parts`.

    Examples
    --------
    >>> ambient_noise([100.0, 10_000.0], wind_speed=10.0).round(1)
    array([69.6, 53. ])
    """
    parts = ambient_noise_parts(frequency, wind_speed=wind_speed, shipping=shipping)
    return power_sum(*parts.values())


@dataclass(frozen=True, eq=False)
class NoiseSpectrum:
    """A measured spectrum of noise.

    Parameters
    ----------
    frequency : array_like, shape (n,)
        Hz, increasing, above 0.
    level : array_like, shape (n,)
        Spectrum level, dB re 1 uPa²/Hz.

    Raises
    ------
    InputError
        If the columns do not fit each other, or are not as said.

    Examples
    --------
    >>> measured = NoiseSpectrum([100.0, 1000.0], [80.0, 60.0])
    >>> float(measured.at(316.2278).round(3))
    70.0
    """

    frequency: Floats
    level: Floats

    def __post_init__(self) -> None:
        for name in ("frequency", "level"):
            column = np.array(getattr(self, name), dtype=np.float64)
            column.flags.writeable = False
            object.__setattr__(self, name, column)
        f, level = self.frequency, self.level
        if f.ndim != 1 or f.shape != level.shape or f.size < 2:
            raise InputError(
                f"a noise spectrum has {f.size} frequencies and {level.size} levels: two or more of each would be right"
            )
        if not (np.all(np.isfinite(level)) and np.all(np.isfinite(f)) and f[0] > 0.0 and np.all(np.diff(f) > 0.0)):
            raise InputError("the frequencies of a noise spectrum do not increase from above 0, or a level is missing")

    def at(self, frequency: ArrayLike) -> Floats:
        """Spectrum level, dB, straight in level over the logarithm of frequency.

        Raises
        ------
        InputError
            Outside what was measured.
        """
        f = _within(frequency, self.frequency[0], self.frequency[-1], "frequency", "Hz, as measured,")
        return np.interp(np.log(f), np.log(self.frequency), self.level)


def band_level(
    low: float, high: float, *, wind_speed: float = 0.0, shipping: float = 0.5, spectrum: NoiseSpectrum | None = None
) -> float:
    """Level of the noise in a band, dB re 1 uPa: its spectrum integrated over frequency.

    Parameters
    ----------
    low, high : float
        Edges of the band, Hz.
    wind_speed, shipping : float
        As for `ambient_noise`.
    spectrum : NoiseSpectrum, optional
        A measured one in place of the curves.

    Raises
    ------
    InputError
        If the band is upside down or lies outside the curves or what was measured.

    Examples
    --------
    A band of 1 Hz has the spectrum level, and a white one 10 dB more for ten times the width:

    >>> white = NoiseSpectrum([1.0, 1e5], [50.0, 50.0])
    >>> round(band_level(100.0, 1100.0, spectrum=white), 3)
    80.0
    """
    if not 0.0 < low < high:
        raise InputError(
            f"the band runs from {low:g} to {high:g} Hz: a lower edge above 0 and below the upper is right"
        )
    f = np.geomspace(low, high, 513)
    level = ambient_noise(f, wind_speed=wind_speed, shipping=shipping) if spectrum is None else spectrum.at(f)
    from scipy.integrate import simpson

    # over the logarithm of frequency, where the curves are smooth
    return float(10.0 * np.log10(simpson(10.0 ** (level / 10.0) * f, x=np.log(f))))


def power_sum(*levels: ArrayLike) -> Floats:
    """Levels of independent noises together, dB.

    Examples
    --------
    >>> float(power_sum(60.0, 60.0).round(2))
    63.01
    """
    columns = [np.asarray(level, dtype=np.float64) for level in levels]
    found: Floats = 10.0 * np.log10(sum(10.0 ** (column / 10.0) for column in columns))
    return found


def _within(values: ArrayLike, low: float, high: float, name: str, unit: str) -> Floats:
    array = np.asarray(values, dtype=np.float64)
    outside = ~((array >= low * (1 - 1e-12)) & (array <= high * (1 + 1e-12)))
    if np.any(outside):
        raise InputError(f"{name} is {array[outside].flat[0]:g}: {low:g} to {high:g} {unit} would be right")
    return array
