"""The waters that may be met: one, or a member each of a season or an ensemble, from casts or a climatology."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ..profile import Profile
from ..water import absorption, sound_speed

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from numpy.typing import NDArray

    from ..casts import Cast
    from ..grids import Climatology
    from .sites import Site

    Floats = NDArray[np.float64]
    Levels = list[tuple[float, float]]

SEASONS = ("December to February", "March to May", "June to August", "September to November")
_MONTHS = (
    "January", "February", "March", "April", "May", "June", "July", "August", "September", "October", "November",
    "December",
)  # fmt: skip
# Casts that end above the deepest one by less than this part of its depth are left as they are.
_DEEP_ENOUGH = 0.95
# Water that ends so much above the seabed is taken as reaching it; below it pressure alone is at work.
_GAP, _LEAST_GAP = 0.1, 20.0


@dataclass(frozen=True, eq=False)
class Member:
    """One water that may be met.

    Parameters
    ----------
    name : str
    profiles : tuple of Profile
        One that holds everywhere, or several with positions: each site takes the nearest that reaches its seabed.
    group : str
        Its season, say; results are given by group too.
    share : float
        How much it counts, above 0.

    Raises
    ------
    InputError
        If there is no profile, or one of several has no position.
    """

    name: str
    profiles: tuple[Profile, ...]
    group: str = ""
    share: float = 1.0

    def __post_init__(self) -> None:
        object.__setattr__(self, "profiles", tuple(self.profiles))
        if not self.profiles:
            raise InputError(f"water {self.name}: holds no profile: one or more would be right")
        if not self.share > 0.0:
            raise InputError(f"water {self.name}: share is {self.share:g}: above 0 would be right")
        if len(self.profiles) > 1:
            for profile in self.profiles:
                if not (np.isfinite(profile.latitude) and np.isfinite(profile.longitude)):
                    raise InputError(
                        f"water {self.name}: cast {profile.id!r} has no position: one would be right, or one cast alone"
                    )

    def at(self, site: Site, deepest: float) -> tuple[Profile, list[str]]:
        """The profile for a site whose seabed goes down to a depth, m, and a note where another cast is nearer."""
        if len(self.profiles) == 1:
            return self.profiles[0], []
        from pyproj import Geod

        count = len(self.profiles)
        away = np.asarray(
            Geod(ellps="WGS84").inv(
                np.full(count, site.longitude), np.full(count, site.latitude),
                np.array([p.longitude for p in self.profiles]), np.array([p.latitude for p in self.profiles]),
            )[2]
        )  # fmt: skip
        enough = min(deepest - max(_GAP * deepest, _LEAST_GAP), max(p.depth[-1] for p in self.profiles))
        deep = np.array([p.depth[-1] >= enough for p in self.profiles])
        chosen = int(np.argmin(np.where(deep, away, np.inf)))
        nearest = int(np.argmin(away))
        if chosen == nearest:
            return self.profiles[chosen], []
        note = (
            f"site {site.name}: the nearest cast, {self.profiles[nearest].id}, does not reach the seabed; "
            f"{self.profiles[chosen].id}, {away[chosen] / 1000.0:.0f} km away, is taken"
        )
        return self.profiles[chosen], [note]


def members_of(profiles: Sequence[Profile], by: str) -> tuple[Member, ...]:
    """Waters from casts.

    Parameters
    ----------
    profiles : sequence of Profile
    by : str
        ``place``: one water, in which each site takes its nearest cast. ``season`` or ``month``: likewise, one for each
        season or month of the casts (seasons of three months, the first from December to February). ``cast``: each
        cast is a water of its own, in groups by season; groups count the same, whatever the number of their casts.

    Raises
    ------
    InputError
        If a cast has no time to be grouped by, or `by` is another word.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> casts = [Profile([0, 100], [1500, 1501], id=t, time=np.datetime64(t)) for t in ("2016-04-14", "2016-07-21")]
    >>> [(member.name, member.group, member.share) for member in members_of(casts, "cast")]
    [('2016-04-14', 'March to May', 0.5), ('2016-07-21', 'June to August', 0.5)]
    """
    if by == "place":
        return (Member("all casts", tuple(profiles)),)
    if by not in {"season", "month", "cast"}:
        raise InputError(f"waters by {by!r}: place, season, month or cast would be right")
    timed = not any(np.isnat(profile.time) for profile in profiles)
    if not timed and by != "cast":
        without = next(profile.id for profile in profiles if np.isnat(profile.time))
        raise InputError(f"cast {without!r} has no time, so no {by}: one, or members by cast or place, would be right")
    names = _MONTHS if by == "month" else SEASONS
    groups: dict[str, list[Profile]] = {}
    for profile in profiles:
        month = int(profile.time.astype("datetime64[M]").astype(int)) % 12 if timed else 0  # January is 0
        name = "" if not timed else names[month] if by == "month" else names[(month + 1) % 12 // 3]
        groups.setdefault(name, []).append(profile)
    part = 1.0 / len(groups)
    if by != "cast":
        return tuple(Member(name, tuple(held), group=name, share=part) for name, held in groups.items())
    return tuple(
        Member(profile.id, (profile,), group=name, share=part / len(held))
        for name, held in groups.items()
        for profile in held
    )


def deepened(casts: Sequence[Cast]) -> tuple[list[Cast], list[str]]:
    """Casts that all go down to where the deepest does: the others are lent its water below their own.

    Parameters
    ----------
    casts : sequence of Cast
        Never changed; those of a single level are left out.

    Returns
    -------
    casts : list of Cast
    notes : list of str
        What was left out or lent.

    Raises
    ------
    InputError
        If none has two levels.
    """
    from ..casts import complete_cast

    usable = [cast for cast in casts if len(cast) > 1]
    if not usable:
        raise InputError(f"{len(casts)} casts, none of them with two levels: others are needed")
    notes = [f"cast {cast.id} has a single level and is left out" for cast in casts if len(cast) < 2]
    reach = [float(np.nanmax(_vertical(cast))) for cast in usable]
    deepest = usable[int(np.argmax(reach))]
    found = [
        cast if deep >= _DEEP_ENOUGH * max(reach) else complete_cast(cast, below=[deepest])
        for cast, deep in zip(usable, reach, strict=True)
    ]
    lent = sum(deep < _DEEP_ENOUGH * max(reach) for deep in reach)
    if lent:
        notes.append(f"{lent} of {len(found)} casts are lent the deep water of {deepest.id}")
    return found, notes


def _vertical(cast: Cast) -> Floats:
    """Depth, or pressure for it, which differ by 3 % at most: enough for how far a cast goes."""
    column = cast.depth if cast.depth is not None else cast.pressure
    return np.array([np.nan]) if column is None else np.asarray(column)


def levels_of_casts(casts: Iterable[Cast], depth: float) -> Levels:
    """Temperature and salinity at a depth, m, of those casts that know both there."""
    found = []
    for cast in casts:
        if cast.temperature is None or cast.salinity is None:
            continue
        vertical = _vertical(cast)
        there = np.isfinite(cast.temperature) & np.isfinite(cast.salinity) & np.isfinite(vertical)
        if there.any() and vertical[there].max() >= depth:
            order = np.argsort(vertical[there])
            at = vertical[there][order]
            t, s = (np.interp(depth, at, column[there][order]) for column in (cast.temperature, cast.salinity))
            found.append((float(t), float(s)))
    return found


def members_of_grid(
    grid: Climatology,
    places: Sequence[tuple[float, float]],
    *,
    times: Sequence[str] | None = None,
    depth: float = 0.0,
    equation: str = "teos10",
) -> tuple[tuple[Member, ...], Levels]:
    """Waters from a grid of temperature and salinity: one for each time, with a column at each place.

    Parameters
    ----------
    grid : Climatology
    places : sequence of (latitude, longitude)
        Degrees; of the sites.
    times : sequence of str, optional
        Dates, UTC; needed where the grid changes over the year.
    depth : float
        m, at which temperature and salinity are handed out too.
    equation : str
        Of the sound speed.

    Returns
    -------
    members : tuple of Member
    levels : list of (temperature, salinity)
        At that depth, of the columns that reach it.

    Raises
    ------
    InputError
        If there is no water at a place, no salinity, or a time is none.
    """
    latitude, longitude = (np.array(column) for column in zip(*places, strict=True))
    members: list[Member] = []
    levels: Levels = []
    for time in times if times is not None else [None]:
        try:
            when = None if time is None else np.datetime64(time, "s")
        except ValueError:
            raise InputError(f"time {time!r} is no date: 2016-04-15 would be right") from None
        z, temperature, salinity = grid.along(latitude, longitude, when)
        if salinity is None:
            raise InputError(f"{grid.name}: holds no salinity, so no sound speed: give the file of the salinity too")
        columns = []
        for j, (lat, lon) in enumerate(places):
            there = np.isfinite(temperature[j]) & np.isfinite(salinity[j])
            if there.sum() < 2:
                raise InputError(
                    f"{grid.name}: there is no water in it at latitude {lat:g}, longitude {lon:g}: give another site"
                )
            at, t, s = z[j, there], temperature[j, there], salinity[j, there]
            speed = sound_speed(t, s, depth=at, latitude=lat, longitude=lon, equation=equation)
            name = f"column at {lat:g}, {lon:g}"
            columns.append(Profile(at, speed, id=name, latitude=lat, longitude=lon, equation=equation))
            if at[-1] >= depth:
                levels.append((float(np.interp(depth, at, t)), float(np.interp(depth, at, s))))
        count = len(times) if times is not None else 1
        members.append(Member(time or "grid", tuple(columns), group=time or "", share=1.0 / count))
    return tuple(members), levels


def mean_absorption(frequency: float, levels: Levels, depth: float) -> tuple[float, str]:
    """The mean over waters of the absorption at a depth.

    Parameters
    ----------
    frequency : float
        Hz.
    levels : list of (temperature, salinity)
        degC and practical salinity there; where there are none, 10 degC and 35 are assumed.
    depth : float
        m.

    Returns
    -------
    absorption : float
        dB/km.
    note : str
        Where it comes from.

    Examples
    --------
    >>> mean_absorption(12e3, [(18.0, 36.5)], 100.0)
    (1.0..., 'absorption is 1.0... dB/km, by Francois and Garrison (1982) for the water at 100 m')
    """
    water = levels or [(10.0, 35.0)]
    with warnings.catch_warnings(record=True) as beyond:
        warnings.simplefilter("always")
        each = [float(absorption(frequency, t, s, depth=depth)) for t, s in water]
    found = float(np.mean(each))
    note = f"absorption is {found:.3g} dB/km, by Francois and Garrison (1982) for "
    note += f"the water at {depth:.0f} m" if levels else "water assumed to have 10 degC and a salinity of 35"
    return found, note + (", which is outside its stated range" if beyond else "")
