"""What an equation for the speed of sound is: its function, what it takes, where it holds, who wrote it."""

from __future__ import annotations

from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, Literal, NamedTuple

from .scales import RATIO_68_TO_90

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping


class Bounds(NamedTuple):
    """Range of validity of one variable."""

    low: float
    high: float
    unit: str


@dataclass(frozen=True, eq=False)
class Equation:
    """One published equation for the speed of sound in water.

    Attributes
    ----------
    name
        The name by which callers ask for it.
    title
        Authors, year and kind, in a few words.
    function
        Takes float64 arrays (those named in `arguments`, temperature on the paper's own scale), returns m/s.
    arguments
        What the function takes, in order: temperature, salinity, pressure (dbar) or depth (m), latitude, longitude.
    temperature_scale
        Scale of the paper, "ITS-90" or "IPTS-68". Callers always give ITS-90; `evaluate` converts.
    range
        Range of validity as the paper states it, by variable. The pressure of a fresh-water equation at atmospheric
        pressure is bounded by 0 and 0 dbar of sea pressure. A range of temperature is compared with ITS-90 as
        given: the scales differ by less than 0.01 degrees up to 40.
    standard_error
        Standard error that the authors state, m/s, or None where none is known to us. It holds inside the range only.
    error_basis
        Where that number comes from, or why there is none.
    citation
        The paper.
    funnel
        True if the range is moreover the oceanographic funnel of TEOS-10 (McDougall et al. 2003), where pressure,
        salinity and temperature bound each other.

    Examples
    --------
    >>> from ocean_sound.water import equations
    >>> mackenzie = equations()["mackenzie"]
    >>> mackenzie.vertical, mackenzie.range["salinity"].low, mackenzie.standard_error
    ('depth', 25.0, 0.07)
    """

    name: str
    title: str
    function: Callable[..., Any]
    arguments: tuple[str, ...]
    temperature_scale: Literal["ITS-90", "IPTS-68"]
    range: Mapping[str, Bounds]
    standard_error: float | None
    error_basis: str
    citation: str
    funnel: bool = field(default=False)
    slope: Callable[..., Any] | None = field(default=None)

    def __post_init__(self) -> None:
        object.__setattr__(self, "range", MappingProxyType(dict(self.range)))

    def __getstate__(self) -> dict[str, Any]:
        # A read-only mapping can't be pickled; worker processes get a plain one and lock it again.
        return {**self.__dict__, "range": dict(self.range)}

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.__dict__.update({**state, "range": MappingProxyType(state["range"])})

    @property
    def vertical(self) -> Literal["pressure", "depth", "none"]:
        """What the equation takes for the vertical."""
        if "pressure" in self.arguments:
            return "pressure"
        return "depth" if "depth" in self.arguments else "none"

    def evaluate(self, temperature: Any, salinity: Any, *, vertical: Any, latitude: Any, longitude: Any) -> Any:
        """Speed in m/s from ITS-90 temperature, without any check; the vertical in dbar or m as the equation takes it.

        What the function does not take still counts as missing where it is NaN, and still broadcasts.
        """
        scaled = temperature * RATIO_68_TO_90 if self.temperature_scale == "IPTS-68" else temperature
        given = {
            "temperature": scaled,
            "salinity": salinity,
            self.vertical: vertical,
            "latitude": latitude,
            "longitude": longitude,
        }
        speed = self.function(*(given[name] for name in self.arguments))
        if "salinity" not in self.arguments:
            speed = speed + 0.0 * salinity
        if self.vertical == "none" and vertical is not None:
            speed = speed + 0.0 * vertical
        return speed
