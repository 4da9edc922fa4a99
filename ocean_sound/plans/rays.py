"""The plan of `ocean-sound rays`: water, seabed, source, and what is asked of the rays between them."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Annotated, Any, Literal, TypeAlias

from pydantic import Field

from ..files.fields import Fields
from .shared import Depth, Sediment, kind_faults, place_faults, places_faults, read

if TYPE_CHECKING:
    from collections.abc import Iterator
    from os import PathLike

Numbers: TypeAlias = list[float]
Places: TypeAlias = list[list[float]]
Range: TypeAlias = Annotated[float, Field(gt=0, le=20_100_000)]


class Water(Fields):
    """Where the water comes from: one cast, casts along a track, or a grid of temperature and salinity along a line."""

    file: str | None = Field(default=None, min_length=1)
    files: list[str] | None = Field(default=None, min_length=1)
    grid: str | None = Field(default=None, min_length=1)
    # of casts
    cast: str | None = None
    casts: list[str] | None = Field(default=None, min_length=1)
    equation: str = "teos10"
    salinity: float | None = Field(default=None, ge=0, le=50)
    instrument: Literal["float", "ctd", "xbt"] | None = None
    columns: dict[str, str] = Field(default_factory=dict)
    # of a track or a line
    along: Places | None = Field(default=None, min_length=2)
    start: Numbers | None = Field(default=None, min_length=2, max_length=2)
    end: Numbers | None = Field(default=None, min_length=2, max_length=2)
    ranges: Numbers | None = Field(default=None, min_length=2)
    reach: float | None = Field(default=None, gt=0)
    apart: float | None = Field(default=None, ge=0)
    # of a grid
    temperature_kind: Literal["in-situ", "potential", "conservative"] | None = None
    salinity_kind: Literal["practical", "absolute"] | None = None
    salinity_file: str | None = Field(default=None, min_length=1)
    time: str | None = None
    spacing: float | None = Field(default=None, gt=0)
    # of the speed field
    smooth: float | None = Field(default=None, ge=0, le=1000)
    tolerance: float | None = Field(default=None, gt=0, le=10)
    extend_down: bool | None = None
    flatten: bool | None = None


class Source(Fields):
    """The source of sound."""

    depth: Depth


class Seabed(Fields):
    """The seabed; without a depth the deepest level is the bottom."""

    depth: float | None = Field(default=None, gt=0, le=12_000)
    points: Places | None = Field(default=None, min_length=2)
    bathymetry: str | None = Field(default=None, min_length=1)
    bathymetry_kind: Literal["height", "depth"] | None = None
    kind: str | None = Field(default=None, min_length=1)
    kinds: list[list[float | str]] | None = Field(default=None, min_length=1)
    sediment: Sediment | None = None


class Surface(Fields):
    """The sea surface."""

    wind_speed: float = Field(default=0.0, ge=0, le=100)


class Rays(Fields):
    """The fan of rays, and how far everything goes."""

    max_range: Range
    lowest_angle: float = Field(default=-20.0, ge=-90, le=90)
    highest_angle: float = Field(default=20.0, ge=-90, le=90)
    number: int = Field(default=41, ge=1, le=1_000_000)
    points: int = Field(default=0, ge=0, le=1_000_000)
    max_surface_bounces: int = Field(default=10_000, ge=0, le=10_000)
    max_seabed_bounces: int = Field(default=10_000, ge=0, le=10_000)


class Arrivals(Fields):
    """Receivers, and the rays that connect the source with each."""

    receiver_depths: list[Depth] = Field(min_length=1)
    receiver_ranges: list[Range] = Field(min_length=1)
    max_bounces: int = Field(default=4, ge=0, le=1000)
    lowest_angle: float = Field(default=-89.9, ge=-89.9, le=89.9)
    highest_angle: float = Field(default=89.9, ge=-89.9, le=89.9)
    frequency: float | None = Field(default=None, ge=1, le=1_000_000)


class Loss(Fields):
    """Transmission loss over a grid, or at ranges and depths of one's own."""

    frequency: float = Field(ge=1, le=1_000_000)
    depths: int = Field(default=101, ge=2, le=5000)
    ranges: int = Field(default=201, ge=2, le=20_000)
    at_depths: list[Depth] | None = Field(default=None, min_length=1)
    at_ranges: list[Range] | None = Field(default=None, min_length=1)
    method: Literal["auto", "beams", "modes"] = "auto"
    phases: Literal["kept", "surface", "dropped"] = "kept"
    absorption: float | None = Field(default=None, ge=0, le=10_000)
    beams: int | None = Field(default=None, ge=2, le=100_000)
    half_width: float | None = Field(default=None, gt=0)
    insist: bool = False

    def options(self) -> dict[str, Any]:
        """What `loss` is asked beside its grid."""
        plain = self.model_dump(include={"frequency", "method", "phases", "insist"})
        return plain | self.model_dump(include={"absorption", "beams", "half_width"}, exclude_none=True)


class Shadow(Fields):
    """Whether shadow zones are wanted, and on how fine a grid."""

    wanted: bool = False
    depths: int = Field(default=201, ge=2, le=5000)
    ranges: int = Field(default=501, ge=2, le=20_000)
    at_depths: list[Depth] = Field(default_factory=list)


class Ensemble(Fields):
    """Many waters or sources instead of one: mean and spread of loss, and the share of members in shadow."""

    files: list[str] | None = Field(default=None, min_length=2)
    source_depths: list[Depth] | None = Field(default=None, min_length=2)
    bearings: list[float] | None = Field(default=None, min_length=2)
    times: list[str] | None = Field(default=None, min_length=2)
    depths: int = Field(default=51, ge=2, le=5000)
    ranges: int = Field(default=101, ge=2, le=20_000)
    workers: int | None = Field(default=None, ge=0, le=100_000)
    scheduler: str | None = None


class RaysPlan(Fields):
    """What `ocean-sound rays` is to do."""

    title: str = ""
    water: Water
    source: Source
    rays: Rays
    seabed: Seabed = Seabed()
    surface: Surface | None = None
    arrivals: Arrivals | None = None
    loss: Loss | None = None
    shadow: Shadow = Shadow()
    ensemble: Ensemble | None = None

    @property
    def needs_section(self) -> bool:
        """Whether more is asked for than one profile over a flat seabed can say."""
        bed = self.seabed
        about_seabed = (bed.points, bed.bathymetry, bed.kind, bed.kinds, bed.sediment)
        asked = (self.water.files, self.water.grid, *about_seabed, self.surface, self.arrivals, self.loss,
                 self.water.smooth, self.water.tolerance, self.water.extend_down, self.water.flatten)  # fmt: skip
        return any(value is not None for value in asked)


def read_rays_plan(path: str | PathLike[str]) -> RaysPlan:
    r"""Read a plan for `ocean-sound rays`.

    Parameters
    ----------
    path : path-like
        A TOML file with the tables `water`, `source` and `rays`, and if wanted `seabed`, `surface`, `arrivals`, `loss`,
        `shadow` and `ensemble`.

    Returns
    -------
    RaysPlan
        The checked plan; file names in it stand as written, relative to the plan's own folder.

    Raises
    ------
    PlanError
        If the file can't be read, is not TOML, a field is missing, unknown or impossible, or two make no sense
        together.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     plan = Path(folder) / "plan.toml"
    ...     _ = plan.write_text('water.file = "cast.csv"\nsource.depth = 30.0\nrays.max_range = 5000.0\n')
    ...     read_rays_plan(plan).rays.number
    41
    """
    return read(RaysPlan, path, _faults)


def _faults(plan: RaysPlan) -> Iterator[str]:
    """What makes no sense together."""
    yield from _water_faults(plan.water)
    yield from _seabed_faults(plan)
    yield from _other_faults(plan)


# Which fields go with which source of the water.
_OF_CASTS = ("casts", "ranges", "reach", "apart")
_OF_GRID = ("temperature_kind", "salinity_kind", "salinity_file", "time", "spacing", "start", "end")


def _water_faults(water: Water) -> Iterator[str]:
    given = [name for name in ("file", "files", "grid") if getattr(water, name) is not None]
    if len(given) != 1:
        if given:
            yield f"'water.{given[1]}' stands beside 'water.{given[0]}': give one of them"
        else:
            yield "'water.file' is missing: give file (one cast), files (casts along a track) or grid"
        return
    source = given[0]
    allowed = {"file": ("cast",), "files": (*_OF_CASTS, "along"), "grid": (*_OF_GRID, "along")}
    words = {"file": "one cast", "files": "casts along a track", "grid": "a grid"}
    for name in ("cast", *_OF_CASTS, *_OF_GRID, "along"):
        if getattr(water, name) is not None and name not in allowed[source]:
            fits = " or ".join(kind for kind, names in allowed.items() if name in names)
            yield f"'water.{name}' makes no sense with {words[source]}: it goes with {fits}"
    if source == "grid":
        for name in ("salinity", "instrument"):
            if getattr(water, name) is not None:
                yield f"'water.{name}' makes no sense with a grid: it goes with file or files"
        if water.smooth is not None:
            yield "'water.smooth' makes no sense with a grid, which is smooth: it goes with file or files"
    yield from places_faults("water.along", water.along)
    yield from place_faults("water.start", water.start)
    yield from place_faults("water.end", water.end)


def _line_faults(plan: RaysPlan) -> Iterator[str]:
    """Whether a line through a grid is given, once."""
    water = plan.water
    if water.grid is None:
        return
    by_bearing = plan.ensemble is not None and plan.ensemble.bearings is not None
    if water.along is not None:
        if water.start is not None or water.end is not None:
            yield "'water.along' stands beside 'water.start' or 'water.end': give the one or the others"
        return
    for name in ("start",) if by_bearing else ("start", "end"):
        if getattr(water, name) is None:
            yield f"'water.{name}' is missing: a grid needs a line, by start and end or by along"


def _seabed_faults(plan: RaysPlan) -> Iterator[str]:
    bed = plan.seabed
    shapes = [name for name in ("depth", "points", "bathymetry") if getattr(bed, name) is not None]
    if len(shapes) > 1:
        yield f"'seabed.{shapes[1]}' stands beside 'seabed.{shapes[0]}': give one of depth, points, bathymetry"
    made = [name for name in ("kind", "kinds", "sediment") if getattr(bed, name) is not None]
    if len(made) > 1:
        yield f"'seabed.{made[1]}' stands beside 'seabed.{made[0]}': give one of kind, kinds, sediment"
    if made and not shapes:
        yield f"'seabed.{made[0]}' needs to know where the seabed is: give depth, points or bathymetry too"
    if bed.bathymetry_kind is not None and bed.bathymetry is None:
        yield "'seabed.bathymetry_kind' goes with bathymetry: give that too"
    water = plan.water
    if bed.bathymetry is not None and water.file is not None:
        yield "'seabed.bathymetry' makes no sense below one cast, which lies at no track: give depth or points"
    if bed.bathymetry is not None and water.ranges is not None and water.along is None:
        yield "'seabed.bathymetry' needs a track: give water.along, or casts with positions instead of water.ranges"
    for point in bed.points or []:
        if len(point) != 2 or not (point[0] >= 0 and 0 < point[1] <= 12_000):
            yield f"'seabed.points' has {point}: give range and depth in m, as [5000.0, 120.0]"
    yield from _kinds_faults(bed)


def _kinds_faults(bed: Seabed) -> Iterator[str]:
    """Of what the seabed is made of."""
    if bed.kind is not None:
        yield from kind_faults("seabed.kind", bed.kind)
    for entry in bed.kinds or []:
        if len(entry) != 2 or isinstance(entry[0], str) or not isinstance(entry[1], str):
            yield f"'seabed.kinds' has {entry}: give a range in m and a kind, as [5000.0, \"silt\"]"
        if len(entry) == 2:
            yield from kind_faults("seabed.kinds", str(entry[1]))


def _other_faults(plan: RaysPlan) -> Iterator[str]:
    yield from _line_faults(plan)
    rays, arrivals, loss = plan.rays, plan.arrivals, plan.loss
    for name, fan in (("rays", rays), ("arrivals", arrivals)):
        if fan is not None and fan.lowest_angle > fan.highest_angle:
            yield f"'{name}.lowest_angle' is {fan.lowest_angle:g}, above '{name}.highest_angle', {fan.highest_angle:g}"
    if arrivals is not None:
        if len(arrivals.receiver_depths) != len(arrivals.receiver_ranges) and 1 not in {
            len(arrivals.receiver_depths),
            len(arrivals.receiver_ranges),
        }:
            yield (
                f"'arrivals.receiver_depths' has {len(arrivals.receiver_depths)} numbers and 'receiver_ranges' "
                f"{len(arrivals.receiver_ranges)}: give as many of each, or one of either for all"
            )
        yield from _beyond("arrivals.receiver_ranges", arrivals.receiver_ranges, rays.max_range)
    if loss is not None:
        yield from _beyond("loss.at_ranges", loss.at_ranges or [], rays.max_range)
        for name in ("at_depths", "at_ranges"):
            values = getattr(loss, name)
            if values is not None and any(b <= a for a, b in pairwise(values)):
                yield f"'loss.{name}' is {values}: give numbers of metres that increase"
    if plan.shadow.at_depths and not plan.shadow.wanted:
        yield "'shadow.at_depths' goes with wanted = true: give that too"
    yield from _ensemble_faults(plan)


def _beyond(name: str, values: list[float], max_range: float) -> Iterator[str]:
    far = [value for value in values if value > max_range]
    if far:
        yield f"'{name}' has {far[0]:g}, beyond 'rays.max_range': give at most {max_range:g} m"


def _ensemble_faults(plan: RaysPlan) -> Iterator[str]:
    many, water = plan.ensemble, plan.water
    if many is None:
        return
    given = [name for name in ("files", "source_depths", "bearings", "times") if getattr(many, name) is not None]
    if len(given) != 1:
        found = " and ".join(given) or "none"
        yield f"'ensemble' has {found}: give one of files, source_depths, bearings, times"
        return
    if given[0] == "files" and water.file is None:
        yield "'ensemble.files' takes the place of one cast after the other: it goes with water.file"
    if given[0] in {"bearings", "times"} and water.grid is None:
        yield f"'ensemble.{given[0]}' needs water at more than one place or time: it goes with water.grid"
    if given[0] == "bearings" and (water.end is not None or water.along is not None):
        name = "end" if water.end is not None else "along"
        yield f"'water.{name}' stands beside 'ensemble.bearings', which say where the lines go: leave it out"
    if given[0] == "times" and water.time is not None:
        yield "'water.time' stands beside 'ensemble.times': leave it out"
    if many.workers is not None and many.scheduler is not None:
        yield "'ensemble.workers' stands beside 'ensemble.scheduler', which has its own: give one of them"
    if plan.loss is None and not plan.shadow.wanted:
        yield "'ensemble' has nothing to find: give [loss], or shadow.wanted = true"
