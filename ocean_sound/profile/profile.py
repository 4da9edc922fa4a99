"""The sound-speed profile: depth and speed with uncertainty, linear between levels, and exact about it."""

from __future__ import annotations

from dataclasses import KW_ONLY, dataclass, field, replace
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from ..files.cf import SPEED_ERROR
from .adding import total
from .columns import check, check_parts, column_of
from .features import DEFAULT_PROMINENCE, Features, conjugate_depth_of, features_of
from .layered import Layered

if TYPE_CHECKING:
    from collections.abc import Mapping

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..casts import Cast
    from ..water import Equation
    from .accuracy import Accuracy

_STATED = "stated"
_UNKNOWN_TIME = np.datetime64("NaT", "ns")


@dataclass(frozen=True, eq=False, repr=False)
class Profile(Layered):
    """A sound-speed profile, linear in depth between its levels.

    Parameters
    ----------
    depth : array_like, shape (levels,)
        Depth, m, positive down, 0 or more, strictly increasing.
    speed : array_like, shape (levels,)
        Sound speed, m/s, between 1000 and 3000.
    uncertainty : array_like, shape (levels,), optional
        Standard uncertainty (k = 1) of the speed, m/s, 0 or more; NaN at a level where it is not known (outside the
        range of the equation, say). None where nothing is known of it. Where shapes or noise are given it follows from
        them; where it is given and they don't add up to it, it stands alone, as the shape ``stated``.
    shapes : mapping of str to array_like, each of shape (levels,), optional
        What the uncertainty is made of: for each cause the error of the speed on each level, m/s, when the cause is one
        standard uncertainty above the truth. The causes are independent of each other, each is one number for all
        depths: its errors on two levels go together, and don't average away.
    noise : array_like, shape (levels,), optional
        Standard uncertainty (k = 1), m/s, of what is independent from level to level.
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
    shapes: Mapping[str, NDArray[np.float64]] = field(default_factory=dict)
    noise: NDArray[np.float64] | None = None

    def __post_init__(self) -> None:
        # A frozen object may still set its own fields while it is being made.
        put = object.__setattr__
        put(self, "depth", column_of(self.depth, "depth", self.id))
        put(self, "speed", column_of(self.speed, "speed", self.id))
        if self.uncertainty is not None:
            put(self, "uncertainty", column_of(self.uncertainty, "uncertainty", self.id))
        self._settle_uncertainty()
        put(self, "time", np.asarray(self.time, dtype="datetime64[ns]")[()])
        put(self, "latitude", float(self.latitude))
        put(self, "longitude", float(self.longitude))
        put(self, "notes", tuple(self.notes))
        check(self)

    def _settle_uncertainty(self) -> None:
        """Make uncertainty, shapes and noise agree."""
        shapes = {name: column_of(shape, f"shape {name}", self.id) for name, shape in self.shapes.items()}
        noise = None if self.noise is None else column_of(self.noise, "noise", self.id)
        stated = self.uncertainty
        parts = [*shapes.values(), *([] if noise is None else [noise])]
        whole = None
        if parts and (stated is None or all(part.shape == stated.shape for part in parts)):
            check_parts(self.depth, shapes, noise, self.id)
            whole = column_of(total(shapes, noise), "uncertainty", self.id)
        if stated is not None and (
            whole is None or not np.allclose(stated, whole, rtol=1e-9, atol=0.0, equal_nan=True)
        ):
            shapes, noise, whole = {_STATED: stated}, None, stated
        put = object.__setattr__
        put(self, "shapes", MappingProxyType(shapes))
        put(self, "noise", noise)
        put(self, "uncertainty", whole if stated is None else stated)

    def __getstate__(self) -> dict[str, Any]:
        # A read-only mapping can't be pickled; it travels as a plain one.
        return {**self.__dict__, "shapes": dict(self.shapes)}

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.__dict__.update({**state, "shapes": MappingProxyType(state["shapes"])})

    @classmethod
    def from_cast(
        cls,
        cast: Cast,
        *,
        equation: str | Equation = "teos10",
        salinity: float | None = None,
        use_suspect: bool = False,
        accuracy: Accuracy | str | None = None,
        temperature_uncertainty: float | None = None,
        salinity_uncertainty: float | None = None,
        pressure_uncertainty: float | None = None,
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
        accuracy : Accuracy or str, optional
            What is known of the instrument: an `Accuracy`, or the name of one in `INSTRUMENTS` ("float", "ctd", "xbt").
            Where not given, an expendable probe's if the cast says that it is one's, with its own depth uncertainty if
            it states one; else what the Argo programme states for floats, 0.002 degC, 0.01 and 2.4 dbar (Wong et al.
            2020, Frontiers in Marine Science 7:700; from memory).
        temperature_uncertainty, salinity_uncertainty, pressure_uncertainty, sound_speed_uncertainty : float, optional
            Standard uncertainties (k = 1) of the calibration that replace those of `accuracy`: degC, practical salinity
            (an assumed one is taken to be good to 1), dbar (metres for a cast of depths), m/s. What a cast states for
            single levels in its own `uncertainties` goes before all of these.

        Returns
        -------
        Profile
            With `notes`, one line for each thing assumed, left out or added; with `shapes` by the names equation,
            temperature, salinity, conductivity, pressure or depth, sound_speed, completion_temperature and the like
            (what was added, not measured), and `noise`. The uncertainty is NaN on levels outside the range of the
            equation, where its standard error no longer holds.

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

        An error of pressure or depth puts the right water at the wrong depth, and computes its speed for the pressure
        there: the shape is the change of speed with depth less the effect of pressure. Where salinity is computed from
        conductivity, errors of temperature and pressure act through it too, and the stated uncertainty of salinity is
        taken to come from conductivity. Errors of depth that come from the density used are neglected (about 1 mm/s).

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
        from .accuracy import accuracy_by_name
        from .speeds import speeds_of_block

        known = accuracy_by_name(accuracy, cast.attributes).but(
            temperature=temperature_uncertainty,
            salinity=salinity_uncertainty,
            pressure=pressure_uncertainty,
            sound_speed=sound_speed_uncertainty,
        )
        block = CastBlock.from_casts([cast])
        columns = speeds_of_block(block, equation=equation, salinity=salinity, use_suspect=use_suspect, accuracy=known)
        return columns.profile(0)

    @classmethod
    def from_dataset(cls, dataset: xarray.Dataset) -> Profile:
        """The profile that `to_dataset` made, or a file of it opened by xarray.

        Parameters
        ----------
        dataset : xarray.Dataset
            With `depth` and `sound_speed` on one dimension, and what else `to_dataset` writes.

        Returns
        -------
        Profile
            With its shapes and noise.

        Raises
        ------
        InputError
            Depth or sound speed is missing.

        Examples
        --------
        >>> profile = Profile([0.0, 10.0], [1500.0, 1490.0], shapes={"equation": [0.1, 0.1]}, noise=[0.0, 0.1])
        >>> Profile.from_dataset(profile.to_dataset()).shapes["equation"]
        array([0.1, 0.1])
        """
        from .tables import profile_of_dataset

        return profile_of_dataset(cls, dataset)

    def __len__(self) -> int:
        return self.depth.size

    def __repr__(self) -> str:
        name = f" {self.id}" if self.id else ""
        return (
            f"<Profile{name}: {len(self)} levels, {self.depth[0]:g} to {self.depth[-1]:g} m, "
            f"{self.speed.min():.1f} to {self.speed.max():.1f} m/s>"
        )

    def at_levels(self, depth: ArrayLike) -> Profile:
        """The profile on other levels: speed, shapes and noise by linear interpolation.

        Parameters
        ----------
        depth : array_like
            Depths, m, within the profile, strictly increasing.

        Returns
        -------
        Profile

        Raises
        ------
        InputError
            If a depth lies outside the profile, or they do not increase.

        Examples
        --------
        >>> Profile([0.0, 10.0], [1500.0, 1490.0], [0.1, 0.3]).at_levels([0.0, 5.0]).uncertainty
        array([0.1, 0.2])
        """
        wanted = np.asarray(depth, dtype=np.float64)
        self._require_within(wanted)

        def here(column: NDArray[np.float64]) -> NDArray[np.float64]:
            return np.interp(wanted, self.depth, column)

        return replace(
            self,
            depth=wanted,
            speed=here(self.speed),
            uncertainty=None,
            shapes={name: here(shape) for name, shape in self.shapes.items()},
            noise=None if self.noise is None else here(self.noise),
        )

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
            uncertainty=None,
            shapes={name: np.concatenate((shape[:1], shape)) for name, shape in self.shapes.items()},
            noise=None if self.noise is None else np.concatenate((self.noise[:1], self.noise)),
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
        if self.uncertainty is not None:
            columns["sound_speed_uncertainty"] = self.uncertainty
        columns |= {f"{SPEED_ERROR}{name}": shape for name, shape in self.shapes.items() if name != _STATED}
        return columns if self.noise is None else columns | {"sound_speed_noise": self.noise}

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
            `sound_speed` and, where known, `sound_speed_uncertainty`, `sound_speed_error_<shape>` and
            `sound_speed_noise` on `level`, with `depth` as a coordinate.

        Examples
        --------
        >>> dataset = Profile([0.0, 10.0], [1500.0, 1490.0]).to_dataset()
        >>> dataset["sound_speed"].attrs["standard_name"], dataset["depth"].attrs["positive"]
        ('speed_of_sound_in_sea_water', 'down')
        """
        from .tables import dataset_of_profile

        return dataset_of_profile(self)
