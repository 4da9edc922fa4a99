"""The sound-speed profile: depth and speed with uncertainty, linear between levels, and exact about it."""

from __future__ import annotations

from dataclasses import KW_ONLY, dataclass, replace
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .features import DEFAULT_PROMINENCE, Features, conjugate_depth_of, features_of

if TYPE_CHECKING:
    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..casts import Cast
    from ..water import Equation

# No natural water comes near these: fresh water at 0 degC carries sound at 1402 m/s, the deepest trench about 1630.
# Wide enough for the steep gradients of textbook cases, narrow enough to catch feet per second and a column of depths.
SLOWEST_SPEED = 1000.0  # m/s
FASTEST_SPEED = 3000.0  # m/s

_UNKNOWN_TIME = np.datetime64("NaT", "ns")


@dataclass(frozen=True, eq=False, repr=False)
class Profile:
    """A sound-speed profile, linear in depth between its levels.

    Parameters
    ----------
    depth : array_like, shape (levels,)
        Depth, m, positive down, 0 or more, strictly increasing.
    speed : array_like, shape (levels,)
        Sound speed, m/s, between 1000 and 3000.
    uncertainty : array_like, shape (levels,), optional
        Standard uncertainty (k = 1) of the speed, m/s, 0 or more; NaN at a level where it is not known (outside the
        range of the equation, say). None where nothing is known of it.
    id : str
        The name of the cast that it comes from.
    time : numpy.datetime64
        Time of the cast, UTC; NaT if unknown.
    latitude, longitude : float
        Position of the cast, degrees; NaN if unknown.
    equation : str
        Name of the sound-speed equation; empty if the speed was measured or given.
    notes : tuple of str
        One line for each thing that was assumed, left out or added on the way to this profile.
    surface_assumed : bool
        Whether the level at depth 0 was added from the water of the next one, not measured.

    Raises
    ------
    InputError
        If a level can't be part of a profile; the message names level, value and what would be right.

    Notes
    -----
    The arrays are copied and read-only. Between levels everything is exact for a speed linear in depth: there is no
    step size in any of the numbers.

    Examples
    --------
    >>> profile = Profile([0.0, 100.0, 1000.0], [1500.0, 1500.0, 1515.0], id="example")
    >>> profile
    <Profile example: 3 levels, 0 to 1000 m, 1500.0 to 1515.0 m/s>
    >>> profile.gradient
    array([0.        , 0.01666667])
    >>> profile.at(550.0)
    1507.5
    >>> round(profile.harmonic_mean_speed(), 3)
    1506.735
    """

    depth: NDArray[np.float64]
    speed: NDArray[np.float64]
    uncertainty: NDArray[np.float64] | None = None
    _: KW_ONLY
    id: str = ""
    time: np.datetime64 = _UNKNOWN_TIME
    latitude: float = float("nan")
    longitude: float = float("nan")
    equation: str = ""
    notes: tuple[str, ...] = ()
    surface_assumed: bool = False

    def __post_init__(self) -> None:
        # A frozen object may still set its own fields while it is being made.
        put = object.__setattr__
        put(self, "depth", _column(self.depth, "depth", self.id))
        put(self, "speed", _column(self.speed, "speed", self.id))
        if self.uncertainty is not None:
            put(self, "uncertainty", _column(self.uncertainty, "uncertainty", self.id))
        put(self, "time", np.asarray(self.time, dtype="datetime64[ns]")[()])
        put(self, "latitude", float(self.latitude))
        put(self, "longitude", float(self.longitude))
        put(self, "notes", tuple(self.notes))
        _check(self)

    @classmethod
    def from_cast(
        cls,
        cast: Cast,
        *,
        equation: str | Equation = "teos10",
        salinity: float | None = None,
        use_suspect: bool = False,
        temperature_uncertainty: float = 0.002,
        salinity_uncertainty: float | None = None,
        pressure_uncertainty: float = 2.4,
        sound_speed_uncertainty: float | None = None,
    ) -> Profile:
        """The sound-speed profile of a cast.

        Parameters
        ----------
        cast : Cast
            Pressure or depth, and temperature with salinity or conductivity, or sound speed itself. Values flagged 4
            (fail) or 9 (missing) are never used. Never changed.
        equation : str or Equation
            A name from `equations()`.
        salinity : float, optional
            Practical salinity to assume for a cast that has neither salinity nor conductivity.
        use_suspect : bool
            Whether values flagged 3 (suspect) are used too.
        temperature_uncertainty, salinity_uncertainty, pressure_uncertainty : float
            Standard uncertainties (k = 1) of the measurements: degC, practical salinity, dbar (taken as metres for a
            cast of depths). The defaults are the accuracies that the Argo programme states, 0.002 degC, 0.01 and
            2.4 dbar (Wong et al. 2020, Frontiers in Marine Science 7:700; from memory); an assumed salinity is taken to
            be good to 1.
        sound_speed_uncertainty : float, optional
            Standard uncertainty, m/s, of a sound speed that was measured.

        Returns
        -------
        Profile
            With `notes`, one line for each thing assumed, left out or added. Its uncertainty is the root of the sum of
            squares of the equation's standard error and the measurements' shares; NaN on levels outside the range of
            the equation, where its standard error no longer holds.

        Raises
        ------
        InputError
            If the cast gives fewer than two usable levels or lacks a variable; the message names the cast, the counts
            and a remedy. If the equation is unknown, or an uncertainty or `salinity` is impossible.

        Notes
        -----
        Depth from pressure integrates the cast's own density; pressure from depth is that of the standard ocean. Of a
        cast that goes down and up the longer way is used, without the levels that are not below all before them. A cast
        that begins within 50 m of the surface gets a level at 0 m with the water of its first level.

        Examples
        --------
        >>> from ocean_sound.casts import Cast
        >>> cast = Cast(
        ...     id="A1", values={"pressure": [0.0, 100.0], "temperature": [12.0, 9.0], "salinity": [35.0, 35.2]}
        ... )
        >>> Profile.from_cast(cast)
        <Profile A1: 2 levels, 0 to 99.2787 m, 1488.0 to 1496.8 m/s>
        """
        from ..casts import CastBlock
        from .speeds import Accuracy, speeds_of_block

        accuracy = Accuracy(
            temperature_uncertainty, salinity_uncertainty, pressure_uncertainty, sound_speed_uncertainty
        )
        block = CastBlock.from_casts([cast])
        columns = speeds_of_block(
            block, equation=equation, salinity=salinity, use_suspect=use_suspect, accuracy=accuracy
        )
        return columns.profile(0)

    def __len__(self) -> int:
        return self.depth.size

    def __repr__(self) -> str:
        name = f" {self.id}" if self.id else ""
        return (
            f"<Profile{name}: {len(self)} levels, {self.depth[0]:g} to {self.depth[-1]:g} m, "
            f"{self.speed.min():.1f} to {self.speed.max():.1f} m/s>"
        )

    @cached_property
    def gradient(self) -> NDArray[np.float64]:
        """Gradient of sound speed in each layer, 1/s, positive where speed grows downward; shape (levels - 1,)."""
        gradient: NDArray[np.float64] = np.diff(self.speed) / np.diff(self.depth)
        gradient.flags.writeable = False
        return gradient

    def at(self, depth: ArrayLike) -> Any:
        """The sound speed at a depth, m/s, by linear interpolation.

        Parameters
        ----------
        depth : float or array_like
            Depth, m, within the levels of the profile.

        Returns
        -------
        float or numpy.ndarray
            Sound speed, m/s, in the shape of `depth`.

        Raises
        ------
        InputError
            If a depth lies above the first or below the last level, or is not a number.

        Examples
        --------
        >>> Profile([0.0, 10.0], [1500.0, 1490.0]).at([0.0, 2.5])
        array([1500. , 1497.5])
        """
        wanted = np.asarray(depth, dtype=np.float64)
        self._require_within(wanted)
        speed = np.interp(wanted, self.depth, self.speed)
        return float(speed) if wanted.ndim == 0 else speed

    def mean_speed(self, top: float | None = None, bottom: float | None = None) -> float:
        """The depth average of sound speed between two depths, m/s.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            The integral of speed over depth, divided by the distance; at two equal depths the speed there.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Examples
        --------
        >>> Profile([0.0, 10.0], [1500.0, 1490.0]).mean_speed()
        1495.0
        """
        depth, speed = self._between(top, bottom)
        if depth[-1] == depth[0]:
            return float(speed[0])
        return float(np.sum(np.diff(depth) * (speed[1:] + speed[:-1])) / (2.0 * (depth[-1] - depth[0])))

    def travel_time(self, top: float | None = None, bottom: float | None = None) -> float:
        """The one-way travel time of sound straight up or down between two depths, s.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            Travel time, s, never negative.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Notes
        -----
        In a layer of thickness h from speed c1 to c2 the time is (h / g) ln(c2 / c1), g = (c2 - c1) / h. Written as
        2 h / (c1 + c2) * atanh(y) / y with y = (c2 - c1) / (c1 + c2) it cancels nowhere, however small the gradient.

        Examples
        --------
        >>> round(Profile([0.0, 1000.0], [1500.0, 1517.0]).travel_time(), 12)
        0.662917191661
        """
        depth, speed = self._between(top, bottom)
        total = speed[1:] + speed[:-1]
        y = np.diff(speed) / total
        stretch = np.ones_like(y)
        np.divide(np.arctanh(y), y, out=stretch, where=y != 0.0)
        return float(np.sum(2.0 * np.diff(depth) / total * stretch))

    def harmonic_mean_speed(self, top: float | None = None, bottom: float | None = None) -> float:
        """The harmonic mean of sound speed between two depths, m/s: the distance over the vertical travel time.

        This is the one speed with which an echo straight below gives the true depth.

        Parameters
        ----------
        top, bottom : float, optional
            The two depths, m, in either order; the first and the last level where not given.

        Returns
        -------
        float
            Distance over travel time; at two equal depths the speed there.

        Raises
        ------
        InputError
            If a depth lies outside the profile.

        Examples
        --------
        >>> Profile([0.0, 10.0], [1500.0, 1500.0]).harmonic_mean_speed(2.0, 7.0)
        1500.0
        """
        depth, speed = self._between(top, bottom)
        if depth[-1] == depth[0]:
            return float(speed[0])
        return float(depth[-1] - depth[0]) / self.travel_time(top, bottom)

    def features(self, *, seabed_depth: float | None = None, prominence: float = DEFAULT_PROMINENCE) -> Features:
        """The sonic layer, ducts, deep channel, gradients and mean speeds of the profile.

        Parameters
        ----------
        seabed_depth : float, optional
            Depth of the seabed, m, for the depth excess.
        prominence : float
            The least swing of speed, m/s, that makes a maximum or minimum count. The default, 0.1 m/s, is several times
            the noise of a CTD from level to level and what an isothermal layer of 6 m builds up; take more for noisy
            probes.

        Returns
        -------
        Features
            The numbers, each described there; None where a feature does not exist, and in `notes` the reason.

        Raises
        ------
        InputError
            If `seabed_depth` or `prominence` is not a finite number above 0.

        Examples
        --------
        >>> Profile([0, 40, 60, 100], [1500.0, 1500.6, 1488.0, 1487.0]).features().sonic_layer_depth
        40.0
        """
        return features_of(self, seabed_depth=seabed_depth, prominence=prominence)

    def conjugate_depth(self, depth: float, *, prominence: float = DEFAULT_PROMINENCE) -> float | None:
        """The depth on the other side of the deep-channel axis with the sound speed of this depth, m.

        A ray that is level at one of the two, and stays in the channel, is level again at the other.

        Parameters
        ----------
        depth : float
            Depth, m, within the profile.
        prominence : float
            As in `features`, which finds the axis.

        Returns
        -------
        float or None
            The first depth from the axis outward that reaches the speed; None where none does or there is no axis.

        Raises
        ------
        InputError
            If the depth lies outside the profile.

        Examples
        --------
        >>> Profile([0, 500, 1500], [1510, 1490, 1500]).conjugate_depth(1000.0)
        375.0
        """
        return conjugate_depth_of(self, depth, prominence=prominence)

    def to_surface(self) -> Profile:
        """The profile carried up to the surface: a level at depth 0 with the speed of the first level, and a note.

        Returns
        -------
        Profile
            The same object where the profile starts at depth 0 already.

        Examples
        --------
        >>> Profile([2.0, 10.0], [1500.0, 1490.0]).to_surface().depth
        array([ 0.,  2., 10.])
        """
        if self.depth[0] == 0.0:
            return self
        note = f"carried from {self.depth[0]:g} m up to the surface at the first level's speed, {self.speed[0]:.2f} m/s"
        return replace(
            self,
            depth=np.concatenate(([0.0], self.depth)),
            speed=np.concatenate((self.speed[:1], self.speed)),
            uncertainty=None if self.uncertainty is None else np.concatenate((self.uncertainty[:1], self.uncertainty)),
            notes=(*self.notes, note),
            surface_assumed=True,
        )

    def columns(self) -> dict[str, NDArray[np.float64]]:
        """One column for each thing known of a level, by the names that files use.

        Examples
        --------
        >>> list(Profile([0.0, 10.0], [1500.0, 1490.0]).columns())
        ['depth', 'sound_speed']
        """
        columns = {"depth": self.depth, "sound_speed": self.speed}
        return columns if self.uncertainty is None else columns | {"sound_speed_uncertainty": self.uncertainty}

    def about(self) -> dict[str, Any]:
        """Whose profile it is and how it came about; what is not known is None.

        Examples
        --------
        >>> Profile([0.0, 10.0], [1500.0, 1490.0], id="A1").about()["cast_id"]
        'A1'
        """
        return {
            "cast_id": self.id or None,
            "time": None if np.isnat(self.time) else f"{np.datetime_as_string(self.time, unit='s')}Z",
            "latitude": None if np.isnan(self.latitude) else self.latitude,
            "longitude": None if np.isnan(self.longitude) else self.longitude,
            "equation": self.equation or None,
            "notes": "; ".join(self.notes) or None,
        }

    def to_dataset(self) -> xarray.Dataset:
        """The profile as a dataset with dimension `level`, CF attributes, and time, position and name as scalars.

        Returns
        -------
        xarray.Dataset
            `sound_speed` and, where known, `sound_speed_uncertainty` on `level`, with `depth` as a coordinate.

        Examples
        --------
        >>> dataset = Profile([0.0, 10.0], [1500.0, 1490.0]).to_dataset()
        >>> dataset["sound_speed"].attrs["standard_name"], dataset["depth"].attrs["positive"]
        ('speed_of_sound_in_sea_water', 'down')
        """
        import xarray as xr

        from ..files.cf import attributes

        speed = {**attributes("sound_speed"), **({"equation": self.equation} if self.equation else {})}
        variables = {"sound_speed": ("level", self.speed.copy(), speed)}
        if self.uncertainty is not None:
            speed["ancillary_variables"] = "sound_speed_uncertainty"
            name = "sound_speed_uncertainty"
            variables[name] = ("level", self.uncertainty.copy(), dict(attributes(name)))
        coordinates = {
            "depth": ("level", self.depth.copy(), dict(attributes("depth"))),
            "time": ((), self.time, dict(attributes("time"))),
            "latitude": ((), self.latitude, dict(attributes("latitude"))),
            "longitude": ((), self.longitude, dict(attributes("longitude"))),
            "cast_id": ((), self.id, dict(attributes("cast_id"))),
        }
        notes = {"notes": "\n".join(self.notes)} if self.notes else {}
        return xr.Dataset(variables, coordinates, {"featureType": "profile", **notes})

    def _between(self, top: float | None, bottom: float | None) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Depth and speed of the part between two depths, both ends included; at equal depths one point twice."""
        ends = np.array(
            [self.depth[0] if top is None else top, self.depth[-1] if bottom is None else bottom], dtype=np.float64
        )
        self._require_within(ends)
        ends.sort()
        inner = slice(np.searchsorted(self.depth, ends[0], "right"), np.searchsorted(self.depth, ends[1], "left"))
        at_ends = np.interp(ends, self.depth, self.speed)
        return (
            np.concatenate((ends[:1], self.depth[inner], ends[1:])),
            np.concatenate((at_ends[:1], self.speed[inner], at_ends[1:])),
        )

    def _require_within(self, depth: NDArray[np.float64]) -> None:
        outside = ~((depth >= self.depth[0]) & (depth <= self.depth[-1]))
        if outside.any():
            raise InputError(
                f"{_whose(self.id)}: depth {depth[outside].flat[0]:g} m lies outside the profile; "
                f"a depth from {self.depth[0]:g} to {self.depth[-1]:g} m would be right"
            )


def _whose(name: str) -> str:
    return f"profile {name!r}" if name else "profile"


def _column(values: Any, field: str, name: str) -> NDArray[np.float64]:
    """A read-only copy as a flat float64 array."""
    if isinstance(values, np.ma.MaskedArray):
        values = np.ma.filled(np.ma.asarray(values, dtype=np.float64), np.nan)
    try:
        column = np.array(values, dtype=np.float64)
    except (TypeError, ValueError):
        raise InputError(
            f"{_whose(name)}: {field} is not a list of numbers; one number for each level would be right"
        ) from None
    if column.ndim != 1:
        raise InputError(
            f"{_whose(name)}: {field} has {column.ndim} dimensions; one, with a number for each level, would be right"
        )
    column.flags.writeable = False
    return column


def _check(profile: Profile) -> None:
    """Raise InputError for the first thing that keeps these columns from being a profile."""
    depth, speed, uncertainty = profile.depth, profile.speed, profile.uncertainty
    whose = _whose(profile.id)
    for field, column in (("speed", speed), ("uncertainty", uncertainty)):
        if column is not None and column.size != depth.size:
            raise InputError(
                f"{whose}: {depth.size} depths and {column.size} values of {field}; as many of each would be right"
            )
    if depth.size < 2:
        raise InputError(f"{whose}: {depth.size} level{'s' * (depth.size != 1)}; a profile needs at least 2")
    _check_levels(whose, "depth", depth, np.isfinite(depth) & (depth >= 0.0), "m; a finite depth of 0 m or more")
    _check_levels(
        whose,
        "speed",
        speed,
        (speed >= SLOWEST_SPEED) & (speed <= FASTEST_SPEED),
        f"m/s; {SLOWEST_SPEED:g} to {FASTEST_SPEED:g} m/s",
    )
    if uncertainty is not None:
        good = np.isnan(uncertainty) | ((uncertainty >= 0.0) & np.isfinite(uncertainty))
        _check_levels(whose, "uncertainty", uncertainty, good, "m/s; 0 m/s or more, or NaN where it is not known,")
    falls = np.flatnonzero(np.diff(depth) <= 0.0)
    if falls.size:
        level = int(falls[0]) + 1
        raise InputError(
            f"{whose}: level {level} (counted from 0) lies at {depth[level]:g} m, not below the level before it at "
            f"{depth[level - 1]:g} m; depths that strictly increase would be right"
        )


def _check_levels(whose: str, field: str, column: NDArray[np.float64], good: NDArray[np.bool_], right: str) -> None:
    bad = np.flatnonzero(~good)
    if bad.size:
        level = int(bad[0])
        raise InputError(
            f"{whose}: {field} at level {level} (counted from 0) is {column[level]:g} {right} would be right"
        )
