"""The plan of `ocean-sound sensors`: where sensors may go, and what they are to hear."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING, Annotated, Literal, TypeAlias

from pydantic import Field

from ..files.fields import Fields
from .shared import Depth, Sediment, either, kind_faults, places_faults, read

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence
    from os import PathLike

Place: TypeAlias = Annotated[list[float], Field(min_length=2, max_length=2)]
Share: TypeAlias = Annotated[float, Field(ge=0)]
Latitude: TypeAlias = Annotated[float, Field(ge=-90, le=90)]
Longitude: TypeAlias = Annotated[float, Field(ge=-180, le=360)]
Decibels: TypeAlias = Annotated[float, Field(ge=-300, le=300)]


class SensorsWater(Fields):
    """The waters that may be met: casts, or a grid at one time or several."""

    files: list[str] | None = Field(default=None, min_length=1)
    grid: str | None = Field(default=None, min_length=1)
    # of casts
    casts: list[str] | None = Field(default=None, min_length=1)
    members: Literal["place", "cast", "season", "month"] = "place"
    equation: str = "teos10"
    salinity: float | None = Field(default=None, ge=0, le=50)
    instrument: Literal["float", "ctd", "xbt"] | None = None
    columns: dict[str, str] = Field(default_factory=dict)
    # of a grid
    times: list[str] | None = Field(default=None, min_length=1)
    temperature_kind: Literal["in-situ", "potential", "conservative"] | None = None
    salinity_kind: Literal["practical", "absolute"] | None = None
    salinity_file: str | None = Field(default=None, min_length=1)
    # of the speed field
    smooth: float = Field(default=10.0, ge=0, le=1000)
    extend_down: bool | None = None


class SensorsSeabed(Fields):
    """The seabed: a grid of depths, or a level one."""

    bathymetry: str | None = Field(default=None, min_length=1)
    bathymetry_kind: Literal["height", "depth"] | None = None
    variable: str | None = None
    depth: float | None = Field(default=None, gt=0, le=12_000)
    kind: str = "sand"
    sediment: Sediment | None = None


class SensorsArea(Fields):
    """Where something is to be heard: a box or a polygon."""

    south: Latitude | None = None
    north: Latitude | None = None
    west: Longitude | None = None
    east: Longitude | None = None
    corners: list[Place] | None = Field(default=None, min_length=3)
    spacing: float = Field(gt=0)


class Code(Fields):
    """A code of several pulses, all of which must be heard."""

    pulses: int = Field(ge=1, le=1000)
    pulse_correlation: float = Field(default=0.0, ge=0, le=1)
    duration: float | None = Field(default=None, gt=0)
    interval: float | None = Field(default=None, gt=0)
    transmitters: int = Field(default=1, ge=1, le=100_000)


class SensorsTarget(Fields):
    """What is to be heard."""

    source_level: Decibels
    frequency: float | None = Field(default=None, ge=1, le=1_000_000)
    band: list[float] | None = Field(default=None, min_length=2, max_length=2)
    absorption: float | None = Field(default=None, ge=0, le=10_000)
    depths: list[Depth] = Field(min_length=1)
    depth_shares: list[Share] | None = None
    calls: int = Field(default=1, ge=1, le=1_000_000)
    code: Code | None = None

    @property
    def edges(self) -> tuple[float, float]:
        """Of the band, Hz; one frequency has none between."""
        if self.band is not None:
            return self.band[0], self.band[1]
        return self.frequency or 1.0, self.frequency or 1.0

    @property
    def middle(self) -> float:
        """The frequency for which losses are computed, Hz: the geometric mean of a band."""
        low, high = self.edges
        return float((low * high) ** 0.5)


class SensorsReceiver(Fields):
    """What hears, and at which depths it may hang."""

    detection_threshold: Decibels | None = None
    bandwidth: float | None = Field(default=None, gt=0)
    integration_time: float | None = Field(default=None, gt=0)
    directivity: Decibels = 0.0
    self_noise: Decibels | None = None
    depths: list[Depth] | None = Field(default=None, min_length=1)
    above_seabed: list[float] | None = Field(default=None, min_length=1)
    knock_down: float = Field(default=0.0, ge=0, le=12_000)
    knock_down_share: float = Field(default=0.0, ge=0, le=1)
    fluctuation: float = Field(default=6.0, ge=0, le=60)
    correlation: float = Field(default=0.0, ge=0, le=1)


class SensorsNoise(Fields):
    """Noise of the sea: winds and shipping, or a measured spectrum."""

    wind_speeds: list[Annotated[float, Field(ge=0, le=50)]] = Field(default=[5.0], min_length=1)
    wind_shares: list[Share] | None = None
    shipping: float = Field(default=0.5, ge=0, le=1)
    frequencies: list[float] | None = Field(default=None, min_length=2)
    levels: list[float] | None = Field(default=None, min_length=2)


class SensorsSites(Fields):
    """Where a sensor may go: places, or a grid over the area between two depths of the seabed."""

    places: list[Place] | None = Field(default=None, min_length=1)
    names: list[str] | None = None
    costs: list[Annotated[float, Field(gt=0)]] | None = None
    spacing: float | None = Field(default=None, gt=0)
    shallowest: float = Field(default=0.0, ge=0, le=12_000)
    deepest: float = Field(default=12_000.0, gt=0, le=12_000)


class SensorsChoice(Fields):
    """How many, and what they must do."""

    number: int = Field(ge=1, le=1000)
    probability: float = Field(default=0.5, gt=0, lt=1)
    at_once: int = Field(default=1, ge=1, le=4)
    budget: float | None = Field(default=None, gt=0)
    spacing: float = Field(default=0.0, ge=0)
    must_cover: list[Place] = Field(default_factory=list)
    method: Literal["auto", "exact", "greedy"] = "auto"
    time_limit: float = Field(default=60.0, gt=0)


class Existing(Fields):
    """Sensors that are there and stay."""

    places: list[Place] = Field(min_length=1)
    depths: list[Depth] = Field(min_length=1)
    names: list[str] | None = None


class SensorsRun(Fields):
    """How losses are computed and where they are kept."""

    max_range: float = Field(gt=0, le=500_000)
    bearings: int = Field(default=36, ge=1, le=3600)
    ranges: int = Field(default=200, ge=2, le=20_000)
    depths: int = Field(default=50, ge=1, le=5000)
    method: Literal["auto", "beams", "modes"] = "auto"
    phases: Literal["kept", "surface", "dropped"] = "dropped"
    beams: int | None = Field(default=None, ge=2, le=100_000)
    insist: bool = False
    why_deaf: bool = True
    folder: str | None = Field(default=None, min_length=1)
    workers: int | None = Field(default=None, ge=1, le=100_000)
    scheduler: str | None = Field(default=None, min_length=1)


class SensorsPlan(Fields):
    """What `ocean-sound sensors` is to do."""

    title: str = ""
    credits: list[Annotated[str, Field(min_length=1)]] = Field(default_factory=list)
    water: SensorsWater
    seabed: SensorsSeabed
    area: SensorsArea
    target: SensorsTarget
    receiver: SensorsReceiver
    noise: SensorsNoise = SensorsNoise()
    sites: SensorsSites | None = None
    choice: SensorsChoice | None = None
    existing: Existing | None = None
    run: SensorsRun


def read_sensors_plan(path: str | PathLike[str]) -> SensorsPlan:
    """Read a plan for `ocean-sound sensors`.

    Parameters
    ----------
    path : path-like
        A TOML file with the tables `water`, `seabed`, `area`, `target`, `receiver`, `run`, `sites` or `existing`, and
        if wanted `noise` and `choice`; above them, if wanted, `title` and `credits`, a list of where the data come
        from, which results and pages repeat.

    Returns
    -------
    SensorsPlan
        The checked plan; file names in it stand as written, relative to the plan's own folder.

    Raises
    ------
    PlanError
        If the file can't be read, is not TOML, a field is missing, unknown or impossible, or two make no sense
        together; one line for each.
    """
    return read(SensorsPlan, path, _faults)


def _faults(plan: SensorsPlan) -> Iterator[str]:
    """What makes no sense together."""
    yield from _water_faults(plan.water)
    yield from _seabed_faults(plan.seabed)
    yield from _area_faults(plan.area)
    yield from _target_faults(plan.target)
    yield from _receiver_faults(plan.receiver)
    yield from _noise_faults(plan)
    yield from _sites_faults(plan)


def _as_many(name: str, values: Sequence[object] | None, count: int, what: str) -> Iterator[str]:
    if values is not None and len(values) != count:
        yield f"'{name}' has {len(values)} entries for {count} {what}: give one for each"


def _shares(name: str, values: Sequence[float] | None, count: int, what: str) -> Iterator[str]:
    yield from _as_many(name, values, count, what)
    if values is not None and not sum(values) > 0.0:
        yield f"'{name}' are all 0: give at least one above 0"


def _increasing(name: str, values: Sequence[float]) -> Iterator[str]:
    for at, (before, value) in enumerate(pairwise(values), start=1):
        if value <= before:
            yield f"'{name}[{at}]' is {value:g}, not beyond the one before it ({before:g}): give them increasing"
            return


def _water_faults(water: SensorsWater) -> Iterator[str]:
    yield from either("water", water, "files", "grid", "files (casts) or grid (a climatology)")
    if water.files is not None:
        for name in ("times", "temperature_kind", "salinity_kind", "salinity_file"):
            if getattr(water, name) is not None:
                yield f"'water.{name}' makes no sense with casts: it goes with grid"
    elif water.grid is not None:
        for name in ("casts", "salinity", "instrument"):
            if getattr(water, name) is not None:
                yield f"'water.{name}' makes no sense with a grid: it goes with files"
        if water.members != "place":
            yield f"'water.members' is {water.members!r}: a grid has a member for each of its times"


def _seabed_faults(seabed: SensorsSeabed) -> Iterator[str]:
    yield from either("seabed", seabed, "bathymetry", "depth", "bathymetry (a grid) or depth (a level seabed, m)")
    if seabed.sediment is None:
        yield from kind_faults("seabed.kind", seabed.kind)


def _area_faults(area: SensorsArea) -> Iterator[str]:
    sides = {name: getattr(area, name) for name in ("south", "north", "west", "east")}
    given = [name for name, value in sides.items() if value is not None]
    if area.corners is not None:
        yield from places_faults("area.corners", area.corners)
        if given:
            yield f"'area.{given[0]}' stands beside 'area.corners': give a box or a polygon"
        return
    for name, value in sides.items():
        if value is None:
            yield f"'area.{name}' is missing: give south, north, west and east, or corners"
    if area.south is not None and area.north is not None and area.south >= area.north:
        yield f"'area.south' is {area.south:g}, not below 'area.north' ({area.north:g}): give a south below the north"


def _target_faults(target: SensorsTarget) -> Iterator[str]:
    yield from either("target", target, "frequency", "band", "frequency or band, Hz")
    if target.band is not None:
        low, high = target.band
        if low >= high:
            yield f"'target.band' is {target.band}, upside down: give the lower edge first, as [{high:g}, {low:g}]"
        elif not (low >= 1.0 and high <= 1e6):
            yield f"'target.band' is {target.band}: give two frequencies from 1 to 1e6 Hz"
    yield from _increasing("target.depths", target.depths)
    yield from _shares("target.depth_shares", target.depth_shares, len(target.depths), "depths")
    if target.code is not None and target.code.transmitters > 1:
        yield from _collision_faults(target.code)


def _collision_faults(code: Code) -> Iterator[str]:
    for name in ("duration", "interval"):
        if getattr(code, name) is None:
            yield f"'target.code.{name}' is missing: several transmitters collide; give it in seconds"
    if code.duration is not None and code.interval is not None and code.interval < 2.0 * code.duration:
        twice = 2.0 * code.duration
        yield f"'target.code.interval' is {code.interval:g}: give twice the duration, {twice:g} s, or more"


def _receiver_faults(receiver: SensorsReceiver) -> Iterator[str]:
    if receiver.detection_threshold is None:
        yield "'receiver.detection_threshold' is missing: give the ratio of signal to noise at 50 % detection, dB"
    if receiver.bandwidth is None:
        yield "'receiver.bandwidth' is missing: a threshold means nothing without its bandwidth; give it in Hz"
    if receiver.depths is not None and receiver.above_seabed is not None:
        yield "'receiver.above_seabed' stands beside 'receiver.depths': give one of them"
    if receiver.above_seabed is not None and min(receiver.above_seabed) <= 0.0:
        yield f"'receiver.above_seabed' has {min(receiver.above_seabed):g}: give heights above 0 m"
    if receiver.knock_down > 0.0 and receiver.knock_down_share == 0.0:
        yield "'receiver.knock_down_share' is missing: give the share of the time that moorings are pushed down"


def _noise_faults(plan: SensorsPlan) -> Iterator[str]:
    noise = plan.noise
    yield from _shares("noise.wind_shares", noise.wind_shares, len(noise.wind_speeds), "wind speeds")
    if noise.frequencies is None or noise.levels is None:
        if noise.frequencies is not None or noise.levels is not None:
            missing = "frequencies" if noise.frequencies is None else "levels"
            yield f"'noise.{missing}' is missing: a measured spectrum has frequencies (Hz) and levels (dB re 1 uPa2/Hz)"
        return
    yield from _as_many("noise.levels", noise.levels, len(noise.frequencies), "frequencies")
    yield from _increasing("noise.frequencies", noise.frequencies)
    (first, *_, last), (low, high) = noise.frequencies, plan.target.edges
    if not first <= low <= high <= last:
        yield f"'noise.frequencies' reach from {first:g} to {last:g} Hz: the target needs {low:g} to {high:g}"


def _sites_faults(plan: SensorsPlan) -> Iterator[str]:
    sites, existing, choice = plan.sites, plan.existing, plan.choice
    if sites is None and existing is None:
        yield "'sites' is missing: give a table [sites] with places or spacing, or [existing]"
    if sites is not None:
        yield from _candidate_faults(sites, plan.receiver)
    if existing is not None:
        yield from places_faults("existing.places", existing.places)
        for name in ("depths", "names"):
            yield from _as_many(f"existing.{name}", getattr(existing, name), len(existing.places), "places")
    if choice is not None:
        yield from places_faults("choice.must_cover", choice.must_cover)
        if choice.method == "exact" and choice.at_once > 1:
            yield "'choice.method' is 'exact', which is for one sensor at once: give 'greedy' or 'auto'"


def _candidate_faults(sites: SensorsSites, receiver: SensorsReceiver) -> Iterator[str]:
    yield from either("sites", sites, "places", "spacing", "places, or the spacing of a grid of sites, m")
    if sites.shallowest >= sites.deepest:
        yield f"'sites.shallowest' is {sites.shallowest:g}: give less than 'sites.deepest' ({sites.deepest:g})"
    yield from places_faults("sites.places", sites.places)
    for name in ("names", "costs"):
        values = getattr(sites, name)
        if values is not None and sites.places is None:
            yield f"'sites.{name}' makes no sense with a grid of sites: it goes with places"
        elif sites.places is not None:
            yield from _as_many(f"sites.{name}", values, len(sites.places), "places")
    if receiver.depths is None and receiver.above_seabed is None:
        yield "'receiver.depths' is missing: give depths, or heights above_seabed, at which a sensor may hang, m"
