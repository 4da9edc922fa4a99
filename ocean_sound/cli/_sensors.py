"""What a plan of `ocean-sound sensors` asks for, as the library takes it; what speaks against it is told by field."""

from __future__ import annotations

from contextlib import contextmanager
from math import isnan
from typing import TYPE_CHECKING, Any

from ..errors import InputError, PlanError
from . import _shared as shared

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from ..casts import Cast
    from ..grids import Bathymetry
    from ..plans import SensorsPlan
    from ..plans.sensors import SensorsSites
    from ..profile import Profile
    from ..sensors.area import Area
    from ..sensors.coverage import Hearing
    from ..sensors.losses import LossSettings
    from ..sensors.planning import Task
    from ..sensors.sites import Site
    from ..sensors.waters import Member


def task_of(plan: SensorsPlan, path: Path) -> tuple[Task, list[str]]:
    """The task of a plan, and notes on what was left out or lent.

    Raises
    ------
    PlanError
        If a site, place or water can't be what the plan says; one line for each field.
    """
    from ..sensors.area import Area
    from ..sensors.planning import Knockdown, Task, Wanted

    bathymetry = _bathymetry(plan, path)
    target = plan.target
    about: dict[str, Any] = {
        "spacing": plan.area.spacing, "depths": target.depths, "shares": target.depth_shares, "bathymetry": bathymetry,
    }  # fmt: skip
    with _field(path, "area"):
        if plan.area.corners is not None:
            area = Area.polygon([(lat, lon) for lat, lon in plan.area.corners], **about)
        else:
            sides = {name: getattr(plan.area, name) for name in ("south", "north", "west", "east")}
            area = Area.box(**sides, **about)
    candidates = _candidates(plan, path, area, bathymetry)
    existing = _existing(plan, path, bathymetry)
    sites = [*candidates, *existing]
    members, absorption, notes = _waters(plan, path, sites, sum(site.depth for site in sites) / len(sites))
    wanted = None
    if plan.choice is not None:
        asked = plan.choice
        for at, place in enumerate(asked.must_cover):
            with _field(path, f"choice.must_cover[{at}]"):
                area.cells_at(place[0], place[1])
        wanted = Wanted(
            number=asked.number, level=asked.probability, at_once=asked.at_once, budget=asked.budget,
            spacing=asked.spacing, method=asked.method, time_limit=asked.time_limit,
            must_cover=[(lat, lon) for lat, lon in asked.must_cover],
        )  # fmt: skip
    with _field(path, "target"):
        hearing = _hearing(plan)
    settings = _settings(plan, absorption)
    task = Task(
        area=area, members=members, bathymetry=bathymetry, hearing=hearing, settings=settings, candidates=candidates,
        existing=existing, wanted=wanted, knockdown=Knockdown(plan.receiver.knock_down, plan.receiver.knock_down_share),
        why=plan.run.why_deaf,
    )  # fmt: skip
    return task, notes


def inputs_of(plan: SensorsPlan, path: Path) -> list[Path]:
    """The plan and the files that it names."""
    water = plan.water
    named = [*(water.files or []), water.grid, water.salinity_file, plan.seabed.bathymetry]
    return [path, *dict.fromkeys(path.parent / name for name in named if name is not None)]


@contextmanager
def _field(path: Path, name: str) -> Iterator[None]:
    """What is wrong is said of a field of the plan."""
    try:
        yield
    except InputError as error:
        raise PlanError(f"{path}: field '{name}': {error}") from None


def _bathymetry(plan: SensorsPlan, path: Path) -> Bathymetry | float:
    from ..grids import open_bathymetry

    seabed = plan.seabed
    if seabed.bathymetry is None:
        return float(seabed.depth or 0.0)
    with _field(path, "seabed.bathymetry"):
        return open_bathymetry(path.parent / seabed.bathymetry, kind=seabed.bathymetry_kind, variable=seabed.variable)


def _depth_at(bathymetry: Bathymetry | float, latitude: float, longitude: float) -> float:
    if isinstance(bathymetry, float):
        return bathymetry
    return float(bathymetry.depth_at(latitude, longitude))


def _candidates(plan: SensorsPlan, path: Path, area: Area, bathymetry: Bathymetry | float) -> list[Site]:
    """A site for each place and depth; of a grid those in water, of listed places all, or what speaks against them."""
    from ..sensors.sites import Site

    asked = plan.sites
    if asked is None:
        return []
    listed = asked.places is not None
    places = _places(asked, area)
    found, faults = [], []
    for at, (latitude, longitude) in enumerate(places):
        field = f"sites.places[{at}]" if listed else "sites.spacing"
        with _field(path, field):
            seabed = _depth_at(bathymetry, latitude, longitude)
        if not listed and not max(asked.shallowest, 1e-9) <= seabed <= asked.deepest:
            continue
        name = asked.names[at] if asked.names is not None else f"S{at + 1}"
        cost = asked.costs[at] if asked.costs is not None else 1.0
        depths = _hanging(plan, seabed)
        for depth in depths:
            label = f"{name}, {depth:g} m" if len(depths) > 1 else name
            fault = _against(seabed, depth, plan.receiver.knock_down)
            if fault is None and not asked.shallowest <= seabed <= asked.deepest:
                fault = f"lies over {seabed:.4g} m of water: {asked.shallowest:g} to {asked.deepest:g} m is asked for"
            if fault is None:
                found.append(Site(label, latitude, longitude, depth, cost))
            elif listed:
                faults.append(f"{path}: field '{field}' ({latitude:g}, {longitude:g}): {fault}")
    if faults:
        raise PlanError("\n".join(dict.fromkeys(faults)))
    if not found:
        raise PlanError(
            f"{path}: field 'sites.spacing' is {asked.spacing}: no site of the grid lies in the area over "
            f"{asked.shallowest:g} to {asked.deepest:g} m of water with a sensor above the seabed; a finer grid or "
            "other depths would be right"
        )
    return found


def _places(asked: SensorsSites, area: Area) -> list[tuple[float, float]]:
    if asked.places is not None:
        return [(lat, lon) for lat, lon in asked.places]
    from ..sensors.area import places_in

    return places_in(area, float(asked.spacing or 0.0))


def _hanging(plan: SensorsPlan, seabed: float) -> list[float]:
    """Depths at which a sensor may hang over a seabed, m."""
    receiver = plan.receiver
    if receiver.above_seabed is not None:
        return [seabed - height for height in receiver.above_seabed]
    return list(receiver.depths or [])


def _against(seabed: float, depth: float, knock_down: float) -> str | None:
    """What speaks against a sensor at a depth over a seabed, m."""
    if isnan(seabed):
        return "the bathymetry has no value there: another place is right"
    if seabed <= 0.0:
        return f"is on land, {-seabed:g} m high: a place in the sea is right"
    if depth < 0.0:
        return f"a sensor {seabed - depth:g} m above the seabed at {seabed:.4g} m is out of the water: less is right"
    if depth >= seabed:
        return f"a sensor at {depth:g} m is below the seabed at {seabed:.4g} m: a lesser depth is right"
    if depth + knock_down >= seabed:
        return (
            f"a sensor at {depth:g} m, pushed down by {knock_down:g} m, is below the seabed at {seabed:.4g} m: less is "
            "right"
        )
    return None


def _existing(plan: SensorsPlan, path: Path, bathymetry: Bathymetry | float) -> list[Site]:
    from ..sensors.sites import Site

    there = plan.existing
    if there is None:
        return []
    found, faults = [], []
    for at, ((latitude, longitude), depth) in enumerate(zip(there.places, there.depths, strict=True)):
        with _field(path, f"existing.places[{at}]"):
            seabed = _depth_at(bathymetry, latitude, longitude)
        fault = _against(seabed, depth, plan.receiver.knock_down)
        if fault is not None:
            faults.append(f"{path}: field 'existing.places[{at}]' ({latitude:g}, {longitude:g}): {fault}")
        name = there.names[at] if there.names is not None else f"existing {at + 1}"
        found.append(Site(name, latitude, longitude, depth))
    if faults:
        raise PlanError("\n".join(faults))
    return found


def _waters(
    plan: SensorsPlan, path: Path, sites: list[Site], depth: float
) -> tuple[tuple[Member, ...], float, list[str]]:
    """The waters of a plan, the absorption at a depth (m) in them (dB/km), and notes."""
    from ..sensors import waters

    water = plan.water
    notes: list[str] = []
    if water.grid is not None:
        from ..grids import open_climatology

        with _field(path, "water.grid"):
            grid = open_climatology(
                path.parent / water.grid, temperature=water.temperature_kind, salinity=water.salinity_kind,
                salinity_path=None if water.salinity_file is None else path.parent / water.salinity_file,
            )  # fmt: skip
            places = list(dict.fromkeys((site.latitude, site.longitude) for site in sites))
            members, levels = waters.members_of_grid(
                grid, places, times=water.times, depth=depth, equation=water.equation
            )
    else:
        with _field(path, "water.files"):
            casts, notes = waters.deepened(_casts(plan, path))
            profiles = [_profile(cast, plan) for cast in casts]
        levels = waters.levels_of_casts(casts, depth)
        with _field(path, "water.members"):
            members = waters.members_of(profiles, water.members)
    if plan.target.absorption is not None:
        return members, plan.target.absorption, notes
    found, note = waters.mean_absorption(plan.target.middle, levels, depth)
    return members, found, [*notes, note]


def _casts(plan: SensorsPlan, path: Path) -> list[Cast]:
    water = plan.water
    mapping = [f"{name}={column}" for name, column in water.columns.items()]
    casts: list[Cast] = []
    for name in water.files or []:
        casts += shared.read_all(path.parent / name, mapping)
    if water.casts is None:
        return casts
    known = {cast.id: cast for cast in casts}
    for name in water.casts:
        if name not in known:
            some = ", ".join(list(known)[:5]) + (", ..." if len(known) > 5 else "")
            raise PlanError(f"{path}: field 'water.casts' names {name!r}: the files hold {some}")
    return [known[name] for name in water.casts]


def _profile(cast: Cast, plan: SensorsPlan) -> Profile:
    from ..profile import Profile

    water = plan.water
    return Profile.from_cast(cast, equation=water.equation, salinity=water.salinity, accuracy=water.instrument)


def _hearing(plan: SensorsPlan) -> Hearing:
    from ..sensors.coverage import Hearing, Noise, Target
    from ..sensors.hearing import Receiver
    from ..sensors.noise import NoiseSpectrum

    target, receiver, noise = plan.target, plan.receiver, plan.noise
    spectrum = None
    if noise.frequencies is not None and noise.levels is not None:
        spectrum = NoiseSpectrum(noise.frequencies, noise.levels)  # type: ignore[arg-type]
    low, high = target.edges
    code = {} if target.code is None else target.code.model_dump()
    return Hearing(
        target=Target(target.source_level, calls=target.calls, **code),
        receiver=Receiver(
            receiver.detection_threshold or 0.0, receiver.bandwidth or 1.0, receiver.integration_time,
            receiver.directivity, receiver.self_noise,
        ),
        noise=Noise.of(
            low, high, wind_speeds=noise.wind_speeds, shares=noise.wind_shares, shipping=noise.shipping,
            spectrum=spectrum,
        ),
        fluctuation=receiver.fluctuation,
        correlation=receiver.correlation,
    )  # fmt: skip


def _settings(plan: SensorsPlan, absorption: float) -> LossSettings:
    from ..sensors.losses import LossSettings, depth_grid

    run, seabed, noise = plan.run, plan.seabed, plan.noise
    shares = noise.wind_shares or [1.0] * len(noise.wind_speeds)
    wind = sum(s * w for s, w in zip(shares, noise.wind_speeds, strict=True)) / sum(shares)
    kind: Any = None if seabed.kind == _absorbs() else seabed.kind
    if seabed.sediment is not None:
        from ..section import Sediment

        kind = Sediment(**seabed.sediment.model_dump())
    return LossSettings(
        frequency=plan.target.middle, max_range=run.max_range, depths=depth_grid(plan.target.depths, run.depths),
        bearings=run.bearings, ranges=run.ranges, absorption=absorption, wind_speed=wind, kind=kind,
        method=run.method, phases=run.phases, beams=run.beams, insist=run.insist,
        extend_down=plan.water.extend_down, smooth=plan.water.smooth,
    )  # fmt: skip


def _absorbs() -> str:
    from ..plans import ABSORBS

    return ABSORBS
