"""The passport of one sounding: its ray, the casts that served it, and each centimetre of its uncertainty by cause."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from .beams import beam_positions
from .choosing import distances
from .columns import REASONS, PingBlock
from .positions import true_depth
from .radius import TVU_FACTOR, thu_95_from_covariance
from .sensitivity import beam_moves

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping
    from os import PathLike

    import xarray
    from numpy.typing import NDArray

    from .carrying import Carrier
    from .choosing import Choice
    from .components import Component
    from .correcting import Corrector
    from .streaming import Job

    Floats = NDArray[np.float64]

NOISE, CHANGE, STEERING = "noise", "change_of_the_water", "steering_speed"
"""Causes beside the shapes of the casts and the other components."""

_RAY_POINTS = 101
_CM, _HOUR, _KM = 100.0, 3600.0, 1000.0
_OTHER = " (component)"


@dataclass(frozen=True, eq=False)
class Serving:
    """A cast that a sounding was corrected with.

    Parameters
    ----------
    id : str
    weight : float
        Of the sounding; 1 for a single cast.
    time_apart, distance : float
        From the ping, s and m, 0 or more; NaN where not known.
    levels, speed : numpy.ndarray
        Depths, m, and speed of sound there, m/s, as it was used: completed where the cast ends.
    depth, across, along : float
        Where the sounding lies by this cast alone, m; NaN where its beam does not get there.
    """

    id: str
    weight: float
    time_apart: float
    distance: float
    levels: Floats
    speed: Floats
    depth: float
    across: float
    along: float


@dataclass(frozen=True)
class Contribution:
    """What one cause does to a sounding.

    Parameters
    ----------
    cause : str
        A shape of the cast's uncertainty by its name, ``noise``, ``change_of_the_water``, ``steering_speed``, or
        one of the survey's other components.
    part : str
        Which of several: the shape of the change.
    cast : str
        The cast through which it acts; empty for other components.
    share : float
        With which its square counts: the weight of the cast.
    depth, distance : float
        Error of the depth and of the horizontal distance along the beam, m, found less true, when the cause is one
        standard uncertainty above the truth. Of noise and other components the standard uncertainty, without a sign;
        that of position is along any one axis.
    """

    cause: str
    part: str
    cast: str
    share: float
    depth: float
    distance: float


@dataclass(frozen=True, eq=False)
class Passport:
    """All that is known of how one sounding came about; made by `passport`.

    Parameters
    ----------
    ping, beam : int
        Counted from 0 in the whole set.
    results : mapping of str to float
        The sounding as it was corrected: the columns of `columns.OUTPUTS` and their values.
    transducer_depth : float
        m below the water surface.
    ray_across, ray_along, ray_depth : numpy.ndarray
        Points of the ray at equal steps of time, m, from the transducer to the sounding; empty for a sounding that
        failed. Through several casts the mean of their rays by weight.
    casts : tuple of Serving
        The heaviest first.
    contributions : tuple of Contribution
        Their squares, each times its share, add up to the variance of the sounding.
    tvu_95, thu_95 : float
        TVU and THU (95 %) from all causes, m, by exact derivatives; NaN where a cause is unknown.
    speed_tvu_95, speed_thu_95 : float
        From the speed of sound alone. The `tvu_95` among the results is from a table, within 2 % of these; for what
        heave adds to that see `path_uncertainty`.
    command : str
        What reproduces it.
    notes : tuple of str
    """

    ping: int
    beam: int
    results: Mapping[str, float]
    transducer_depth: float
    ray_across: Floats
    ray_along: Floats
    ray_depth: Floats
    casts: tuple[Serving, ...]
    contributions: tuple[Contribution, ...]
    tvu_95: float
    thu_95: float
    speed_tvu_95: float
    speed_thu_95: float
    command: str
    notes: tuple[str, ...]

    @property
    def name(self) -> str:
        """Ping and beam, counted from 0."""
        return f"ping {self.ping}, beam {self.beam}"

    @property
    def depth(self) -> float:
        """Depth of the sounding below the water surface, m; NaN if it failed."""
        return self.results["depth"]

    @property
    def across(self) -> float:
        """Distance across the track, m, positive to starboard."""
        return self.results["across_track_distance"]

    @property
    def reason(self) -> str:
        """Why the sounding has its flag, in words."""
        return REASONS[int(self.results["sounding_reason"])].text

    @property
    def causes(self) -> Mapping[str, float]:
        """1.96 standard uncertainties of the depth from each cause that moves it, m, the largest first.

        Their squares add up.
        """
        return self._by_cause("depth")

    @property
    def distance_causes(self) -> Mapping[str, float]:
        """As `causes`, of the horizontal distance along the beam."""
        return self._by_cause("distance")

    def _by_cause(self, kind: str) -> Mapping[str, float]:
        squares: dict[str, float] = {}
        for each in self.contributions:
            squares[each.cause] = squares.get(each.cause, 0.0) + each.share * getattr(each, kind) ** 2
        largest_first = sorted(squares.items(), key=lambda one: -np.nan_to_num(one[1], nan=np.inf))
        return {cause: TVU_FACTOR * float(np.sqrt(square)) for cause, square in largest_first if square != 0.0}

    def lines(self) -> list[str]:
        """The passport as lines of text."""
        flag, side = int(self.results["sounding_flag"]), "starboard" if self.across >= 0.0 else "port"
        along = self.results["along_track_distance"]
        place = f"{abs(self.across):.3f} m to {side}, {abs(along):.3f} m {'forward' if along >= 0.0 else 'aft'}"
        lines = [
            f"{self.name} (counted from 0): {self.depth:.3f} m deep, {place}",
            f"flag {flag}: {self.reason}",
        ]
        lines += [f"cast {_who(cast)}: {cast.depth:.3f} m deep" for cast in self.casts]
        alone = f"from the speed of sound alone {_CM * self.speed_tvu_95:.1f} and {_CM * self.speed_thu_95:.1f} cm"
        lines += [f"TVU {_CM * self.tvu_95:.1f} cm, THU {_CM * self.thu_95:.1f} cm (95 %); {alone}"]
        if self.contributions:
            lines += ["", "cause, 1.96 standard uncertainties in cm          depth  distance"]
            down, across = self.causes, self.distance_causes
            lines += [
                f"  {cause:<44}{_CM * down.get(cause, 0.0):9.2f}{_CM * across.get(cause, 0.0):10.2f}"
                for cause in dict.fromkeys((*down, *across))
            ]
            lines += ["", "by cast, signed, one standard uncertainty in cm   depth  distance  share"]
            lines += [
                f"  {_what(each):<44}{_CM * each.depth:+9.2f}{_CM * each.distance:+10.2f}{each.share:7.0%}"
                for each in self.contributions
            ]
        lines += [f"note: {note}" for note in self.notes]
        return [*lines, *(["", f"to reproduce it: {self.command}"] if self.command else [])]

    def to_dataset(self) -> xarray.Dataset:
        """On the dimensions `point` (of the ray), `cast` and `contribution`, with units; the results as scalars."""
        import xarray as xr

        from .columns import OUTPUTS

        def per(dimension: str, values: Any, title: str, units: str = "m") -> tuple[Any, ...]:
            return dimension, np.array(values), {"long_name": title, **({"units": units} if units else {})}

        casts, parts = self.casts, self.contributions
        variables: dict[str, Any] = {
            "ray_across": per("point", self.ray_across, "distance of the ray across the track, positive to starboard"),
            "ray_along": per("point", self.ray_along, "distance of the ray along the track, positive forward"),
            "ray_depth": per("point", self.ray_depth, "depth of the ray below the water surface"),
            "weight": per("cast", [each.weight for each in casts], "weight of the cast", "1"),
            "time_apart": per("cast", [each.time_apart for each in casts], "time from the cast to the ping", "s"),
            "distance": per("cast", [each.distance for each in casts], "distance from the cast to the ping"),
            "depth_by_cast": per("cast", [each.depth for each in casts], "depth of the sounding by the cast alone"),
            "share": per("contribution", [each.share for each in parts], "with which the square counts", "1"),
            "depth_error": per(
                "contribution", [each.depth for each in parts],
                "error of the depth, found less true, for one standard uncertainty (k=1) of the cause",
            ),
            "distance_error": per(
                "contribution", [each.distance for each in parts],
                "error of the distance along the beam, found less true, for one standard uncertainty (k=1)",
            ),
            "contribution_cast": per("contribution", [each.cast for each in parts], "cast through which it acts", ""),
            "contribution_part": per("contribution", [each.part for each in parts], "which of several shapes", ""),
            **{
                name: ((), np.array(value, OUTPUTS[name].dtype), OUTPUTS[name].attributes())
                for name, value in self.results.items()
                if name in OUTPUTS
            },
            "all_tvu_95": ((), self.tvu_95, {"long_name": "TVU (95 %) from all causes", "units": "m"}),
            "all_thu_95": ((), self.thu_95, {"long_name": "THU (95 %) from all causes", "units": "m"}),
        }  # fmt: skip
        coordinates = {
            "cast": per("cast", [each.id for each in casts], "cast", ""),
            "contribution": per("contribution", [each.cause for each in parts], "cause of uncertainty", ""),
        }
        attributes = {
            "title": f"Passport of the sounding of {self.name}", "ping": self.ping, "beam": self.beam,
            "history": self.command, "comment": "; ".join(self.notes),
        }  # fmt: skip
        return xr.Dataset(variables, coordinates, attributes)


def _who(cast: Serving) -> str:
    known = [
        f"{value / unit:.1f} {name}"
        for value, unit, name in ((cast.time_apart, _HOUR, "h"), (cast.distance, _KM, "km"))
        if np.isfinite(value)
    ]
    return f"{cast.id or 'without a name'}, weight {cast.weight:.0%}" + (f", {', '.join(known)} away" if known else "")


def _what(each: Contribution) -> str:
    return ", ".join(filter(None, (each.cause, each.part, each.cast)))


def passport(corrector: Corrector, block: PingBlock, ping: int, beam: int, *, command: str = "") -> Passport:
    """How one sounding came about.

    Parameters
    ----------
    corrector : Corrector
        That the sounding was corrected with.
    block : PingBlock
        With its ping.
    ping, beam : int
        Counted from 0 in the whole set that the block is of.
    command : str
        What reproduces it, to be kept with it.

    Returns
    -------
    Passport

    Raises
    ------
    InputError
        If the block does not have that sounding, or as `Corrector.correct` does.

    Notes
    -----
    The sounding is corrected again as it was. Its uncertainty is taken apart by exact derivatives (`beam_moves`) of the
    ray from the transducer as deep as it was, where `Corrector` looks it up in a table.
    """
    n, m = block.shape
    row = ping - block.start
    if not (0 <= row < n and 0 <= beam < m):
        raise InputError(
            f"there is no ping {ping}, beam {beam}: pings {block.start} to {block.start + n - 1} and beams 0 to "
            f"{m - 1}, counted from 0, are there"
        )
    found = corrector.correct(block.part(row, row + 1))
    results = {name: float(column[0, beam]) for name, column in found.items()}
    one = _single(block, row, beam)
    choice = corrector.choose(one)
    beams = [
        _Beam(corrector, one, choice, int(which), float(weight))
        for which, weight in zip(choice.index[0], choice.weight[0], strict=True)
        if weight > 0.0
    ]
    served = [each for each in beams if np.isfinite(each.below)]
    whole = sum(each.weight for each in served)
    speed = [part for each in served for part in each.contributions(each.weight / whole)]
    failed = not np.isfinite(results["depth"])
    others = [] if failed else list(_others(corrector.components, results, beams[0].source, {p.cause for p in speed}))
    ray = np.empty((3, 0)) if failed else _ray(served, results)
    zz, xx = (sum(part.share * getattr(part, kind) ** 2 for part in speed) for kind in ("depth", "distance"))
    if failed or not speed:
        zz = xx = np.nan
    v, h = (sum(getattr(part, kind) ** 2 for part in others) for kind in ("depth", "distance"))
    notes = dict.fromkeys((*corrector.notes, *(note for each in beams for note in each.made.uncertainty.notes)))
    return Passport(
        ping=ping,
        beam=beam,
        results=results,
        transducer_depth=_value(one, "transducer_depth"),
        ray_across=ray[0],
        ray_along=ray[1],
        ray_depth=ray[2],
        casts=tuple(each.serving(one) for each in beams),
        contributions=(*speed, *others),
        tvu_95=TVU_FACTOR * float(np.sqrt(zz + v)),
        thu_95=float(thu_95_from_covariance(xx + h, h)),
        speed_tvu_95=TVU_FACTOR * float(np.sqrt(zz)),
        speed_thu_95=TVU_FACTOR * float(np.sqrt(xx)),
        command=command,
        notes=tuple(notes),
    )


def passport_of_file(
    source: str | PathLike[str] | xarray.Dataset, job: Job, ping: int, beam: int, *, command: str = ""
) -> Passport:
    """The passport of a sounding of a file, as `correct_file` with the same job corrects it.

    Parameters
    ----------
    source : path-like or xarray.Dataset
        As for `open_soundings`.
    job : Job
    ping, beam : int
        Counted from 0; of a file with one dimension the beam is 0.
    command : str
        As for `passport`.

    Returns
    -------
    Passport

    Raises
    ------
    InputError
        If the file does not have that sounding, and as for `correct_file`.
    """
    from .reading import open_soundings
    from .streaming import corrector_for

    with open_soundings(source, case=job.case) as soundings:
        n, m = soundings.shape
        if not (0 <= ping < n and 0 <= beam < m):
            raise InputError(
                f"{soundings.where}: there is no ping {ping}, beam {beam}: pings 0 to {n - 1} and beams 0 to {m - 1}, "
                "counted from 0, are there"
            )
        corrector = corrector_for(soundings, job)
        block = next(each for each in soundings.blocks() if each.start <= ping < each.start + each.shape[0])
        return passport(corrector, block, ping, beam, command=command)


class _Beam:
    """One sounding through one cast."""

    def __init__(self, corrector: Corrector, block: PingBlock, choice: Choice, which: int, weight: float) -> None:
        self.corrector, self.weight, self.profile = corrector, weight, corrector.profiles[which]
        self.made: Carrier = corrector.carrier(which)
        self.change = float(choice.change[0])
        found = (float(column[0]) for column in corrector.through(block, which))
        self.depth, self.across, self.along, self.source, self.time, self.sine, self.below, *steered = found
        self.by_speed, self.slowness = steered

    def serving(self, block: PingBlock) -> Serving:
        """The cast as it served."""
        time, profile = block.of("time"), self.profile
        apart, place = np.nan, [_value(block, name) for name in ("latitude", "longitude")]
        if time is not None and not (np.isnat(time[0, 0]) or np.isnat(profile.time)):
            apart = abs(float((time[0, 0] - profile.time) / np.timedelta64(1, "ns"))) * 1e-9
        both = np.array([*place, profile.latitude, profile.longitude])
        distance = float(distances(*both[:, np.newaxis])[0]) if np.isfinite(both).all() else np.nan
        whole = self.made.profile
        return Serving(
            profile.id, self.weight, apart, distance, whole.depth, whole.speed, self.depth, self.across, self.along
        )

    def contributions(self, share: float) -> list[Contribution]:
        """What each cause does to the sounding through this cast."""
        profile = self.made.profile.to_surface()
        moves = beam_moves(profile, self.sine, self.source + self.below, transducer_depth=self.source)
        top = np.array([np.interp(self.source, profile.depth, unit) for unit in np.eye(len(profile))])
        z = moves.depth[0] + self.by_speed * moves.depth_by_slowness[0] * top
        x = moves.across[0] + self.by_speed * moves.across_by_slowness[0] * top
        name, found = profile.id, []
        if profile.uncertainty is None:
            return [Contribution("speed_of_sound", "", name, share, np.nan, np.nan)]
        reached = (z != 0.0) | (x != 0.0)  # a level below the sounding may not know its uncertainty

        def add(cause: str, part: str, shape: Floats) -> None:
            error = shape[reached]
            if error.any():
                found.append(
                    Contribution(cause, part, name, share, float(z[reached] @ error), float(x[reached] @ error))
                )

        for cause, shape in profile.shapes.items():
            add(cause, "", shape)
        if profile.noise is not None:
            noise = profile.noise[reached]
            sizes = (float(np.sqrt(np.sum((side[reached] * noise) ** 2))) for side in (z, x))
            found.append(Contribution(NOISE, "", name, share, *sizes))
        for part, (depths, amplitudes) in self.corrector.change.items():
            add(CHANGE, part, np.sqrt(self.change) * np.interp(profile.depth, depths, amplitudes))
        if self.slowness != 0.0:
            errors = (float(side[0]) * self.slowness for side in (moves.depth_by_slowness, moves.across_by_slowness))
            found.append(Contribution(STEERING, "", name, share, *errors))
        return found

    def ray(self) -> Floats:
        """Across, along and depth of the ray at equal steps of time, m."""
        made = self.made
        angle = float(np.degrees(np.arcsin(self.sine)))
        source = float(made.flat(np.array(self.source)))
        path = beam_positions(made.water, angle, np.linspace(0.0, self.time, _RAY_POINTS), transducer_depth=source)
        depth = path.depth if np.isinf(made.radius) else true_depth(path.depth, made.radius)
        far = float(np.hypot(self.across, self.along))
        side, ahead = (self.across / far, self.along / far) if far > 0.0 else (1.0, 0.0)
        return np.array([side * path.across, ahead * path.across, depth])


def _single(block: PingBlock, row: int, beam: int) -> PingBlock:
    """A block of one beam of one ping."""
    impossible = None if block.impossible is None else block.impossible[row : row + 1, beam : beam + 1]
    beams = {name: values[row : row + 1, beam : beam + 1] for name, values in block.beams.items()}
    pings = {name: values[row : row + 1] for name, values in block.pings.items()}
    return PingBlock(pings, beams, block.start + row, impossible)


def _value(block: PingBlock, name: str) -> float:
    column = block.of(name)
    return np.nan if column is None else float(column[0, 0])


def _ray(served: Iterable[_Beam], results: Mapping[str, float]) -> Floats:
    """The mean of the rays by weight, ending where the sounding is.

    What is left at its end (of the transducer's own way to reception, and the arithmetic error of the table) grows
    along the ray.
    """
    beams = list(served)
    ray: Floats = np.average([each.ray() for each in beams], axis=0, weights=[each.weight for each in beams])
    end = [results[name] for name in ("across_track_distance", "along_track_distance", "depth")]
    ray += np.linspace(0.0, 1.0, ray.shape[1]) * (np.array(end) - ray[:, -1])[:, np.newaxis]
    return ray


def _others(
    components: Iterable[Component], results: Mapping[str, float], source: float, taken: set[str]
) -> Iterable[Contribution]:
    """What the other components do to the sounding."""
    depth = results["depth"]
    far = np.hypot(results["across_track_distance"], results["along_track_distance"])
    angle = float(np.degrees(np.arctan2(far, depth - source)))
    for each in components:
        name = each.name + _OTHER if each.name in taken else each.name
        size = float(each.sigma(depth, angle))
        vertical = each.kind == "vertical"
        yield Contribution(name, "", "", 1.0, size if vertical else 0.0, 0.0 if vertical else size)
