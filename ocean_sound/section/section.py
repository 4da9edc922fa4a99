"""The section: a vertical plane of water along a track, with its seabed and its surface."""

from __future__ import annotations

from dataclasses import KW_ONLY, dataclass
from dataclasses import field as made_by
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..profile import Profile
from ..profile.flattening import flat_depth, true_depth
from .columns import FINEST, TOLERANCE, Fit
from .surface import Surface

if TYPE_CHECKING:
    from collections.abc import Sequence
    from os import PathLike

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..casts import Cast
    from ..grids import Bathymetry, Climatology
    from .field import SpeedField
    from .seabed import Seabed
    from .sediments import Sediment
    from .track import Place, Track

    Floats = NDArray[np.float64]

EARTH_RADIUS = 6371008.8
"""Mean radius of the Earth, m (IUGG, from memory), for a section without a place."""


@dataclass(frozen=True, eq=False, repr=False)
class Section:
    """Water along a track: a smooth speed field, a seabed below, a surface above.

    Made by `from_profile`, `from_casts` or `from_grid`; built from its parts for closed forms.

    Parameters
    ----------
    field : SpeedField
        In flattened depths and speeds where `radius` is given.
    seabed : Seabed
        In true depths.
    surface : Surface
    max_range : float
        How far the section reaches, m.
    radius : float, optional
        Of the Earth at the surface, m, where the field is flattened; None where the Earth is taken to be flat.
    track : Track, optional
        Where the section lies; range 0 is its start.
    profiles : tuple of Profile
        What the water was made from.
    places : array_like, shape (profiles,)
        Where along the track they are, m.
    fit : Fit, optional
        How the field lies to the data; None for a field that was given.
    id : str
    notes : tuple of str
        One line for each thing that was assumed, left out or added.

    Raises
    ------
    InputError
        If the field does not reach the seabed, or the range is none.

    Examples
    --------
    >>> from ocean_sound.section import Seabed, SpeedField
    >>> field = SpeedField.from_speeds([0.0, 50.0, 110.0], [1500.0, 1500.0, 1500.0])
    >>> Section(field, Seabed.flat(100.0), max_range=5000.0)
    <Section: 5 km, the same at all ranges, 1500.0 to 1500.0 m/s, seabed level at 100 m, sand>
    """

    field: SpeedField
    seabed: Seabed
    surface: Surface = made_by(default_factory=Surface)
    _: KW_ONLY
    max_range: float
    radius: float | None = None
    track: Track | None = None
    profiles: tuple[Profile, ...] = ()
    places: Floats = made_by(default_factory=lambda: np.empty(0))
    fit: Fit | None = None
    id: str = ""
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        put = object.__setattr__
        put(self, "max_range", float(self.max_range))
        put(self, "profiles", tuple(self.profiles))
        put(self, "notes", tuple(self.notes))
        places = np.array(self.places, dtype=np.float64)
        places.flags.writeable = False
        put(self, "places", places)
        if places.size != len(self.profiles):
            raise InputError(
                f"section: {len(self.profiles)} profiles and {places.size} places; as many of each are right"
            )
        if not (np.isfinite(self.max_range) and self.max_range > 0.0):
            raise InputError(f"section: max_range is {self.max_range:g} m; a distance above 0 would be right")
        if self.field.depths[-1] < self.flat_seabed.deepest:
            raise InputError(
                f"section: the speed field ends at {self.deepest:g} m, above the seabed at {self.seabed.deepest:g} m; "
                "a field that reaches a little below it would be right"
            )

    @classmethod
    def from_profile(
        cls,
        profile: Profile,
        *,
        seabed: Seabed | float | None = None,
        surface: Surface | None = None,
        max_range: float | None = None,
        flatten: bool | float | None = None,
        extend_down: bool | None = None,
        smooth: float = 0.0,
        tolerance: float = TOLERANCE,
        finest: float = FINEST,
    ) -> Section:
        """The section whose water is that of one profile at all ranges.

        Parameters
        ----------
        profile : Profile
            One that starts below the surface is first carried up to it. Never changed.
        seabed : Seabed or float, optional
            A float is the depth, m, of a level one of sand. Where not given the deepest level is the bottom, and
            absorbs all.
        surface : Surface, optional
            Calm where not given.
        max_range : float, optional
            How far it reaches, m; where not given to the last point of a seabed that varies, else 100 km.
        flatten : bool or float, optional
            Whether the Earth's curvature counts, or its radius in m; where not given it does beyond 20 km.
        extend_down : bool, optional
            Whether water is added below the last level, as pressure alone would have it. Where not given it is for a
            gap of no more than a tenth of the depth or 20 m.
        smooth : float
            Window of depth, m, over which the speed is averaged first; 0 for none.
        tolerance : float
            How closely the spline follows the shape-preserving curve through the levels, m/s.
        finest : float
            Height of the thinnest cell, m.

        Returns
        -------
        Section
            Between levels the speed follows a monotone piecewise cubic, and through its values on a fine grid a spline,
            twice continuously differentiable; `fit` says how closely. Noise is followed too, and bends rays: `smooth`
            where it should not.

        Raises
        ------
        InputError
            If the water ends above the seabed, or an option is impossible.

        Examples
        --------
        >>> section = Section.from_profile(Profile([0, 100, 1000], [1500, 1500, 1515]), max_range=10000.0)
        >>> section
        <Section: 10 km, the same at all ranges, 1500.0 to 1515.0 m/s, seabed level at 1000 m, absorbs all>
        >>> section.speed_at(0.0, 0.0), section.fit.overshoot < 0.01
        (1500.0, True)
        """
        from .building import section_of_profile

        return section_of_profile(
            profile, seabed=seabed, surface=surface, max_range=max_range, flatten=flatten, extend_down=extend_down,
            smooth=smooth, tolerance=tolerance, finest=finest,
        )  # fmt: skip

    @classmethod
    def from_casts(
        cls,
        casts: Sequence[Cast | Profile],
        *,
        seabed: Seabed | float | str | PathLike[str] | Bathymetry | None = None,
        along: Track | Sequence[Place] | None = None,
        ranges: ArrayLike | None = None,
        reach: float = 10000.0,
        apart: float = 0.0,
        complete: bool = True,
        surface: Surface | None = None,
        max_range: float | None = None,
        flatten: bool | float | None = None,
        extend_down: bool | None = None,
        smooth: float | None = None,
        tolerance: float = TOLERANCE,
        finest: float = FINEST,
        equation: str = "teos10",
    ) -> Section:
        """The section through casts along a track.

        Parameters
        ----------
        casts : sequence of Cast or Profile
            Two or more. Without `along` and `ranges` the track goes from one to the next in the order given.
        seabed : Seabed, float, path-like or Bathymetry, optional
            A float is the depth, m, of a level one of sand; a path or an open grid gives the depths below the track.
            Where not given the deepest level of all casts is the bottom, and absorbs all.
        along : Track or sequence of (latitude, longitude), optional
            The track; the casts are brought to where it passes them, in any order.
        ranges : array_like, shape (casts,), optional
            Where the casts are along the track, m, for casts without positions.
        reach : float
            How far off `along` a cast may lie, m.
        apart : float
            Of casts nearer than this to each other along the track, m, the deepest alone is used; a note says so.
        complete : bool
            Whether casts that end above the bottom are lent the water of deeper ones; where not they are refused.
        surface, max_range, flatten, extend_down, tolerance, finest
            As for `from_profile`; the section ends with the track where max_range is not given.
        smooth : float, optional
            Window of depth, m, over which the speed of each cast is averaged first; 0 for none, and 0.002 of the
            deepest seabed where not given. Fine structure does not reach from cast to cast, and noise bends rays; a
            note says how much it changes.
        equation : str
            For the speed of casts.

        Returns
        -------
        Section
            Along the track the speed at each depth is monotone between casts, and stays as it is beyond the first and
            the last. A cast that ends above the bottom is lent the water of the nearest casts before and after it that
            reach at least a fifth deeper; the difference at the join dies away over 300 m.

        Raises
        ------
        InputError
            Fewer than two casts, one that lies off the track or has no position, distances that do not increase, no sea
            along the track; the message names the cast or the place.

        Examples
        --------
        >>> north = Profile([0, 100, 1000], [1480, 1480, 1495], id="north", latitude=60.0, longitude=-20.0)
        >>> south = Profile([0, 100, 1000], [1500, 1490, 1495], id="south", latitude=59.5, longitude=-20.0)
        >>> section = Section.from_casts([north, south], seabed=900.0)
        >>> section
        <Section: 55.704 km, 2 casts, 1480.0 to 1500.0 m/s, seabed level at 900 m, sand>
        >>> round(section.speed_at(section.max_range / 2, 0.0), 2)
        1490.0
        """
        from .building import section_of_casts

        return section_of_casts(
            casts, seabed=seabed, along=along, ranges=ranges, reach=reach, apart=apart, complete=complete,
            surface=surface, max_range=max_range, flatten=flatten, extend_down=extend_down, smooth=smooth,
            tolerance=tolerance, finest=finest, equation=equation,
        )  # fmt: skip

    @classmethod
    def from_grid(
        cls,
        path: str | PathLike[str] | Climatology,
        start: Place | None = None,
        end: Place | None = None,
        *,
        along: Track | Sequence[Place] | None = None,
        time: Any = None,
        spacing: float | None = None,
        seabed: Seabed | float | str | PathLike[str] | Bathymetry | None = None,
        surface: Surface | None = None,
        flatten: bool | float | None = None,
        extend_down: bool | None = None,
        tolerance: float = TOLERANCE,
        finest: float = FINEST,
        equation: str = "teos10",
    ) -> Section:
        """The section along a line through a CF grid of temperature and salinity.

        Parameters
        ----------
        path : path-like or Climatology
            A netCDF file whose standard names say which temperature and salinity it holds, or an open grid:
            `open_climatology` takes what the file does not say.
        start, end : tuple of float
            Latitude and longitude, degrees; the line is the geodesic between them.
        along : Track or sequence of (latitude, longitude), optional
            A track of several legs instead.
        time : datetime64 or str, optional
            UTC; needed where the grid changes over the year.
        spacing : float, optional
            Distance between the columns taken from the grid, m; that of the grid itself where not given.
        seabed, surface, flatten, extend_down, tolerance, finest, equation
            As for `from_casts`.

        Returns
        -------
        Section
            Columns that end above the bottom are lent the water of deeper ones, as casts are. Its speed has no
            uncertainty: a climatology says what is usual, not what is there.

        Raises
        ------
        InputError
            The line leaves the grid or crosses land, the grid holds no salinity or does not say what it holds.
        """
        from .building import section_of_grid

        return section_of_grid(
            path, start, end, along=along, time=time, spacing=spacing, seabed=seabed, surface=surface, flatten=flatten,
            extend_down=extend_down, tolerance=tolerance, finest=finest, equation=equation,
        )  # fmt: skip

    def __repr__(self) -> str:
        casts = f"{len(self.profiles)} casts" if len(self.profiles) > 1 else "changes with range"
        water = casts if self.field.varies else "the same at all ranges"
        speed = self._node_speeds
        seabed = repr(self.seabed).removeprefix("<Seabed: ").removesuffix(">")
        name = f" {self.id}" if self.id else ""
        return (
            f"<Section{name}: {self.max_range / 1000.0:g} km, {water}, {speed.min():.1f} to {speed.max():.1f} m/s, "
            f"seabed {seabed}>"
        )

    @cached_property
    def flat_seabed(self) -> Seabed:
        """The seabed in the depths of the field: the same object where the Earth is taken to be flat."""
        if self.radius is None:
            return self.seabed
        return self.seabed.at_depths(flat_depth(self.seabed.depths, self.radius))

    @property
    def deepest(self) -> float:
        """Down to which depth the field goes, m; a little below the seabed."""
        return float(self.true_depth(self.field.depths[-1]))

    @property
    def varies(self) -> bool:
        """Whether anything changes with range: water, or depth or kind of the seabed."""
        return self.field.varies or self.seabed.varies

    @property
    def overshoot(self) -> float:
        """The farthest that a speed of the field leaves the span of the data around it, m/s; NaN if not known."""
        return float("nan") if self.fit is None else self.fit.overshoot

    def flat_depth(self, depth: ArrayLike) -> Any:
        """Depths of the field for true depths, m: those of flattened water, or the same where the Earth is flat."""
        z = np.asarray(depth, dtype=np.float64)
        return z if self.radius is None else flat_depth(z, self.radius)

    def true_depth(self, depth: ArrayLike) -> Any:
        """True depths for depths of the field, m."""
        z = np.asarray(depth, dtype=np.float64)
        return z if self.radius is None else true_depth(z, self.radius)

    def kernel_arrays(self) -> tuple[tuple[Any, ...], tuple[Any, ...]]:
        """The arrays of the kernels `field` and `seabed`, both in the depths of the field."""
        return self.field.kernel_arrays(), self.flat_seabed.kernel_arrays()

    def speed_at(self, range: ArrayLike, depth: ArrayLike) -> Any:  # noqa: A002  # the trade's word
        """Sound speed, m/s.

        Parameters
        ----------
        range, depth : float or array_like
            m, of one shape or to be broadcast; true depths from 0 to the end of the field. Beyond the first and the
            last cast the speed is theirs.

        Returns
        -------
        float or numpy.ndarray

        Raises
        ------
        InputError
            A depth outside the field, or a range that is no number.
        """
        x, z = np.broadcast_arrays(np.asarray(range, np.float64), np.asarray(depth, np.float64))
        bad = ~((z >= 0.0) & (z <= self.deepest))
        if bad.any():
            raise InputError(f"section: depth {z[bad][0]:g} m; 0 to {self.deepest:g} m would be right")
        if not np.isfinite(x).all():
            raise InputError("section: a range is not a finite number; metres along the track would be right")
        speed = np.asarray(self.field.speed_at(x, self.flat_depth(z)))
        if self.radius is not None:
            speed = speed * (self.radius - z) / self.radius
        return float(speed) if speed.ndim == 0 else speed

    def profile_at(self, range: float = 0.0, levels: ArrayLike | int | None = None) -> Profile:  # noqa: A002
        """The water at one range as a profile, from the surface to the seabed.

        Parameters
        ----------
        range : float
            m.
        levels : array_like or int, optional
            Depths, m, or how many equal layers; where not given the edges of the field's cells.

        Returns
        -------
        Profile
            With true depths and speeds; on N layers it differs from the field by terms in 1/N².

        Examples
        --------
        >>> section = Section.from_profile(Profile([0, 100, 1000], [1500, 1500, 1515]))
        >>> section.profile_at(0.0, 4).depth
        array([   0.,  250.,  500.,  750., 1000.])
        """
        bottom = float(self.seabed.depth_at(range))
        if levels is None:
            edges = self.true_depth(self.field.depths)
            depth = np.append(edges[edges < bottom - 0.01], bottom)
        elif np.ndim(levels) == 0:
            depth = np.linspace(0.0, bottom, int(np.asarray(levels)) + 1)
        else:
            depth = np.asarray(levels, dtype=np.float64)
        latitude, longitude = (float("nan"),) * 2 if self.track is None else map(float, self.track.at(range))
        name = f"{self.id or 'section'} at {range / 1000.0:g} km"
        return Profile(depth, self.speed_at(range, depth), id=name, latitude=latitude, longitude=longitude)

    def uncertainty_at(self, range: ArrayLike, depth: ArrayLike) -> Any:  # noqa: A002
        """Standard uncertainty (k = 1) of the speed, m/s, as far as the casts state it.

        Parameters
        ----------
        range, depth : float or array_like
            m, of one shape or to be broadcast.

        Returns
        -------
        float or numpy.ndarray
            Linear between casts, as if they erred together; NaN below what was measured, and where any cast that
            counts states none. What the water did between the casts is not in it.
        """
        x, z = np.broadcast_arrays(np.asarray(range, np.float64), np.asarray(depth, np.float64))
        if not self.profiles:
            found = np.full(x.shape, np.nan)
        else:
            each = np.array([_uncertainty(profile, z) for profile in self.profiles])
            high = np.clip(
                np.searchsorted(self.places, x, side="left"), min(1, self.places.size - 1), self.places.size - 1
            )
            low = np.maximum(high - 1, 0)
            span = np.where(high > low, self.places[high] - self.places[low], 1.0)
            part = np.clip((x - self.places[low]) / span, 0.0, 1.0)
            lower, upper = (np.take_along_axis(each, index[None], axis=0)[0] for index in (low, high))
            found = np.where(part == 0.0, lower, np.where(part == 1.0, upper, lower + part * (upper - lower)))
        return float(found) if found.ndim == 0 else found

    def sediment_at(self, range: float) -> Sediment | None:  # noqa: A002
        """What the seabed is made of at a range, m; None if it absorbs all. Ratios are taken to the bottom water there.

        Examples
        --------
        >>> section = Section.from_profile(Profile([0, 100], [1500, 1500]), seabed=100.0)
        >>> round(section.sediment_at(0.0).speed, 6)
        1650.0
        """
        return self.seabed.sediment_at(range, float(self.speed_at(range, self.seabed.depth_at(range))))

    @cached_property
    def _node_speeds(self) -> Floats:
        """Speeds on the field's nodes above the deepest seabed: (ranges, depths), one range where nothing varies."""
        ranges = self.field.ranges if self.field.varies else self.field.ranges[:1]
        depths = self.true_depth(self.field.depths)
        depths = np.append(depths[depths < self.seabed.deepest], self.seabed.deepest)
        return np.asarray(self.speed_at(ranges[:, None], depths[None, :]))

    def to_dataset(self, *, ranges: ArrayLike | int = 201, depths: ArrayLike | int = 201) -> xarray.Dataset:
        """The section on a grid, with CF attributes.

        Parameters
        ----------
        ranges, depths : array_like or int
            m, or how many, equally far apart over the section and down to the deepest seabed.

        Returns
        -------
        xarray.Dataset
            `sound_speed` on (`range`, `depth`), NaN below the seabed, `seabed_depth` on `range`, `latitude` and
            `longitude` on `range` where the track is known, and the places of the casts on `cast`.

        Examples
        --------
        >>> section = Section.from_profile(Profile([0, 100, 1000], [1500, 1500, 1515]))
        >>> dict(section.to_dataset(ranges=11, depths=21).sizes)
        {'range': 11, 'depth': 21, 'cast': 1}
        """
        from .tables import dataset_of_section

        x = np.linspace(0.0, self.max_range, ranges) if isinstance(ranges, int) else np.asarray(ranges, np.float64)
        z = np.linspace(0.0, self.seabed.deepest, depths) if isinstance(depths, int) else np.asarray(depths, np.float64)
        return dataset_of_section(self, x, z)


def _uncertainty(profile: Profile, depth: Floats) -> Floats:
    if profile.uncertainty is None:
        return np.full(depth.shape, np.nan)
    top = 0.0 if profile.depth[0] == 0.0 else float(profile.depth[0])
    inside = (depth >= top) & (depth <= profile.depth[-1])
    return np.where(inside, np.interp(depth, profile.depth, profile.uncertainty), np.nan)
