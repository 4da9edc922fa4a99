"""Places for sensors."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..errors import InputError


@dataclass(frozen=True)
class Site:
    """Where a sensor is or may be.

    Parameters
    ----------
    name : str
    latitude, longitude : float
        Degrees.
    depth : float
        Of the sensor, m.
    cost : float
        In any unit.

    Raises
    ------
    InputError
        If it is no position or no depth.

    Examples
    --------
    >>> Site("north", 32.5, -64.8, 200.0).cost
    1.0
    """

    name: str
    latitude: float
    longitude: float
    depth: float
    cost: float = 1.0

    def __post_init__(self) -> None:
        if not (abs(self.latitude) <= 90.0 and abs(self.longitude) <= 360.0):
            raise InputError(
                f"site {self.name}: latitude {self.latitude:g}, longitude {self.longitude:g} is no position: degrees "
                "would be right"
            )
        if not (np.isfinite(self.depth) and self.depth >= 0.0):
            raise InputError(f"site {self.name}: depth is {self.depth:g} m: 0 or more would be right")
