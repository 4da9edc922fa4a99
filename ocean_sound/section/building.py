"""How sections are made: from one profile, from casts along a track, from a grid along a line."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..grids import Bathymetry, Climatology, open_climatology
from ..profile import Profile
from ..profile.flattening import earth_radius
from ..water import sound_speed
from .columns import Column, column_of, completed, field_through, smoothed
from .seabed import Seabed, track_of
from .section import EARTH_RADIUS, Section
from .surface import Surface
from .track import Place, Track, spacing_of

if TYPE_CHECKING:
    from collections.abc import Sequence
    from os import PathLike

    from numpy.typing import ArrayLike, NDArray

    from ..casts import Cast

    Floats = NDArray[np.float64]

FLAT_UP_TO = 20_000.0
"""Sections up to this long, m, are taken to be flat unless told otherwise."""
_LONGEST = 100_000.0  # m, of a section that nothing else limits
# How far the field goes on below the deepest seabed: steps that end a little below it should see smooth water.
_MARGIN, _LEAST_MARGIN = 0.02, 5.0
# A gap between the deepest water and the seabed that is closed without asking.
_GAP, _LEAST_GAP = 0.1, 20.0
_MOST_COLUMNS = 400
# Casts are averaged over this part of the seabed's depth: 10 m in the deep sea, less than a level in shallow water.
_SMOOTH = 0.002
_ASSUMED = "seabed assumed to be of sand: give a Seabed with its kind"
_MOST_NOTES = 12
_HOURS_APART = 24.0
_WORTH_SAYING = 1e-4  # m/s


def section_of_profile(
    profile: Profile,
    *,
    seabed: Seabed | float | None,
    surface: Surface | None,
    max_range: float | None,
    flatten: bool | float | None,
    extend_down: bool | None,
    smooth: float,
    tolerance: float,
    finest: float,
) -> Section:
    """See `Section.from_profile`."""
    column = column_of(profile, 0.0)
    bed = _seabed(seabed, [column], None)
    if max_range is None:
        max_range = float(bed.ranges[-1]) if bed.varies and bed.ranges[-1] > 0.0 else _LONGEST
    radius = _radius(max_range, profile.latitude, None, flatten=flatten)
    bottom = _bottom(bed)
    notes = [*profile.to_surface().notes, *bed.notes, *_below(column.reach, bed, extend_down=extend_down)]
    smooth_columns, average = _smoothed([column], smooth)
    columns, _ = completed(smooth_columns, bed.deepest, bottom)
    field, fit = field_through(columns, bottom, radius=radius, **_fineness(tolerance, finest))
    return Section(
        field, bed, surface or Surface(), max_range=max_range, radius=radius, profiles=(profile,), places=np.zeros(1),
        fit=fit, id=profile.id, notes=(*notes, *average, *_about_earth(radius)),
    )  # fmt: skip


def section_of_casts(
    casts: Sequence[Cast | Profile],
    *,
    seabed: Seabed | float | str | PathLike[str] | Bathymetry | None,
    along: Track | Sequence[Place] | None,
    ranges: ArrayLike | None,
    reach: float,
    apart: float,
    complete: bool,
    surface: Surface | None,
    max_range: float | None,
    flatten: bool | float | None,
    extend_down: bool | None,
    smooth: float | None,
    tolerance: float,
    finest: float,
    equation: str,
) -> Section:
    """See `Section.from_casts`."""
    profiles = [cast if isinstance(cast, Profile) else Profile.from_cast(cast, equation=equation) for cast in casts]
    if len(profiles) < 2:
        raise InputError(f"section: {len(profiles)} casts; two or more are needed, or Section.from_profile for one")
    track, places = _placed(profiles, along, ranges, reach)
    order = np.argsort(places, kind="stable")
    profiles, places, notes = _thinned([profiles[j] for j in order], places[order], apart)
    _check_increasing(profiles, places)
    return _section(
        profiles, places, track, seabed=seabed, complete=complete, surface=surface, max_range=max_range,
        flatten=flatten, extend_down=extend_down, smooth=smooth, tolerance=tolerance, finest=finest,
        notes=[*_own_notes(profiles), *notes, *_times_apart(profiles)],
    )  # fmt: skip


def section_of_grid(
    path: str | PathLike[str] | Climatology,
    start: Place | None,
    end: Place | None,
    *,
    along: Track | Sequence[Place] | None,
    time: Any,
    spacing: float | None,
    seabed: Seabed | float | str | PathLike[str] | Bathymetry | None,
    surface: Surface | None,
    flatten: bool | float | None,
    extend_down: bool | None,
    tolerance: float,
    finest: float,
    equation: str,
) -> Section:
    """See `Section.from_grid`."""
    track = track_of(start, end, along)
    grid = path if isinstance(path, Climatology) else open_climatology(path)
    step = spacing_of(grid.temperature.grid, track) if spacing is None else float(spacing)
    if not step > 0.0:
        raise InputError(f"section: spacing is {step:g} m; a distance above 0 would be right")
    pieces = int(np.clip(np.ceil(track.length / step), 1, _MOST_COLUMNS - 1))
    places = np.linspace(0.0, track.length, pieces + 1)
    profiles, kept, notes = _columns_of_grid(grid, track, places, time, equation)
    name = grid.name.replace("\\", "/").rsplit("/", 1)[-1]
    notes.insert(0, f"water of {name}, a column each {places[1] / 1000.0:.3g} km; its uncertainty is not known")
    return _section(
        profiles, places[kept], track, seabed=seabed, complete=True, surface=surface, max_range=None, flatten=flatten,
        extend_down=extend_down, smooth=0.0, tolerance=tolerance, finest=finest, notes=notes,
    )  # fmt: skip


def _section(
    profiles: Sequence[Profile],
    places: Floats,
    track: Track | None,
    *,
    seabed: Any,
    complete: bool,
    surface: Surface | None,
    max_range: float | None,
    flatten: bool | float | None,
    extend_down: bool | None,
    smooth: float | None,
    tolerance: float,
    finest: float,
    notes: Sequence[str],
) -> Section:
    """The section through profiles at places, whose order is that of the track."""
    columns = [column_of(profile, place) for profile, place in zip(profiles, places.tolist(), strict=True)]
    bed = _seabed(seabed, columns, track)
    bottom = _bottom(bed)
    deepest = max(column.reach for column in columns)
    gap = _below(deepest, bed, extend_down=extend_down)
    lacking = [column for column in columns if column.reach < min(deepest, float(bed.depth_at(column.place)))]
    if lacking and not complete:
        first = lacking[0]
        raise InputError(
            f"section: {first.name} reaches {first.reach:g} m, the seabed there lies at "
            f"{bed.depth_at(first.place):g} m: complete it, leave it out, or allow complete=True"
        )
    columns, average = _smoothed(columns, _SMOOTH * bed.deepest if smooth is None else smooth)
    full, lent = completed(columns, bed.deepest, bottom)
    if len(lent) > _MOST_NOTES:
        lent = [f"{len(lent)} of {len(columns)} columns end above the bottom: below by the nearest deeper ones"]
    length = track.length if track is not None else float(places[-1])
    longest = length if max_range is None else float(max_range)
    middle = 0.5 * longest
    latitude = float("nan") if track is None else float(track.at(middle)[0])
    radius = _radius(longest, latitude, None if track is None else track.azimuth_at(middle), flatten=flatten)
    field, fit = field_through(full, bottom, radius=radius, **_fineness(tolerance, finest))
    return Section(
        field, bed, surface or Surface(), max_range=longest, radius=radius, track=track, profiles=tuple(profiles),
        places=places, fit=fit, notes=(*notes, *bed.notes, *average, *gap, *lent, *_about_earth(radius)),
    )  # fmt: skip


def _smoothed(columns: Sequence[Column], window: float) -> tuple[list[Column], list[str]]:
    """The columns averaged over a window of depth, m, and a note of how much that changes them."""
    if not (np.isfinite(window) and window >= 0.0):
        raise InputError(f"section: smooth is {window:g} m; a height of 0 or more would be right")
    both = [smoothed(column, window) for column in columns]
    worst = max(change for _, change in both)
    note = f"speeds averaged over {window:.3g} m of depth, which changes them by {worst:.2g} m/s rms or less"
    return [column for column, _ in both], [note] if worst > _WORTH_SAYING else []


def _fineness(tolerance: float, finest: float) -> dict[str, float]:
    for name, value, unit in (("tolerance", tolerance, "m/s"), ("finest", finest, "m")):
        if not (np.isfinite(value) and value > 0.0):
            raise InputError(f"section: {name} is {value:g}; a number of {unit} above 0 would be right")
    return {"tolerance": float(tolerance), "finest": float(finest)}


def _seabed(seabed: Any, columns: Sequence[Column], track: Track | None) -> Seabed:
    """The seabed that is meant."""
    if isinstance(seabed, Seabed):
        return seabed
    if seabed is None:
        return Seabed.flat(max(column.reach for column in columns), kind=None)
    if isinstance(seabed, int | float | np.number):
        level = Seabed.flat(float(seabed))
        return Seabed(level.ranges, level.depths, level.kind, (_ASSUMED,))
    if track is None:
        raise InputError("section: a seabed from a grid needs a track; casts with positions, or along=, would be right")
    found = Seabed.from_bathymetry(seabed, along=track)
    return Seabed(found.ranges, found.depths, found.kind, (*found.notes, _ASSUMED))


def _bottom(seabed: Seabed) -> float:
    """How deep the field goes."""
    return seabed.deepest + max(_MARGIN * seabed.deepest, _LEAST_MARGIN)


def _below(reach: float, seabed: Seabed, *, extend_down: bool | None) -> list[str]:
    """The note for water that is added below all that is known, or the error where it may not be."""
    gap = seabed.deepest - reach
    if gap <= 0.0:
        return []
    small = gap <= max(_GAP * seabed.deepest, _LEAST_GAP)
    if extend_down is False or (extend_down is None and not small):
        raise InputError(
            f"section: the water is known down to {reach:g} m and the seabed lies down to {seabed.deepest:g} m: "
            "complete a cast down to it (complete_cast), or give extend_down=True for water as pressure alone has it"
        )
    return [f"from {reach:.0f} m down to {seabed.deepest:.0f} m the speed grows as by pressure alone"]


def _radius(length: float, latitude: float, azimuth: float | None, *, flatten: bool | float | None) -> float | None:
    """The Earth's radius to flatten by; None for a flat Earth."""
    if flatten is False or (flatten is None and length <= FLAT_UP_TO):
        return None
    if flatten is None or flatten is True:
        return EARTH_RADIUS if np.isnan(latitude) else float(earth_radius(latitude, azimuth))
    if not 1e5 <= float(flatten) <= 1e9:
        raise InputError(
            f"section: flatten is {flatten!r}; True, False or a radius in m, about 6371000, would be right"
        )
    return float(flatten)


def _about_earth(radius: float | None) -> list[str]:
    return [] if radius is None else [f"flattened: the Earth's radius is {radius:.0f} m"]


def _own_notes(profiles: Sequence[Profile]) -> list[str]:
    """What the profiles say of themselves, each thing once."""
    said: dict[str, list[str]] = {}
    for profile in profiles:
        for note in profile.to_surface().notes:
            said.setdefault(note, []).append(profile.id)
    return [f"{names[0]}: {note}" if len(names) == 1 else f"{len(names)} casts: {note}" for note, names in said.items()]


def _times_apart(profiles: Sequence[Profile]) -> list[str]:
    times = np.array([profile.time for profile in profiles], dtype="datetime64[s]")
    times = times[~np.isnat(times)]
    hours = float((times.max() - times.min()) / np.timedelta64(1, "h")) if times.size else 0.0
    return [f"the casts were taken over {hours / 24.0:.1f} days"] if hours > _HOURS_APART else []


def _placed(
    profiles: Sequence[Profile], along: Track | Sequence[Place] | None, ranges: ArrayLike | None, reach: float
) -> tuple[Track | None, Floats]:
    """The track, and where along it the profiles are."""
    if ranges is not None:
        places = np.asarray(ranges, dtype=np.float64)
        if places.shape != (len(profiles),) or not np.isfinite(places).all():
            raise InputError(f"section: ranges are no list of {len(profiles)} distances, one in m for each cast")
        _check_increasing(profiles, places)
        return None if along is None else Track.of(along), places
    for profile in profiles:
        if not (np.isfinite(profile.latitude) and np.isfinite(profile.longitude)):
            raise InputError(f"section: cast {profile.id!r} has no position; one, or ranges=, would be right")
    latitude = np.array([profile.latitude for profile in profiles])
    longitude = np.array([profile.longitude for profile in profiles])
    if along is None:
        track = Track(latitude, longitude)
        return track, track.ranges.copy()
    track = Track.of(along)
    places, off = track.nearest(latitude, longitude)
    far = np.flatnonzero(~(off <= reach))
    if far.size:
        j = int(far[0])
        raise InputError(
            f"section: cast {profiles[j].id!r} lies {off[j] / 1000.0:.3g} km off the track; up to {reach / 1000.0:g} "
            "km would be right: leave it out or give reach="
        )
    return track, places


def _thinned(profiles: Sequence[Profile], places: Floats, apart: float) -> tuple[list[Profile], Floats, list[str]]:
    """Of profiles too near each other the deepest, and a note for each that went."""
    if not apart >= 0.0:
        raise InputError(f"section: apart is {apart:g} m; a distance of 0 or more would be right")
    kept: list[int] = []
    notes = []
    for j in sorted(range(len(profiles)), key=lambda index: -profiles[index].depth[-1]):
        near = next((i for i in kept if abs(places[i] - places[j]) < apart), None)
        if near is None:
            kept.append(j)
        else:
            away = abs(places[near] - places[j])
            notes.append(f"cast {profiles[j].id} left out: {profiles[near].id}, {away:.0f} m along, reaches deeper")
    kept.sort()
    if len(kept) < 2:
        raise InputError(
            f"section: of {len(profiles)} casts {len(kept)} is left with apart={apart:g} m; two are needed"
        )
    return [profiles[j] for j in kept], places[kept], notes


def _check_increasing(profiles: Sequence[Profile], places: Floats) -> None:
    still = np.flatnonzero(~(np.diff(places) > 0.0))
    if still.size:
        j = int(still[0])
        raise InputError(
            f"section: casts {profiles[j].id!r} and {profiles[j + 1].id!r} are at {places[j]:g} m and "
            f"{places[j + 1]:g} m along the track; distances that increase would be right (apart= leaves the deepest)"
        )


def _columns_of_grid(
    grid: Climatology, track: Track, places: Floats, time: Any, equation: str
) -> tuple[list[Profile], NDArray[np.int64], list[str]]:
    """A profile for each place that has two levels of water at least, which places those are, and notes."""
    latitude, longitude = track.at(places)
    depth, temperature, salinity = grid.along(latitude, longitude, time)
    if salinity is None:
        raise InputError(f"{grid.name}: holds no salinity, so no sound speed; give salinity_path= to open_climatology")
    profiles, kept, notes = [], [], []
    for j, place in enumerate(places.tolist()):
        there = np.isfinite(temperature[j]) & np.isfinite(salinity[j])
        if not there.any():
            raise InputError(
                f"{grid.name}: has no water at latitude {latitude[j]:.4f}, longitude {longitude[j]:.4f}, "
                f"{place / 1000.0:.1f} km along the line: a line over the sea would be right"
            )
        if there.sum() < 2:
            notes.append(f"the column at {place / 1000.0:.1f} km has one level and is left out")
            continue
        speed = sound_speed(
            temperature[j, there], salinity[j, there], depth=depth[j, there], latitude=latitude[j],
            longitude=longitude[j], equation=equation,
        )  # fmt: skip
        name = f"column at {place / 1000.0:.1f} km"
        profiles.append(
            Profile(
                depth[j, there], speed, id=name, latitude=latitude[j], longitude=longitude[j], equation=str(equation)
            )
        )
        kept.append(j)
    if len(profiles) < 2:
        raise InputError(
            f"{grid.name}: {len(profiles)} of {places.size} columns along the line have water; two are needed"
        )
    return profiles, np.array(kept), notes
