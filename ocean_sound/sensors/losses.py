"""Losses around sites: sections along bearings, from the receiver outward, kept on disk for the next time.

Source and receiver may be exchanged, so one computation from the receiver's depth serves sources at all ranges and
depths. What is kept lies under a hash of all that it depends on (water, seabed, frequency, grid, method, the code
itself), so that a change of threshold, noise or number of sensors computes nothing again, a run that was killed goes on
where it was, and nothing out of date is ever taken.
"""

from __future__ import annotations

import hashlib
import json
import shutil
import tempfile
import weakref
from dataclasses import dataclass, field
from functools import cache
from importlib import metadata
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError, OceanSoundError, OutputError
from ..files import HDF5_LOCK, attributes, write_dataset
from ..parallel import in_order, usable_processors, workers

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence
    from os import PathLike

    from numpy.typing import NDArray

    from ..grids import Bathymetry
    from ..profile import Profile
    from ..section import Section
    from .sites import Site
    from .waters import Member

    Floats = NDArray[np.float64]
    Engine = Callable[..., Floats]

MOST = 300.0
"""dB: a loss so large that no sound comes; kept in place of infinity, so that parts of it can be added up."""
_BEARINGS_PER_FILE = 12
_LEAST_DEPTH = 0.5  # m of water below which a bearing ends at the shore
_LAYOUT = 1
# Of depth, below which `loss` takes beams for no method; at about this speed, m/s.
_FEWEST_WAVELENGTHS, _SPEED = 10.0, 1500.0
# With phases dropped: how many beams, and how much wider than `loss` would have them so that they hide their number.
_FEW_BEAMS, _WIDER = 500, 2.5
# Sections within which a change would change losses.
_CODE = ("rays", "section", "water", "profile")


@dataclass(frozen=True, eq=False)
class LossSettings:
    """How losses are computed.

    Parameters
    ----------
    frequency : float
        Hz.
    max_range : float
        m.
    depths : numpy.ndarray
        m, of the grid.
    bearings : int
        How many, evenly from north.
    ranges : int
        How many, evenly up to `max_range`.
    absorption : float
        dB/km.
    wind_speed : float
        m/s, for the loss at the surface.
    kind : object
        What the seabed is made of: see `Seabed`.
    method, phases : str
        As for `loss`.
    beams : int, optional
        As for `loss`; where not given, and phases are dropped, 500 wide ones: see the notes.
    extend_down : bool, optional
        As for `Section.from_profile`.
    smooth, tolerance : float
        m and m/s, likewise: water is followed less closely than by default there, which is several times as fast.
    insist : bool
        As for `loss`. Bearings that only end in water too shallow for beams are computed in any case.
    options : mapping
        More of the arguments of `loss`.
    boundaries : bool
        False for water from which neither surface nor seabed sends anything back.

    Raises
    ------
    InputError
        If a number makes no sense.

    Notes
    -----
    With phases dropped few beams do: at 12 kHz over sand hills under 220 m of water, out to 20 km, 500 of them differ
    from the 14,000 that `loss` would take by 0.7 dB in the median (90 %: 4.2 dB; on the whole they are 0.1 dB low), in
    a twentieth of the time (`tests/benchmarks/sensors.py`).
    """

    frequency: float
    max_range: float
    depths: Floats
    bearings: int = 36
    ranges: int = 200
    absorption: float = 0.0
    wind_speed: float = 0.0
    kind: Any = "sand"
    method: str = "auto"
    phases: str = "dropped"
    beams: int | None = None
    extend_down: bool | None = None
    smooth: float = 0.0
    tolerance: float = 0.1
    insist: bool = False
    options: Mapping[str, Any] = field(default_factory=dict)
    boundaries: bool = True

    def __post_init__(self) -> None:
        z = np.array(self.depths, dtype=np.float64)
        z.flags.writeable = False
        object.__setattr__(self, "depths", z)
        for name, value, unit in (("frequency", self.frequency, "Hz"), ("max_range", self.max_range, "m")):
            if not (np.isfinite(value) and value > 0.0):
                raise InputError(f"losses: {name} is {value:g} {unit}: above 0 would be right")
        if self.bearings < 1 or self.ranges < 2:
            raise InputError(
                f"losses: {self.bearings} bearings and {self.ranges} ranges: 1 or more and 2 or more would be right"
            )
        if z.ndim != 1 or not z.size or not (np.isfinite(z).all() and z[0] >= 0.0 and np.all(np.diff(z) > 0.0)):
            raise InputError("losses: depths do not increase from 0 or more: metres, positive down, would be right")

    @property
    def azimuths(self) -> Floats:
        """Degrees from north, clockwise."""
        return np.arange(self.bearings, dtype=np.float64) * (360.0 / self.bearings)

    @property
    def distances(self) -> Floats:
        """m, of the grid."""
        steps = np.arange(1, self.ranges + 1, dtype=np.float64)
        return np.asarray(self.max_range * steps / self.ranges, dtype=np.float64)

    def stated(self) -> dict[str, Any]:
        """All that a loss depends on here, in plain words."""
        return {
            "frequency": self.frequency,
            "distances": [self.max_range, self.ranges],
            "depths": self.depths.tolist(),
            "absorption": self.absorption,
            "wind_speed": self.wind_speed,
            "kind": repr(self.kind),
            "method": self.method,
            "phases": self.phases,
            "beams": self.beams,
            "extend_down": self.extend_down,
            "smooth": [self.smooth, self.tolerance],
            "insist": self.insist,
            "options": {name: repr(value) for name, value in sorted(self.options.items())},
            "boundaries": self.boundaries,
        }


def depth_grid(depths: Sequence[float], number: int) -> Floats:
    """Depths for which losses are computed so that these lie among them: evenly from the first to the last, m.

    Examples
    --------
    >>> depth_grid([10.0, 30.0], 5), depth_grid([40.0], 5)
    (array([10., 15., 20., 25., 30.]), array([40.]))
    """
    if depths[0] == depths[-1]:
        return np.array([float(depths[0])])
    return np.linspace(depths[0], depths[-1], max(number, 2))


@dataclass(frozen=True, eq=False)
class Losses:
    """Losses around sites, on disk. Made by `compute_losses`.

    Parameters
    ----------
    sites : tuple of Site
    members : tuple of Member
    settings : LossSettings
    files : dict
        The files of each (member, site), one after the other over bearings.
    computed, kept : int
        Sections computed now, and taken from disk; those that several sites share count once.
    notes : tuple of str
        What was assumed.
    """

    sites: tuple[Site, ...]
    members: tuple[Member, ...]
    settings: LossSettings
    files: Mapping[tuple[int, int], tuple[Path, ...]]
    computed: int
    kept: int
    notes: tuple[str, ...] = ()

    def of(self, member: int, site: int) -> Floats:
        """Transmission loss, dB, shape (bearings, ranges, depths), float32; NaN below the seabed.

        Raises
        ------
        InputError
            If a file was removed or harmed meanwhile.
        """
        return np.concatenate([_read(path) for path in self.files[member, site]])

    def reaches(self, member: int, site: int) -> Floats:
        """How far the sea goes on each bearing, m: to `max_range` or the shore."""
        return np.concatenate([_read(path, "reach") for path in self.files[member, site]])


def compute_losses(
    sites: Sequence[Site],
    members: Sequence[Member],
    *,
    settings: LossSettings,
    bathymetry: Bathymetry | float,
    folder: str | PathLike[str] | None = None,
    number: int | None = 1,
    scheduler: str | None = None,
    engine: Engine | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Losses:
    """Compute the losses around sites, as far as they are not on disk already.

    Parameters
    ----------
    sites : sequence of Site
    members : sequence of Member
        The waters.
    settings : LossSettings
    bathymetry : Bathymetry or float
        A grid, or the depth of a level seabed, m.
    folder : path-like, optional
        Where losses are kept; where not given, nowhere beyond this run.
    number : int, optional
        Worker processes; 1 for none beside this one, None for one on each processor.
    scheduler : str, optional
        Address of a dask scheduler instead; its workers must see the folder under the same name.
    engine : callable, optional
        Another function that takes the arguments of `loss` and returns a loss in dB, shape (ranges, depths); one that
        worker processes can import.
    progress : callable, optional
        Told (sections done, sections in all).

    Returns
    -------
    Losses

    Raises
    ------
    InputError
        A site on land or below the seabed, a grid that does not reach, water that ends above the seabed; the message
        names the site.
    OutputError
        If the folder can't be written.

    Notes
    -----
    A bearing ends at the shore: behind it no sound comes. Equal sections of one site are computed once.
    """
    if not sites or not members:
        raise InputError(f"losses: {len(sites)} sites and {len(members)} waters: one or more of each would be right")
    if scheduler is not None and folder is None:
        raise InputError("losses: a cluster needs a folder for losses that its workers see too")
    place = Path(tempfile.mkdtemp(prefix="ocean_sound-") if folder is None else folder).resolve()
    _make(place)
    try:
        files, computed, kept, notes = _gathered(sites, members, settings, bathymetry, place, engine, number, scheduler,
                                                 progress)  # fmt: skip
    except BaseException:
        if folder is None:
            shutil.rmtree(place, ignore_errors=True)
        raise
    losses = Losses(tuple(sites), tuple(members), settings, files, computed, kept, notes)
    if folder is None:
        weakref.finalize(losses, shutil.rmtree, place, ignore_errors=True)
    return losses


def _gathered(
    sites: Sequence[Site],
    members: Sequence[Member],
    settings: LossSettings,
    bathymetry: Bathymetry | float,
    place: Path,
    engine: Engine | None,
    number: int | None,
    scheduler: str | None,
    progress: Callable[[int, int], None] | None,
) -> tuple[dict[tuple[int, int], tuple[Path, ...]], int, int, tuple[str, ...]]:
    """The files of all sites in all waters, how many sections were computed and how many kept, and notes."""
    files: dict[tuple[int, int], tuple[Path, ...]] = {}
    missing: dict[Path, _Block] = {}
    known: set[Path] = set()
    total = kept = 0
    notes: list[str] = []
    for s, site in enumerate(sites):
        beds = _seabeds(site, settings, bathymetry)
        shallow = sum(_shallow_end(depths, settings.frequency) for _, depths in beds)
        if shallow:
            notes.append(
                f"site {site.name}: {shallow} of {len(beds)} bearings reach water less than "
                f"{_FEWEST_WAVELENGTHS:g} wavelengths deep, where beams may be off by several dB"
            )
        for m, member in enumerate(members):
            deepest = max(float(depths.max()) for _, depths in beds)
            profile, note = member.at(site, deepest)
            notes += note
            paths = []
            for block in _blocks(site, profile, beds, settings, place, engine):
                paths.append(block.path)
                if block.path in known:  # the same water and seabed as around another site
                    continue
                known.add(block.path)
                total += block.azimuths.size
                if block.path.is_file():
                    kept += block.azimuths.size
                else:
                    missing[block.path] = block
            files[m, s] = tuple(paths)
    done = kept
    for sections in _worked(list(missing.values()), number, scheduler):
        done += sections
        if progress is not None:
            progress(done, total)
    return files, total - kept, kept, tuple(dict.fromkeys(notes))


def _make(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise OutputError(f"{folder}: can't be made a folder for losses: {error.strerror or error}") from error


def _worked(blocks: list[_Block], number: int | None, scheduler: str | None) -> Iterator[int]:
    """Work blocks, and say after each how many sections it had."""
    count = usable_processors() if number is None else number
    if scheduler is None and (count == 1 or len(blocks) < 2):
        for block in blocks:
            yield _work(block)
        return
    with workers(min(count, len(blocks)), scheduler=scheduler) as (executor, there):
        for _, sections in in_order(_work, blocks, executor=executor, number=there):
            yield sections


@dataclass(frozen=True, eq=False)
class _Block:
    """Bearings of one site in one water."""

    name: str
    depth: float
    profile: Profile
    azimuths: Floats
    beds: tuple[tuple[Floats, Floats], ...]  # ranges and depths of the seabed
    settings: LossSettings
    path: Path
    key: str
    engine: Engine | None


def _blocks(
    site: Site,
    profile: Profile,
    beds: Sequence[tuple[Floats, Floats]],
    settings: LossSettings,
    folder: Path,
    engine: Engine | None,
) -> Iterator[_Block]:
    azimuths = settings.azimuths
    water = hashlib.sha256()
    for column in (profile.depth, profile.speed, [profile.latitude]):
        water.update(np.asarray(column, dtype=np.float64).tobytes())
    common = {
        "layout": _LAYOUT,
        "code": _code(),
        "engine": "" if engine is None else f"{engine.__module__}.{engine.__qualname__}",
        "depth": site.depth,
        "water": water.hexdigest(),
        **settings.stated(),
    }
    for start in range(0, azimuths.size, _BEARINGS_PER_FILE):
        part = slice(start, start + _BEARINGS_PER_FILE)
        seabed = hashlib.sha256()
        for ranges, depths in beds[part]:
            seabed.update(np.int64(ranges.size).tobytes() + ranges.tobytes() + depths.tobytes())
        stated = {**common, "seabed": seabed.hexdigest(), "bearings": azimuths[part].tolist()}
        key = hashlib.sha256(json.dumps(stated, sort_keys=True).encode()).hexdigest()
        path = folder / f"loss-{key[:40]}.nc"
        yield _Block(site.name, site.depth, profile, azimuths[part], tuple(beds[part]), settings, path, key, engine)


@cache
def _code() -> str:
    """A hash of the code that losses come from."""
    digest = hashlib.sha256(metadata.version("ocean_sound").encode())
    package = Path(__file__).parents[1]
    for name in _CODE:
        for path in sorted((package / name).glob("*.py")):
            digest.update(path.read_bytes())
    digest.update(Path(__file__).read_bytes())
    return digest.hexdigest()[:32]


def _seabeds(site: Site, settings: LossSettings, bathymetry: Bathymetry | float) -> list[tuple[Floats, Floats]]:
    """The seabed on each bearing, as ranges and depths up to the shore."""
    if isinstance(bathymetry, int | float):
        level = np.array([0.0, settings.max_range]), np.full(2, float(bathymetry))
        check_depth(site, float(bathymetry))
        return [level] * settings.bearings
    ranges, latitude, longitude = _lines(site, settings, bathymetry)
    try:
        depths = np.asarray(bathymetry.depth_at(latitude, longitude))
    except InputError as error:
        raise InputError(f"site {site.name}, {settings.max_range / 1000.0:g} km around it: {error}") from None
    check_depth(site, float(depths[0, 0]))
    found = []
    for bed in depths:
        dry = np.flatnonzero(~(bed >= _LEAST_DEPTH))
        wet = int(dry[0]) if dry.size else bed.size
        if wet == 1:  # the shore lies within the first step
            found.append((np.array([0.0, 1.0]), np.full(2, bed[0])))
        else:
            found.append((ranges[:wet], bed[:wet]))
    return found


def check_depth(site: Site, seabed: float) -> None:
    """Refuse a site on land or a sensor that is not above the seabed (m).

    Raises
    ------
    InputError
    """
    where = f"site {site.name} (latitude {site.latitude:g}, longitude {site.longitude:g})"
    if np.isnan(seabed):
        raise InputError(f"{where}: the bathymetry has no value there: another site or grid would be right")
    if seabed <= 0.0:
        raise InputError(f"{where}: is on land, {-seabed:g} m high: a place in the sea would be right")
    if site.depth >= seabed:
        raise InputError(
            f"{where}: the sensor at {site.depth:g} m is below the seabed at {seabed:.4g} m: a lesser depth is right"
        )


def _lines(site: Site, settings: LossSettings, bathymetry: Bathymetry) -> tuple[Floats, Floats, Floats]:
    """Ranges (n,), and latitudes and longitudes (bearings, n), of points along geodesics from a site."""
    from pyproj import Geod

    from ..section import Track
    from ..section.track import spacing_of

    geod = Geod(ellps="WGS84")
    lon, lat, _ = geod.fwd(site.longitude, site.latitude, 0.0, settings.max_range)
    north = Track.between((site.latitude, site.longitude), (float(lat), float(lon)))
    step = min(spacing_of(bathymetry.grid, north), settings.max_range)
    ranges = np.linspace(0.0, settings.max_range, int(np.ceil(settings.max_range / step)) + 1)
    shape = (settings.bearings, ranges.size)
    lon, lat, _ = geod.fwd(
        np.full(shape, site.longitude), np.full(shape, site.latitude),
        np.broadcast_to(settings.azimuths[:, None], shape), np.broadcast_to(ranges, shape),
    )  # fmt: skip
    return ranges, np.asarray(lat), np.asarray(lon)


def _work(block: _Block) -> int:
    """Compute the sections of a block and keep them; how many they are."""
    import xarray as xr

    settings = block.settings
    distances = settings.distances
    loss = np.empty((block.azimuths.size, distances.size, settings.depths.size), dtype=np.float32)
    reach = np.empty(block.azimuths.size)
    known: dict[bytes, Floats] = {}
    field = _water_of(block)
    for b, (ranges, depths) in enumerate(block.beds):
        reach[b] = ranges[-1]
        # without boundaries bearings differ only in how far they go, and in what of the grid lies below the seabed
        shape = ranges.tobytes() + (depths.tobytes() if settings.boundaries else b"")
        inside = distances <= ranges[-1] * (1.0 + 1e-12)
        if shape not in known:
            known[shape] = np.full(loss.shape[1:], MOST)
            if inside.any():
                try:
                    known[shape][inside] = _along(block, field, ranges, depths, distances[inside])
                except OceanSoundError as error:
                    raise type(error)(f"site {block.name}, bearing {block.azimuths[b]:g}: {error}") from None
        below = settings.depths > np.interp(distances, ranges, depths)[:, None]
        loss[b] = np.where(below & inside[:, None], np.nan, known[shape])
    dataset = xr.Dataset(
        {
            "transmission_loss": (("bearing", "range", "depth"), loss, attributes("transmission_loss")),
            "reach": (("bearing",), reach, {"long_name": "how far the sea goes on the bearing", "units": "m"}),
        },
        {
            "bearing": ("bearing", block.azimuths, attributes("bearing")),
            "range": ("range", distances, attributes("range")),
            "depth": ("depth", settings.depths, attributes("depth")),
            "source_depth": ((), block.depth, attributes("source_depth")),
        },
        {"title": "transmission loss around a sensor, kept for later", "key": block.key},
    )
    write_dataset(dataset, block.path, replace=True)
    return int(block.azimuths.size)


def _water_of(block: _Block) -> Section:
    """A section down to the deepest seabed of the block, whose water all its bearings share."""
    from ..section import Seabed, Section

    deepest = max(float(depths.max()) for _, depths in block.beds)
    return Section.from_profile(
        block.profile, seabed=Seabed.flat(deepest, kind=None), max_range=block.settings.max_range,
        extend_down=block.settings.extend_down, smooth=block.settings.smooth, tolerance=block.settings.tolerance,
    )  # fmt: skip


def _shallow_end(depths: Floats, frequency: float) -> bool:
    """Whether water along a bearing is too shallow for beams, but over less than half of it."""
    wavelengths = depths * (frequency / _SPEED)
    return bool(wavelengths.min() < _FEWEST_WAVELENGTHS <= np.median(wavelengths))


def _along(block: _Block, water: Section, ranges: Floats, depths: Floats, distances: Floats) -> Floats:
    """The loss along one bearing: (distances, depths)."""
    from ..section import Seabed, Section, Surface

    settings = block.settings
    seabed = (
        Seabed(ranges, depths, settings.kind) if settings.boundaries else Seabed.flat(water.seabed.deepest, kind=None)
    )
    surface = Surface(settings.wind_speed, reflects=settings.boundaries)
    section = Section(water.field, seabed, surface, max_range=float(distances[-1]), radius=water.radius)
    # modes know nothing of a surface that sends nothing back
    method = settings.method if settings.boundaries else "beams"
    found = (block.engine or _engine)(
        section, source_depth=block.depth, frequency=settings.frequency, ranges=distances, depths=settings.depths,
        method=method, phases=settings.phases, absorption=settings.absorption, beams=settings.beams,
        insist=settings.insist or _shallow_end(depths, settings.frequency), **settings.options,
    )  # fmt: skip
    found = np.array(found, dtype=np.float64)
    return np.where(np.isnan(found), MOST, np.clip(found, None, MOST))


def _engine(section: Section, *, frequency: float, phases: str, beams: int | None, **options: Any) -> Floats:
    """The loss of `rays`, by few wide beams where that serves."""
    from ..rays.gaussian_beams import natural_half_width
    from ..rays.loss import loss

    if beams is None and phases == "dropped":
        beams = _FEW_BEAMS
        options.setdefault("half_width", _WIDER * natural_half_width(section, frequency))
    found = loss(section, frequency=frequency, phases=phases, beams=beams, **options)
    return np.asarray(found["transmission_loss"].transpose("range", "depth").values, dtype=np.float64)


def _read(path: Path, name: str = "transmission_loss") -> Any:
    import netCDF4

    with HDF5_LOCK:
        try:
            with netCDF4.Dataset(str(path), "r") as dataset:
                variable = dataset.variables[name]
                variable.set_auto_mask(False)
                return np.asarray(variable[:])
        except (OSError, RuntimeError, KeyError) as error:
            raise InputError(f"{path}: kept losses can't be read ({error}): remove the file and run again") from error
