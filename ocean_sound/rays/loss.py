"""Transmission loss over range and depth: by normal modes where nothing changes with range, by Gaussian beams."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..files.cf import attributes
from ..profile import Profile
from ..section import Seabed, Section, Surface
from ..water import OutOfRangeWarning
from ..water import absorption as absorption_of_water
from .gaussian_beams import BeamField, beam_field, check_beams
from .modes import normal_modes
from .section_tracing import checked_range, checked_source

if TYPE_CHECKING:
    from collections.abc import Callable

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from .modes import Modes

    Floats = NDArray[np.float64]

METHODS = ("auto", "beams", "modes")
PHASES = ("kept", "surface", "dropped")
BEAMS, MODES = 0, 1

FEWEST_WAVELENGTHS = 10.0
"""Depth of the water in wavelengths below which beams are no method. Against modes with complex wavenumbers, in
refracting water 100 m deep, the loss averaged over 1 km is off by 1 to 5 dB (median) at 3 wavelengths, 1 to 1.6 at 13,
and 0.4 to 0.9 at 67; in even water beams hold down to 2."""
MOST_WAVELENGTHS = 200.0
"""Depth in wavelengths up to which modes are cheap, a second or so."""
NEAREST_DEPTHS = 5.0
"""Nearer to the source than so many depths of water the sound that no mode carries matters (common practice: a few)."""
_LEVELS = 4000  # of the profile that modes take from a section
_SHARPEST, _PART = 0.5, 0.25  # how near a level a layer is split so that beams see its corner: m, and part of the layer
_TEMPERATURE, _SALINITY = 10.0, 35.0  # of the water whose absorption is taken where the caller gives none


@dataclass(frozen=True, eq=False)
class _Job:
    """What is asked, checked."""

    section: Section
    profile: Profile | None
    source_depth: float
    frequency: float
    ranges: Floats
    depths: Floats
    phases: str
    absorption: float
    options: dict[str, Any]


@dataclass(frozen=True)
class _Choice:
    """Which columns go by modes, and why."""

    method: str
    reason: str
    notes: tuple[str, ...] = ()


def loss(
    water: Profile | Section,
    *,
    source_depth: float,
    frequency: float,
    ranges: ArrayLike,
    depths: ArrayLike,
    method: str = "auto",
    phases: str = "kept",
    seabed: Any = None,
    seabed_depth: float | None = None,
    wind_speed: float | None = None,
    absorption: float | None = None,
    beams: int | None = None,
    half_width: float | None = None,
    insist: bool = False,
    listed: bool = False,
    threads: int = 1,
    progress: Callable[[float], None] | None = None,
) -> xarray.Dataset:
    """Transmission loss of a point source, over a grid of ranges and depths or at listed receivers.

    Parameters
    ----------
    water : Profile or Section
        A profile is water that is the same at all ranges over a level seabed, on a flat Earth. A section has its own
        seabed, surface and curvature.
    source_depth : float
        m.
    frequency : float
        Hz.
    ranges : array_like, shape (ranges,)
        m, above 0, increasing.
    depths : array_like, shape (depths,)
        m, increasing.
    method : {"auto", "beams", "modes"}
        See the notes.
    phases : {"kept", "surface", "dropped"}
        Whether the phases between paths are kept (in the textbooks: coherent); or only those between a path and its
        twin reflected by the surface next to the source (semi-coherent); or none (incoherent).
    seabed : str, Sediment, Seabed or None
        For a profile: what a level seabed is made of, a name from the table of sediments or a sediment; or a whole
        seabed. Where not given it absorbs all.
    seabed_depth : float, optional
        For a profile: m; by default its deepest level.
    wind_speed : float, optional
        For a profile: m/s; calm by default.
    absorption : float, optional
        Of the water, dB/km; by default that of Francois and Garrison for 10 degC and a salinity of 35 at mid depth.
    beams : int, optional
        How many beams are launched; by default as many as frequency, range and half-width ask for, closer where rays
        part faster. A number given with phases dropped is spread evenly, which saves tracing a fan to see where.
    half_width : float, optional
        Of the beams, m; by default what fits the water, see `gaussian_beams.natural_half_width`.
    insist : bool
        Go on where no method is known to be valid.
    listed : bool
        Ranges and depths are those of receivers, one by one and in any order, instead of a grid's.
    threads : int
        That beams are shared among.
    progress : callable, optional
        Called with the part done, from 0 to 1, now and then.

    Returns
    -------
    xarray.Dataset
        `transmission_loss` in dB re 1 m, positive, on (`range`, `depth`), or on `receiver`; NaN above the surface,
        below the seabed and where no method serves, infinite where no sound arrives at all, as at the surface itself.
        `seabed_depth` and `loss_method` (0 beams, 1 modes) on `range`. Attributes tell the method and why, the number
        of beams, their half-width and steps, or the number of modes.

    Raises
    ------
    InputError
        If an argument makes no sense, or no method is valid and it was not insisted upon.

    Notes
    -----
    Beams: Gaussian beams (Cerveny, Popov and Psencik 1982, Geophys. J. R. astr. Soc. 70:109; Porter and Bucker 1987,
    JASA 82:1349) whose half-width is chosen anew on each column, with plane-wave reflection from the seabed and the
    displacement that goes with it, the loss by a rough surface of Eckart (1953, JASA 25:566), and the water's
    absorption. Modes: `normal_modes`.

    "auto" takes modes where neither water nor seabed changes with range, the seabed is a fluid, phases are kept or
    dropped, the water is at most 200 wavelengths deep, and a mode is trapped; nearer than 5 depths to the source,
    where sound that no mode carries matters, and in all other cases it takes beams. Over changing water or seabed less
    than 10 wavelengths deep neither is valid.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> found = loss(Profile([0, 100], [1500, 1500]), source_depth=36.0, frequency=200.0, ranges=[2000.0, 4000.0],
    ...              depths=[20.0, 46.0, 120.0], seabed="sand")
    >>> found.attrs["method"], bool((found.transmission_loss[:, :2] > 40.0).all())
    ('modes', True)
    >>> bool(found.transmission_loss[:, 2].isnull().all())
    True
    """
    check_beams(beams, half_width)
    at, down, picks = _receivers(ranges, depths, listed=listed)
    if not (np.isfinite(frequency) and frequency > 0.0):
        raise InputError(f"frequency is {frequency:g} Hz: above 0 would be right")
    for name, value, allowed in (("method", method, METHODS), ("phases", phases, PHASES)):
        if value not in allowed:
            raise InputError(f"{name} is {value!r}: {', '.join(allowed)} would be right")
    section = _section(water, at, seabed, seabed_depth, wind_speed, frequency)
    checked_range(section, float(at[-1]))
    job = _Job(
        section=section,
        profile=water if isinstance(water, Profile) else None,
        source_depth=checked_source(section, source_depth),
        frequency=float(frequency),
        ranges=at,
        depths=down,
        phases=phases,
        absorption=_absorption(absorption, frequency, section),
        options={"beams": beams, "half_width": half_width, "threads": int(threads), "progress": progress},
    )
    return _dataset(job, *_computed(job, method, insist=insist), picks)


def _computed(job: _Job, method: str, *, insist: bool) -> tuple[Floats, NDArray[np.int8], _Choice, dict[str, Any]]:
    """Intensity on the grid, the method of each column, why, and the numbers of the methods."""
    choice = _chosen(job, method, insist=insist)
    intensity = np.full((job.ranges.size, job.depths.size), np.nan)
    how = np.zeros(job.ranges.size, dtype=np.int8)
    numbers: dict[str, Any] = {}
    near = job.ranges < NEAREST_DEPTHS * job.section.seabed.deepest
    notes = choice.notes
    if choice.method == "modes":
        far = np.full(near.shape, fill_value=True) if insist and method == "modes" else ~near
        modes = _modes(job)
        if len(modes) == 0:
            if method == "modes":
                raise InputError(f"{modes.notes[0]}; method beams would be right")
            choice = _Choice("beams", f"modes would serve, but {modes.notes[0]}")
        elif far.any():
            how[far] = MODES
            intensity[far] = _by_modes(job, modes, job.ranges[far])
            numbers |= {"modes": len(modes)}
            notes += modes.notes
        if method == "modes" and not far.all():
            notes += (
                f"nearer than {NEAREST_DEPTHS:g} depths of water modes do not hold, so the loss is not given there",
            )
            return intensity, how, _Choice(choice.method, choice.reason, notes), numbers
    rest = how == BEAMS
    if rest.any():
        field = _by_beams(job, job.ranges[rest])
        intensity[rest] = field.intensity
        numbers |= {
            "beams": field.beams,
            "beam_half_width": field.half_width,
            "beam_spacing": field.spacing,
            "beam_steps": field.steps,
        }
        notes += _beam_notes(field)
        if not rest.all():
            notes += (f"nearer than {NEAREST_DEPTHS:g} depths of water, where modes do not hold, by beams",)
    return intensity, how, _Choice(choice.method, choice.reason, notes), numbers


def _chosen(job: _Job, method: str, *, insist: bool) -> _Choice:
    """The method, and why.

    Raises
    ------
    InputError
        If the one asked for, or any, is not valid and it was not insisted upon.
    """
    against = _against_modes(job)
    bottom = np.asarray(job.section.seabed.depth_at(job.ranges))
    least = int(np.argmin(bottom))
    speed = float(job.section.speed_at(job.ranges[least], bottom[least]))
    wavelengths = float(bottom[least]) * job.frequency / speed
    shallow = wavelengths < FEWEST_WAVELENGTHS
    said = f"the water is {wavelengths:.3g} wavelengths deep" + (" at its shallowest" if job.section.varies else "")
    if method == "modes":
        if against:
            raise InputError(f"modes do not serve: {against}")
        return _Choice("modes", "asked for")
    if method == "auto" and not against and wavelengths <= MOST_WAVELENGTHS:
        reason = f"nothing changes with range and {said}, no more than {MOST_WAVELENGTHS:g}"
        return _Choice("modes", reason)
    if shallow and job.section.varies and not insist:
        raise InputError(
            f"{said} ({bottom[least]:.0f} m at {job.ranges[least] / 1000.0:.1f} km, {job.frequency:g} Hz), too few for "
            f"beams, which need {FEWEST_WAVELENGTHS:g}, and modes do not serve: {against}; no method here is valid for "
            "low frequency over changing water or seabed: insist=True computes beams all the same"
        )
    notes = (f"{said}: beams may be off by several dB where water bends rays",) if shallow else ()
    if method == "beams":
        return _Choice("beams", "asked for", notes)
    reason = against or f"{said}, more than {MOST_WAVELENGTHS:g}, where modes are too many"
    return _Choice("beams", reason, notes)


def _against_modes(job: _Job) -> str:
    """Why modes can't serve, or nothing."""
    if job.section.varies:
        return "water or seabed change with range"
    if not job.section.surface.reflects:
        return "the surface sends nothing back"
    sediment = job.section.sediment_at(0.0)
    if sediment is not None and sediment.shear_speed > 0.0:
        return f"the seabed carries shear waves ({sediment.shear_speed:g} m/s)"
    if job.phases == "surface":
        return "phases of the surface alone are a matter of rays"
    if not 0.0 < job.source_depth < job.section.seabed.deepest:
        return "the source is on the surface or the seabed"
    return ""


def _modes(job: _Job) -> Modes:
    """The modes, of a profile itself or of what a section's rays see."""
    section = job.section
    bottom = section.flat_seabed.deepest
    if job.profile is not None:
        profile = job.profile
    else:
        depth = np.linspace(0.0, bottom, _LEVELS + 1)
        profile = Profile(depth, section.field.speed_at(0.0, depth))
    return normal_modes(
        profile,
        frequency=job.frequency,
        seabed_depth=bottom,
        sediment=section.sediment_at(0.0),
        water_absorption=job.absorption / 1000.0,
        wind_speed=section.surface.wind_speed,
    )


def _by_modes(job: _Job, modes: Modes, ranges: Floats) -> Floats:
    depths = job.section.flat_depth(np.clip(job.depths, 0.0, job.section.seabed.deepest))
    source = float(job.section.flat_depth(job.source_depth))
    if job.phases == "dropped":
        return modes.intensity(source, ranges, depths).T
    found: Floats = np.abs(modes.pressure(source, ranges, depths).T) ** 2
    return found


def _by_beams(job: _Job, ranges: Floats) -> BeamField:
    return beam_field(
        job.section,
        source_depth=job.source_depth,
        frequency=job.frequency,
        ranges=ranges,
        depths=job.depths,
        phases=job.phases,
        absorption=job.absorption,
        **job.options,
    )


def _beam_notes(field: BeamField) -> tuple[str, ...]:
    notes = []
    if field.turned_back:
        notes.append(
            f"{field.turned_back} of {field.beams} beams were turned back by the seabed; what they carry is left out"
        )
    if field.lost:
        notes.append(
            f"{field.lost} of {field.beams} beams ended in a corner or along a boundary; what they carry is left out"
        )
    return tuple(notes)


def _receivers(ranges: ArrayLike, depths: ArrayLike, *, listed: bool) -> tuple[Floats, Floats, Any]:
    """The grid, and for listed receivers where in it each of them is."""
    at, down = (np.atleast_1d(np.array(values, dtype=np.float64)) for values in (ranges, depths))
    for name, values in (("ranges", at), ("depths", down)):
        if values.ndim != 1 or values.size == 0 or not np.isfinite(values).all():
            raise InputError(f"{name} are no list of finite numbers: metres would be right")
    if not at.min() > 0.0:
        raise InputError(f"a range is {at.min():g} m: above 0 would be right, since loss is relative to 1 m")
    if listed:
        if at.size != down.size:
            raise InputError(f"{at.size} ranges and {down.size} depths of receivers: as many of each would be right")
        grid, rows = np.unique(at, return_inverse=True)
        levels, columns = np.unique(down, return_inverse=True)
        return grid, levels, (rows, columns)
    for name, values in (("ranges", at), ("depths", down)):
        if (np.diff(values) <= 0.0).any():
            raise InputError(f"{name} do not increase: a grid wants them in order; listed=True takes receivers in any")
    return at, down, None


def _section(
    water: Profile | Section, ranges: Floats, seabed: Any, depth: float | None, wind: float | None, frequency: float
) -> Section:
    """The section meant; that of a profile has its corners no rounder than a wavelength."""
    if not isinstance(water, Profile):
        for name, value in (("seabed", seabed), ("seabed_depth", depth), ("wind_speed", wind)):
            if value is not None:
                raise InputError(f"{name} is {value!r}, but a section has its own: leave it out")
        return water
    profile = water.to_surface()
    bottom = float(profile.depth[-1]) if depth is None else float(depth)
    if isinstance(seabed, Seabed):
        if depth is not None:
            raise InputError(f"seabed_depth is {depth:g} m, but the seabed given has its own: leave it out")
    elif not 0.0 < bottom <= profile.depth[-1]:
        raise InputError(
            f"seabed depth {bottom:g} m is outside the profile, which reaches from 0 to {profile.depth[-1]:g} m: "
            "give a seabed within it, or a deeper profile"
        )
    return Section.from_profile(
        _with_corners(profile, float(profile.speed.min()) / frequency),
        seabed=seabed if isinstance(seabed, Seabed) else Seabed.flat(bottom, kind=seabed),
        surface=Surface(0.0 if wind is None else wind),
        max_range=float(ranges[-1]),
        flatten=False,
    )


def _with_corners(profile: Profile, wavelength: float) -> Profile:
    """The profile with levels added on both sides of each, so that a smooth curve through all keeps to its lines."""
    depth = profile.depth
    aside = np.minimum(max(wavelength, _SHARPEST), _PART * np.diff(depth))
    thick = aside >= _SHARPEST
    more = np.concatenate((depth[:-1][thick] + aside[thick], depth[1:][thick] - aside[thick]))
    levels = np.unique(np.concatenate((depth, more)))
    return Profile(levels, np.interp(levels, depth, profile.speed), id=profile.id)


def _absorption(given: float | None, frequency: float, section: Section) -> float:
    """dB/km."""
    if given is None:
        middle = 0.5 * section.seabed.deepest
        with warnings.catch_warnings():
            # below 200 Hz the formula is beyond its range, and what it says too little to matter: 0.01 dB/km
            warnings.simplefilter("ignore", OutOfRangeWarning)
            return float(absorption_of_water(frequency, _TEMPERATURE, _SALINITY, depth=middle))
    if not (np.isfinite(given) and given >= 0.0):
        raise InputError(f"absorption is {given:g} dB/km: 0 or more would be right")
    return float(given)


def _dataset(
    job: _Job, intensity: Floats, how: NDArray[np.int8], choice: _Choice, numbers: dict[str, Any], picks: Any
) -> xarray.Dataset:
    """The result with its attributes."""
    import xarray as xr

    bottom = np.asarray(job.section.seabed.depth_at(job.ranges))
    with np.errstate(divide="ignore"):
        decibels = -10.0 * np.log10(np.maximum(intensity, 0.0))
    outside = (job.depths[None, :] < 0.0) | (job.depths[None, :] > bottom[:, None])
    decibels[outside] = np.nan
    method = {
        "long_name": "how the loss was computed",
        "flag_values": np.array([BEAMS, MODES], np.int8),
        "flag_meanings": "beams modes",
    }
    of_loss = attributes("transmission_loss") | {"reference": "1 m from the source", "phases": job.phases}
    if picks is None:
        where: tuple[str, ...] = ("range", "depth")
        columns, levels = "range", "depth"
        rows: Any = slice(None)
        values, at, down = decibels, job.ranges, job.depths
    else:
        rows, wanted = picks
        where, columns, levels = ("receiver",), "receiver", "receiver"
        values, at, down = decibels[rows, wanted], job.ranges[rows], job.depths[wanted]
    kinds = "; ".join(
        f"{'absorbs all' if kind is None else kind.name or kind} from {start:g} m"
        for start, kind in job.section.seabed.kinds
    )
    about: dict[str, Any] = {
        "title": "Transmission loss",
        "source_depth": job.source_depth,
        "frequency": job.frequency,
        "phases": job.phases,
        "method": choice.method,
        "method_reason": choice.reason,
        **numbers,
        "absorption": job.absorption,
        "wind_speed": job.section.surface.wind_speed,
        "seabed_kinds": kinds,
        "section": repr(job.section).strip("<>"),
    }
    if job.section.radius is not None:
        about["earth_radius"] = job.section.radius
    if choice.notes:
        about["notes"] = "\n".join(choice.notes)
    return xr.Dataset(
        {
            "transmission_loss": (where, values, of_loss),
            "seabed_depth": (columns, bottom[rows], attributes("seabed_depth")),
            "loss_method": (columns, how[rows], method),
        },
        {
            "range": (columns, at, attributes("range")),
            "depth": (levels, down, attributes("depth") | {"axis": "Z"}),
        },
        about,
    )
