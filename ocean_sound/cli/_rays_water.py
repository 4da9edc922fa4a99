"""The waters that a plan for `ocean-sound rays` names: one cast, casts along a track, a line through a grid."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..errors import InputError
from . import _shared as shared

if TYPE_CHECKING:
    from ..plans import RaysPlan
    from ..profile import Profile
    from ..section import Section, Track

    Water = Profile | Section


def deepest_of(water: Water) -> float:
    """The depth of its bottom, m."""
    from ..profile import Profile

    return float(water.depth[-1]) if isinstance(water, Profile) else float(water.seabed.deepest)


class Reader:
    """Makes the waters that a plan names; file names are relative to its folder."""

    def __init__(self, plan: RaysPlan, folder: Path) -> None:
        self.plan, self.folder = plan, folder

    def water(self) -> Water:
        """The plan's water; of an ensemble over times or bearings, that of the first."""
        many = self.plan.ensemble
        if self.plan.water.file is not None:
            return self._of_cast(self.plan.water.file, self.plan.water.cast)
        if self.plan.water.files is not None:
            return self._of_casts(self.plan.water.files)
        if many is not None and many.times is not None:
            return self._of_grid(time=many.times[0])
        if many is not None and many.bearings is not None:
            return self._of_grid(bearing=many.bearings[0])
        return self._of_grid(time=self.plan.water.time)

    def ensemble(self, water: Water) -> dict[str, Any]:
        """The members of an ensemble, and the grid that they share."""
        import numpy as np

        many, far = self.plan.ensemble, self.plan.rays.max_range
        if many is None:
            return {}
        sources: Any = self.plan.source.depth
        waters, names = [water], [""]
        if many.files is not None:
            waters, names = [self._of_cast(name, None) for name in many.files], [Path(name).stem for name in many.files]
        elif many.source_depths is not None:
            sources, waters = many.source_depths, [water] * len(many.source_depths)
            names = [f"source at {depth:g} m" for depth in many.source_depths]
        elif many.bearings is not None:
            waters = [self._of_grid(bearing=bearing) for bearing in many.bearings]
            names = [f"bearing {bearing:g} degrees" for bearing in many.bearings]
        elif many.times is not None:
            waters, names = [self._of_grid(time=time) for time in many.times], list(many.times)
        deepest = max(deepest_of(one) for one in waters)
        return {
            "waters": waters,
            "names": names,
            "source_depth": sources,
            "ranges": np.linspace(0.0, far, many.ranges),
            "depths": np.linspace(0.0, deepest, many.depths),
            "shadow": self.plan.shadow.wanted,
            "workers": many.workers,
            "scheduler": many.scheduler,
        }

    def _of_cast(self, name: str, which: str | None) -> Water:
        from ..section import Section

        water, plan = self.plan.water, self.plan
        profile = shared.profile_in(
            self.folder / name,
            which=which,
            mapping=[f"{key}={column}" for key, column in water.columns.items()],
            equation=water.equation,
            salinity=water.salinity,
            instrument=water.instrument,
        )
        if not plan.needs_section:
            return profile
        return Section.from_profile(
            profile, seabed=self._seabed(None), max_range=plan.rays.max_range, smooth=water.smooth or 0.0,
            **self._common(),
        )  # fmt: skip

    def _of_casts(self, names: list[str]) -> Water:
        from ..section import Section, Track

        water = self.plan.water
        mapping = [f"{key}={column}" for key, column in water.columns.items()]
        both = [(cast, self.folder / name) for name in names for cast in shared.read_all(self.folder / name, mapping)]
        if water.casts is not None:
            by_id = {cast.id: (cast, path) for cast, path in both}
            for wanted in water.casts:
                if wanted not in by_id:
                    listed = ", ".join(list(by_id)[:5]) + (", ..." if len(by_id) > 5 else "")
                    raise InputError(f"field 'water.casts' has {wanted!r}: give ids of the files' casts ({listed})")
            both = [by_id[wanted] for wanted in water.casts]
        profiles = [
            shared.profile_of(cast, path, equation=water.equation, salinity=water.salinity, instrument=water.instrument)
            for cast, path in both
        ]
        along: Any = None if water.along is None else [tuple(place) for place in water.along]
        track = None
        if along is not None:
            track = Track.of(along)
        elif water.ranges is None and self.plan.seabed.bathymetry is not None:
            track = Track.of([(one.latitude, one.longitude) for one in profiles])
        more: dict[str, Any] = {
            name: getattr(water, name) for name in ("reach", "apart", "smooth") if getattr(water, name) is not None
        }
        return Section.from_casts(
            profiles, seabed=self._seabed(track), along=along, ranges=water.ranges, **more, **self._common()
        )

    def _of_grid(self, *, time: str | None = None, bearing: float | None = None) -> Water:
        from ..grids import open_climatology
        from ..section import Section, Track

        water = self.plan.water
        grid = open_climatology(
            self.folder / str(water.grid),
            temperature=water.temperature_kind,
            salinity=water.salinity_kind,
            salinity_path=None if water.salinity_file is None else self.folder / water.salinity_file,
        )
        if bearing is not None:
            track = _track_at(water.start or [], bearing, self.plan.rays.max_range)
        elif water.along is not None:
            track = Track.of([(place[0], place[1]) for place in water.along])
        else:
            start, end = water.start or [], water.end or []
            track = Track.between((start[0], start[1]), (end[0], end[1]))
        return Section.from_grid(
            grid, along=track, time=water.time if time is None else time, spacing=water.spacing,
            equation=water.equation, seabed=self._seabed(track), **self._common(),
        )  # fmt: skip

    def _common(self) -> dict[str, Any]:
        from ..section import Surface

        surface, water = self.plan.surface, self.plan.water
        return {
            "surface": None if surface is None else Surface(surface.wind_speed),
            "flatten": water.flatten,
            "extend_down": water.extend_down,
            **({} if water.tolerance is None else {"tolerance": water.tolerance}),
        }

    def _seabed(self, track: Track | None) -> Any:
        import numpy as np

        from ..plans import ABSORBS
        from ..section import Seabed, Sediment

        bed = self.plan.seabed
        kind: Any = None if bed.kind == ABSORBS else bed.kind or "sand"
        if bed.kinds is not None:
            kind = [(start, None if name == ABSORBS else name) for start, name in bed.kinds]
        if bed.sediment is not None:
            kind = Sediment(**bed.sediment.model_dump())
        said = any(value is not None for value in (bed.kind, bed.kinds, bed.sediment))
        notes = () if said else ("seabed assumed to be of sand",)
        if bed.points is not None:
            ranges, depths = np.array(bed.points, dtype=float).T
            return Seabed(ranges, depths, kind, notes)
        if bed.bathymetry is not None and track is not None:
            from ..grids import open_bathymetry

            grid = open_bathymetry(self.folder / bed.bathymetry, kind=bed.bathymetry_kind)
            return Seabed.from_bathymetry(grid, along=track, kind=kind) if said else grid
        if bed.depth is not None:
            return Seabed.flat(bed.depth, kind) if said else bed.depth
        return None


def _track_at(start: list[float], bearing: float, length: float) -> Track:
    """The geodesic from a place at a true bearing."""
    from pyproj import Geod

    from ..section import Track

    longitude, latitude, _ = Geod(ellps="WGS84").fwd(start[1], start[0], bearing, length * (1.0 + 1e-9))
    return Track.between((start[0], start[1]), (latitude, longitude))
