"""What `ocean-sound rays` does, whether a plan says it or the options: all results, written, drawn and told."""

from __future__ import annotations

from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ..errors import InputError, PlanError
from . import _shared as shared

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    import xarray
    from matplotlib.figure import Figure

    from ..plans import RaysPlan
    from ..profile import Profile
    from ..rays import Arrivals, Fan, Shadow
    from ..section import Section
    from ._progress import Told

    Water = Profile | Section

# More rays or arrivals than this are not listed one by one for a person.
LISTED = 45


@dataclass(frozen=True)
class Asked:
    """What to do."""

    title: str
    water: Water
    source: dict[str, Any]
    angles: Any
    bounces: dict[str, int]
    points: int
    grid: tuple[int, int] | None
    at_depths: tuple[float, ...] = ()
    arrivals: dict[str, Any] | None = None
    loss: dict[str, Any] | None = None
    ensemble: dict[str, Any] | None = None

    def further(self) -> list[str]:
        """The results, beside rays and shadow, that there will be."""
        named = {"arrivals": self.arrivals, "loss": self.loss, "ensemble": self.ensemble}
        return [name for name, wanted in named.items() if wanted is not None]


@dataclass(frozen=True)
class Found:
    """What came out."""

    asked: Asked
    fan: Fan
    shadow: Shadow | None = None
    arrivals: Arrivals | None = None
    loss: xarray.Dataset | None = None
    ensemble: xarray.Dataset | None = None

    def notes(self) -> list[str]:
        """What was assumed on the way."""
        from ..profile import Profile

        notes = list(self.asked.water.notes)
        if isinstance(self.asked.water, Profile) and self.asked.source["seabed_depth"] is None:
            bottom = self.fan.seabed_depth
            notes.append(f"no seabed depth is given: the deepest level of the profile, {bottom:g} m, is the bottom")
        unsettled = getattr(self.shadow, "unsettled", 0)
        if unsettled:
            notes.append(f"shadow: between {unsettled} pairs of rays more were needed than are traced at most")
        if self.loss is not None and self.loss.attrs.get("notes"):
            notes += [f"loss: {line}" for line in str(self.loss.attrs["notes"]).splitlines()]
        if self.arrivals is not None and self.arrivals.unresolved:
            notes.append(f"arrivals: {self.arrivals.unresolved} narrow ranges of launch angle were given up")
        return notes


def from_plan(path: Path) -> Asked:
    """A plan, read, with its water."""
    from ..plans import read_rays_plan
    from ..rays import even_angles
    from ._rays_water import Reader, deepest_of

    plan = read_rays_plan(path)
    rays, shadow = plan.rays, plan.shadow
    with _of_plan(path):
        reader = Reader(plan, path.parent)
        water = reader.water()
        many = None if plan.ensemble is None else reader.ensemble(water)
    asked_of = {} if plan.loss is None else plan.loss.options()
    return Asked(
        title=plan.title,
        water=water,
        source={
            "source_depth": plan.source.depth,
            "max_range": rays.max_range,
            "seabed_depth": None if plan.needs_section else plan.seabed.depth,
        },
        angles=even_angles(rays.lowest_angle, rays.highest_angle, rays.number),
        bounces={"max_surface_bounces": rays.max_surface_bounces, "max_seabed_bounces": rays.max_seabed_bounces},
        points=rays.points,
        grid=(shadow.depths, shadow.ranges) if shadow.wanted else None,
        at_depths=tuple(shadow.at_depths),
        arrivals=_arrivals_asked(plan),
        loss=None if plan.loss is None else asked_of | _loss_grid(plan, deepest_of(water)),
        ensemble=None if many is None else many | asked_of,
    )


@contextmanager
def _of_plan(path: Path) -> Iterator[None]:
    """What is wrong with the water is said of the plan."""
    try:
        yield
    except PlanError:
        raise
    except InputError as error:
        raise InputError(f"{path}: {error}") from None


def _arrivals_asked(plan: RaysPlan) -> dict[str, Any] | None:
    if plan.arrivals is None:
        return None
    asked = plan.arrivals
    frequency = asked.frequency
    if frequency is None and plan.loss is not None:
        frequency = plan.loss.frequency
    return {
        "receiver_depth": asked.receiver_depths if len(asked.receiver_depths) > 1 else asked.receiver_depths[0],
        "receiver_range": asked.receiver_ranges if len(asked.receiver_ranges) > 1 else asked.receiver_ranges[0],
        "max_bounces": asked.max_bounces,
        "launch_angles": _search_angles(asked.lowest_angle, asked.highest_angle),
        "frequency": frequency,
    }


def _search_angles(lowest: float, highest: float) -> Any:
    """The fan that a search for arrivals begins with; None for the default one."""
    import numpy as np

    from ..rays import connecting

    if (lowest, highest) == (-connecting.STEEPEST, connecting.STEEPEST):
        return None
    return np.linspace(lowest, highest, max(2, int(np.ceil((highest - lowest) / connecting.STEP)) + 1))


def _loss_grid(plan: RaysPlan, deepest: float) -> dict[str, Any]:
    import numpy as np

    asked, far = plan.loss, plan.rays.max_range
    if asked is None:
        return {}
    return {
        "ranges": np.linspace(far / asked.ranges, far, asked.ranges) if asked.at_ranges is None else asked.at_ranges,
        "depths": np.linspace(0.0, deepest, asked.depths) if asked.at_depths is None else asked.at_depths,
    }


def work(asked: Asked, *, points: int, told: Told) -> Found:
    """Find all that is asked for."""
    from ..rays import find_shadow, trace_fan

    water, source = asked.water, asked.source
    plain = {"source_depth": source["source_depth"]}
    told("rays", 0, 1)
    fan = trace_fan(water, launch_angles=asked.angles, points=points, **source, **asked.bounces)
    shadow, arrivals, loss, many = None, None, None, None
    if asked.grid is not None:
        told("shadow zones", 0, 1)
        shadow = find_shadow(water, **source, grid=asked.grid, depths=_depths(asked))
    if asked.arrivals is not None:
        from ..rays import find_arrivals

        told("arrivals", 0, 1)
        arrivals = find_arrivals(water, **plain, **asked.arrivals)
    if asked.loss is not None:
        from ..rays.loss import loss as find_loss

        told("loss", 0, 1)
        loss = find_loss(water, **plain, **asked.loss, progress=lambda part: told("loss", int(100 * part), 100))
    if asked.ensemble is not None:
        from ..rays import ensemble

        told("ensemble", 0, len(asked.ensemble["waters"]))
        many = ensemble(**asked.ensemble, progress=lambda done, of: told("ensemble", done, of))
    return Found(asked, fan, shadow, arrivals, loss, many)


def _depths(asked: Asked) -> Any:
    """The depths of the shadow's grid, with those asked for among them; None for the default."""
    import numpy as np

    from ._rays_water import deepest_of

    if not asked.at_depths or asked.grid is None:
        return None
    bottom = asked.source["seabed_depth"] or deepest_of(asked.water)
    return np.union1d(np.linspace(0.0, bottom, asked.grid[0]), asked.at_depths)


def beside(path: Path, name: str) -> Path:
    """The name of a further output: rays.png, rays-loss.png."""
    return path.with_name(f"{path.stem}-{name}{path.suffix}")


def outputs(asked: Asked, output: Path | None, figure: Path | None) -> list[Path]:
    """The further files that will be written beside those named."""
    files = []
    if output is not None and output.suffix.lower() == ".csv" and asked.arrivals is not None:
        files.append(beside(output, "arrivals"))
    if figure is not None:
        files += [beside(figure, name) for name in asked.further()]
        files += [beside(figure, "shadow")] * (asked.grid is not None and _is_section(asked.water))
    return files


def _is_section(water: Any) -> bool:
    from ..profile import Profile

    return not isinstance(water, Profile)


def write(found: Found, output: Path | None, zones: Path | None, *, replace: bool) -> None:
    """The tables: netCDF with a group for each further result, or CSV with the arrivals in a file beside it."""
    from ..files import write_csv, write_dataset

    fan = found.fan
    if output is not None and output.suffix.lower() == ".csv":
        write_csv(output, fan.columns(), replace=replace, preamble=fan.about())
        if found.arrivals is not None:
            columns = found.arrivals.columns()
            write_csv(beside(output, "arrivals"), columns, replace=replace, preamble=fan.about())
    elif output is not None:
        groups: dict[str, Any] = {
            "arrivals": None if found.arrivals is None else found.arrivals.to_dataset(),
            "loss": found.loss,
            "ensemble": found.ensemble,
        }
        given = {name: group for name, group in groups.items() if group is not None}
        write_dataset(fan.to_dataset(found.shadow), output, replace=replace, groups=given)
    if zones is not None:
        from ..files.geojson import write_geojson

        shadow: Any = found.shadow
        write_geojson(zones, shadow.to_geojson(found.asked.at_depths), replace=replace)


def check_zones(asked: Asked, zones: Path, *, replace: bool) -> None:
    """Refuse zones that could not be written, before any work is done for them."""
    from ..files import check_output

    if zones.suffix.lower() not in {".geojson", ".json"}:
        raise InputError(f"--zones {zones}: the ending must be .geojson or .json")
    if asked.grid is None or getattr(asked.water, "track", None) is None:
        raise InputError("--zones: needs a plan with shadow.wanted = true for a section with a place on the Earth")
    check_output(zones, replace=replace)


def draw(found: Found, figure: Path, *, replace: bool) -> None:
    """The pictures: of the rays under the name given, of each further result beside it."""
    from ..figures import save_figure

    for path, picture in pictures(found, figure):
        save_figure(picture, path, replace=replace)


def pictures(found: Found, figure: Path) -> Iterator[tuple[Path, Figure]]:
    """Each picture with its name."""
    from ..figures import arrivals_figure, fan_figure, section_figure, shadow_figure

    title = found.asked.title
    if not _is_section(found.asked.water):
        yield figure, fan_figure(found.fan, shadow=found.shadow)
    else:
        section: Any = found.asked.water
        yield figure, section_figure(section, found.fan)
        if found.shadow is not None:
            yield (
                beside(figure, "shadow"),
                shadow_figure(found.shadow, found.asked.at_depths, title=title and f"{title}: shadow zones"),
            )
    if found.arrivals is not None and len(found.arrivals):
        yield beside(figure, "arrivals"), arrivals_figure(found.arrivals, title=title and f"{title}: arrivals")
    if found.loss is not None:
        from ..figures.loss import loss_figure

        yield beside(figure, "loss"), loss_figure(found.loss)
    if found.ensemble is not None:
        from ..figures.ensemble import ensemble_figure

        yield beside(figure, "ensemble"), ensemble_figure(found.ensemble, title=title and f"{title}: ensemble")


def summary(found: Found, notes: list[str]) -> dict[str, Any]:
    """All that `--json` says."""
    fan = found.fan
    told: dict[str, Any] = {**fan.about(), "rays": len(fan), "endings": fan.status_counts(), "notes": notes}
    if found.shadow is not None:
        told["shadow"] = found.shadow.summary()
        if found.asked.at_depths:
            told["convergence_zones"] = [
                {"depth": depth, "number": int(number), "start": start, "end": end}
                for depth in found.asked.at_depths
                for number, start, end in found.shadow.convergence_zones(depth).tolist()
            ]
    if found.arrivals is not None:
        told["arrivals"] = {"number": len(found.arrivals), **found.arrivals.columns()}
    for name, result in (("loss", found.loss), ("ensemble", found.ensemble)):
        if result is not None:
            told[name] = {**result.attrs, **_statistics(result)}
    return {**told, "per_ray": fan.columns()}


def _statistics(result: xarray.Dataset) -> dict[str, Any]:
    """The median of each field over the grid."""
    import numpy as np

    return {
        f"median_{name}": float(np.nanmedian(values)) if np.isfinite(values).any() else None
        for name, values in ((key, result[key].to_numpy()) for key in result.data_vars)
        if values.dtype.kind == "f" and values.ndim == 2
    }


def lines(found: Found) -> list[str]:
    """All that is said to a person."""
    from ..rays import CAUTION

    fan = found.fan
    about = fan.about()
    if "section" in about:
        said = [f"{about['section']}", f"Source at {fan.source_depth:g} m, {len(fan)} rays to {fan.max_range:g} m"]
    else:
        cast, equation = about["cast_id"] or "without a name", about["equation"] or "none"
        said = [
            f"Cast {cast}, {len(fan.profile)} levels, equation {equation}",
            (
                f"Source at {fan.source_depth:g} m, seabed at {fan.seabed_depth:g} m, "
                f"{len(fan)} rays to {fan.max_range:g} m"
            ),
        ]
    said.append("; ".join(f"{count} {name.replace('_', ' ')}" for name, count in fan.status_counts().items()))
    said += _listed(_RAYS, fan.columns())
    if found.shadow is not None:
        share = found.shadow.summary()
        words = {"no_bounce": "if no bounce is counted", "surface_bounces": "with surface bounces",
                 "any_bounces": "for any ray"}  # fmt: skip
        told = ", ".join(
            f"{part:.1%} {'of the water to that range ' * (not i)}{words[name]}"
            for i, (name, part) in enumerate(share.items())
        )
        said += ["", f"In shadow: {told}."]
        for depth in found.asked.at_depths:
            zones = found.shadow.convergence_zones(depth)
            listed = ", ".join(f"{start / 1000:.1f} to {end / 1000:.1f} km" for _, start, end in zones)
            said.append(f"Convergence zones at {depth:g} m: {listed or 'none'}")
        said.append(CAUTION)
    if found.arrivals is not None:
        said += ["", f"{len(found.arrivals)} arrivals", *_listed(_ARRIVALS, found.arrivals.columns())]
    for name, result in (("Loss", found.loss), ("Ensemble", found.ensemble)):
        if result is not None:
            said += ["", *_about_result(name, result)]
    return said


def _about_result(name: str, result: xarray.Dataset) -> Iterator[str]:
    """A result on a grid in a few lines."""
    import numpy as np

    at = result.range.to_numpy()
    yield f"{name} at {result.sizes['range']} ranges to {at[-1]:g} m and {result.sizes['depth']} depths"
    for key in ("frequency", "method", "method_reason", "phases", "beams", "modes", "members"):
        if key in result.attrs:
            yield f"   {key.replace('_', ' ')}: {result.attrs[key]}"
    for name_of, variable in result.data_vars.items():
        values = variable.to_numpy()
        if values.ndim == 2 and values.dtype.kind == "f" and np.isfinite(values).any():
            known = values[np.isfinite(values)]
            low, middle, high = np.quantile(known, (0.1, 0.5, 0.9))
            yield f"   {str(name_of).replace('_', ' ')}: median {middle:.3g}, 10 to 90 % {low:.3g} to {high:.3g}"


_RAYS = {
    "launch_angle": ("launch °", ".2f"),
    "range": ("range m", ".1f"),
    "depth": ("depth m", ".2f"),
    "travel_time": ("time s", ".6f"),
    "path_length": ("path m", ".1f"),
    "arrival_angle": ("arrival °", ".2f"),
    "turns": ("turns", "d"),
    "surface_bounces": ("surface", "d"),
    "seabed_bounces": ("seabed", "d"),
    "status": ("end", "s"),
}
_ARRIVALS = {
    "receiver": ("receiver", "d"),
    "launch_angle": ("launch °", ".3f"),
    "arrival_angle": ("arrival °", ".3f"),
    "travel_time": ("time s", ".6f"),
    "path_length": ("path m", ".1f"),
    "turns": ("turns", "d"),
    "surface_bounces": ("surface", "d"),
    "seabed_bounces": ("seabed", "d"),
    "amplitude": ("amplitude", ".3e"),
    "phase": ("phase °", ".1f"),
}


def _listed(listing: dict[str, tuple[str, str]], columns: dict[str, Any]) -> list[str]:
    """A table of a row for each ray or arrival, unless there are too many."""
    if not 0 < len(columns["launch_angle"]) <= LISTED:
        return []
    cells = [
        [format(value, form).replace("_", " ") for value in columns[name].tolist()]
        for name, (_, form) in listing.items()
    ]
    return ["", *shared.table([head for head, _ in listing.values()], [list(row) for row in zip(*cells, strict=True)])]
