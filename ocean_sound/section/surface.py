"""The sea surface above a section."""

from __future__ import annotations

from dataclasses import dataclass

from ..errors import InputError


@dataclass(frozen=True)
class Surface:
    """A surface that reflects all sound in a calm, and scatters some of it under wind.

    Parameters
    ----------
    wind_speed : float
        m/s, 10 m above the water.
    reflects : bool
        False for one that sends nothing back: water without a surface, to see what the surface does.

    Raises
    ------
    InputError
        If the wind speed is negative or beyond any storm.

    Examples
    --------
    >>> Surface().wind_speed
    0.0
    """

    wind_speed: float = 0.0
    reflects: bool = True

    def __post_init__(self) -> None:
        object.__setattr__(self, "wind_speed", float(self.wind_speed))
        if not 0.0 <= self.wind_speed <= 100.0:
            raise InputError(f"surface: wind_speed is {self.wind_speed:g}; 0 to 100 m/s would be right")
