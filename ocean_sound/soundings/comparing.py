"""Two casts compared: how the speed of sound differs and why, and what the difference does to a sounding."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import permutations
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts import Cast, CastBlock
from ..errors import InputError
from ..files.cf import attributes
from ..profile import Profile
from ..profile.speeds import speeds_of_block
from ..water import DEFAULT_EQUATION, find_equation, pressure_of_columns, salinity_from_conductivity, speed_of_columns
from .beams import HIT, STATUSES, beam_times, below_transducer, nearly_within

if TYPE_CHECKING:
    import xarray
    from numpy.typing import ArrayLike, NDArray

    from ..water import Equation

    Floats = NDArray[np.float64]

DEFAULT_ANGLES = (0.0, 30.0, 45.0, 60.0, 65.0, 70.0)
CAUSES = ("temperature", "salinity", "pressure")
_ANGLE, _SEABED = "angle of the beam from the vertical at the transducer", "true depth of the seabed"
_DEPTHS = 10


@dataclass(frozen=True, eq=False)
class _Water:
    """A profile, and where the speed was computed what it was computed from, on the same levels."""

    profile: Profile
    causes: dict[str, Floats] | None


def compare(
    a: Cast | Profile,
    b: Cast | Profile,
    *,
    angles: ArrayLike = DEFAULT_ANGLES,
    depths: ArrayLike | None = None,
    transducer_depth: float = 0.0,
    equation: str | Equation = DEFAULT_EQUATION,
    salinity: float | None = None,
    flat_array: bool = False,
) -> xarray.Dataset:
    """Compare two casts: the difference of speed, its causes, and its effect on soundings.

    Parameters
    ----------
    a : Cast or Profile
        The water that soundings are corrected with.
    b : Cast or Profile
        The water that there is.
    angles : array_like
        Angles of beams from the vertical at the transducer, degrees, between -90 and 90.
    depths : array_like, optional
        Depths of the seabed, m, below the transducer and no deeper than both reach; ten even steps where not given.
    transducer_depth : float
        Depth of the transducer below the water surface, m.
    equation : str or Equation
        For casts of temperature: a name from `equations()`.
    salinity : float, optional
        Practical salinity to assume for casts that have neither salinity nor conductivity.
    flat_array : bool
        Whether beams come from a level flat array steered with the true speed, and so keep sin(angle)/speed when the
        speed at the transducer differs; otherwise they keep their angle.

    Returns
    -------
    xarray.Dataset
        On `depth` (all levels of both, over the depths that both cover): `speed_a`, `speed_b`, `speed_difference`
        (b - a) and, for two casts of temperature, its parts `speed_difference_by_temperature`, `_salinity` and
        `_pressure`, m/s. On (`sounding_depth`, `angle`): `depth_error` and `across_track_error`, m, of a sounding of b
        corrected with a (found minus true: positive too deep, and too far from the vertical on the positive side),
        `travel_time` (one way, s), and `status`: 0 hit, 1 turned in one of the two waters (NaN then), 2 ended too far
        below the profile (NaN).

    Raises
    ------
    InputError
        If the two have no depths in common, or a depth or the transducer lies outside these; as `Profile.from_cast`.

    Notes
    -----
    Between the levels of a cast temperature, salinity and pressure are taken as linear in depth, and the speed follows
    at the levels of the other. The parts are the Shapley values of the three causes, by the equation in full: the
    mean, over the six orders in which temperature, salinity and pressure can be changed from a to b, of what each
    change does. They sum to the difference to rounding, and no order is preferred (L. S. Shapley, 1953; from memory).
    To the salinity belongs where it was measured, since the Absolute Salinity of TEOS-10 depends on it; pressure
    differs at equal depth by density and latitude alone. Beams are traced exactly.

    Examples
    --------
    >>> a = Profile([0.0, 10.0, 50.0], [1500.0, 1500.0, 1500.0])
    >>> b = Profile([0.0, 10.0, 50.0], [1500.0, 1502.0, 1500.0])
    >>> errors = compare(a, b, angles=[0.0, 60.0], depths=[50.0])
    >>> errors.depth_error.round(3).values, errors.across_track_error.round(3).values
    (array([[-0.033,  0.067]]), array([[ 0.   , -0.116]]))
    """
    import xarray as xr

    chosen = find_equation(equation)
    waters = [_water(cast, chosen, salinity) for cast in (a, b)]
    depth = _common_levels(waters[0].profile, waters[1].profile)
    causes = [None if water.causes is None else _at(depth, water) for water in waters]
    speeds = [
        np.interp(depth, water.profile.depth, water.profile.speed) if of is None else _speed(chosen, depth, of)
        for water, of in zip(waters, causes, strict=True)
    ]
    difference = {"": speeds[1] - speeds[0]}
    if causes[0] is not None and causes[1] is not None:
        difference |= {f"_by_{name}": part for name, part in _parts(chosen, depth, causes[0], causes[1]).items()}
    columns: dict[str, Any] = {
        f"speed_{name}": ("depth", speed, {**attributes("sound_speed"), "long_name": f"speed of sound in {name}"})
        for name, speed in zip("ab", speeds, strict=True)
    }
    for suffix, values in difference.items():
        cause = suffix.removeprefix("_by_")
        due = f", part due to {cause}" if cause else ""
        columns[f"speed_difference{suffix}"] = (
            "depth", values, {"long_name": f"speed of sound in b minus that in a{due}", "units": "m s-1"},
        )  # fmt: skip
    ids = [water.profile.id for water in waters]
    errors = refraction_errors(
        Profile(depth, speeds[0]), Profile(depth, speeds[1]), angles=angles,
        depths=_sounding_depths(depths, depth, transducer_depth), transducer_depth=transducer_depth,
        flat_array=flat_array,
    )  # fmt: skip
    about = {"a": ids[0], "b": ids[1], **{f"{name}_{key}": value for name, water in zip("ab", waters, strict=True)
             for key, value in water.profile.about().items() if key != "cast_id" and value is not None}}  # fmt: skip
    levels = xr.Dataset(columns, {"depth": ("depth", depth, attributes("depth"))}, about)
    return levels.merge(errors).assign_attrs({**about, **errors.attrs})


def refraction_errors(
    used: Profile,
    true: Profile,
    *,
    angles: ArrayLike,
    depths: ArrayLike,
    transducer_depth: float = 0.0,
    flat_array: bool = False,
) -> xarray.Dataset:
    """Errors of soundings taken in one water and corrected with another.

    Parameters
    ----------
    used : Profile
        What soundings are corrected with.
    true : Profile
        The water that there is.
    angles, transducer_depth, flat_array
        As for `compare`.
    depths : array_like
        True depths of the seabed, m.

    Returns
    -------
    xarray.Dataset
        `depth_error`, `across_track_error`, `travel_time` and `status` on (`sounding_depth`, `angle`), as in `compare`.

    Raises
    ------
    InputError
        If the transducer does not lie above the deepest level of both.

    Examples
    --------
    >>> errors = refraction_errors(Profile([0, 100], [1515, 1515]), Profile([0, 100], [1500, 1500]),
    ...                            angles=[0.0], depths=[50.0])
    >>> round(float(errors.depth_error[0, 0]), 6)
    0.5
    """
    import xarray as xr

    theta, depth = np.atleast_1d(np.asarray(angles, float)), np.atleast_1d(np.asarray(depths, float))
    truth = beam_times(true, theta[None, :], depth[:, None], transducer_depth=transducer_depth)
    steering = below_transducer(true, transducer_depth).source_speed if flat_array else None
    found = nearly_within(used, theta[None, :], truth.time, transducer_depth=transducer_depth, surface_speed=steering)
    status = np.where(truth.status == HIT, found.status, truth.status)
    where = ("sounding_depth", "angle")

    def column(values: Floats, name: str, units: str) -> tuple[Any, ...]:
        return where, np.where(status == HIT, values, np.nan), {"long_name": name, "units": units}

    flags = {
        "long_name": "what became of the beam",
        "flag_values": np.arange(len(STATUSES), dtype=np.int8),
        "flag_meanings": " ".join(status.replace(" ", "_") for status in STATUSES),
    }
    return xr.Dataset(
        {
            "depth_error": column(found.depth - depth[:, None], "depth found minus true depth", "m"),
            "across_track_error": column(
                found.across - truth.across, "across-track distance found minus the true one", "m"
            ),
            "travel_time": column(truth.time, "travel time to the seabed, one way", "s"),
            "status": (where, status, flags),
        },
        {
            "sounding_depth": ("sounding_depth", depth, {**attributes("depth"), "long_name": _SEABED}),
            "angle": ("angle", theta, {"long_name": _ANGLE, "units": "degree"}),
        },
        {
            "transducer_depth": float(transducer_depth),
            "beams_keep": "sin(angle)/speed at the transducer" if flat_array else "angle at the transducer",
        },
    )


def _water(cast: Cast | Profile, equation: Equation, salinity: float | None) -> _Water:
    """The profile of a cast, and temperature, salinity, pressure and position on its levels."""
    if isinstance(cast, Profile):
        return _Water(cast, None)
    block = CastBlock.from_casts([cast])
    columns = speeds_of_block(block, equation=equation, salinity=salinity)
    profile = columns.profile(0)
    if columns.direct[0]:
        return _Water(profile, None)
    # A level added at the surface has the water of the next one.
    added = columns.level < 0
    level = np.where(added, columns.level[1], columns.level)
    latitude = np.full(level.size, profile.latitude)

    def measured(name: str) -> Floats:
        column = block.values.get(name)
        return np.full(level.size, np.nan) if column is None else column[level]

    pressure, temperature, salt = measured("pressure"), measured("temperature"), measured("salinity")
    pressure = np.where(np.isfinite(pressure), pressure, pressure_of_columns(profile.depth, latitude))
    if not np.isfinite(salt).all():
        found = salinity_from_conductivity(measured("conductivity"), temperature, np.maximum(pressure, 0.0))
        salt = np.where(np.isfinite(found), np.maximum(found, 0.0), 0.0 if salinity is None else salinity)
    pressure = np.where(added, 0.0, pressure)
    return _Water(
        profile,
        {
            "temperature": temperature,
            "salinity": salt,
            "pressure": pressure,
            "latitude": latitude,
            "longitude": np.full(level.size, profile.longitude),
        },
    )


def _common_levels(a: Profile, b: Profile) -> Floats:
    """All levels of both over the depths that both cover."""
    top, bottom = max(a.depth[0], b.depth[0]), min(a.depth[-1], b.depth[-1])
    if not top < bottom:
        raise InputError(
            f"{a.id or 'a'} covers {a.depth[0]:g} to {a.depth[-1]:g} m, "
            f"{b.id or 'b'} {b.depth[0]:g} to {b.depth[-1]:g} m: two casts that overlap in depth would be right"
        )
    both = np.union1d(a.depth, b.depth)
    common: Floats = both[(both >= top) & (both <= bottom)]
    return common


def _sounding_depths(depths: ArrayLike | None, levels: Floats, transducer_depth: float) -> Floats:
    bottom = float(levels[-1])
    if not 0.0 <= transducer_depth < bottom:
        raise InputError(f"transducer depth is {transducer_depth:g} m: from 0 m to above {bottom:g} m would be right")
    if depths is None:
        return np.linspace(transducer_depth, bottom, _DEPTHS + 1)[1:]
    wanted = np.atleast_1d(np.asarray(depths, dtype=np.float64))
    wrong = ~((wanted > transducer_depth) & (wanted <= bottom))
    if wrong.any():
        raise InputError(
            f"depth {wanted[wrong].flat[0]:g} m: below {transducer_depth:g} m, the transducer, and down to "
            f"{bottom:g} m, where the shallower of the two ends, would be right"
        )
    return wanted


def _at(depth: Floats, water: _Water) -> dict[str, Floats]:
    return {name: np.interp(depth, water.profile.depth, column) for name, column in (water.causes or {}).items()}


def _speed(equation: Equation, depth: Floats, causes: dict[str, Floats]) -> Floats:
    vertical = {"depth": depth} if equation.vertical == "depth" else {"pressure": causes["pressure"]}
    return speed_of_columns(
        causes["temperature"],
        causes["salinity"],
        **vertical,
        latitude=causes["latitude"],
        longitude=causes["longitude"],
        equation=equation,
    )


def _parts(equation: Equation, depth: Floats, a: dict[str, Floats], b: dict[str, Floats]) -> dict[str, Floats]:
    """What each cause changes from a to b, meant over the orders of changing them."""
    speeds: dict[frozenset[str], Floats] = {}

    def speed(changed: frozenset[str]) -> Floats:
        if changed not in speeds:
            mixed = {name: (b if name in changed else a)[name] for name in CAUSES}
            where = b if "salinity" in changed else a
            mixed |= {name: where[name] for name in ("latitude", "longitude")}
            speeds[changed] = _speed(equation, depth, mixed)
        return speeds[changed]

    parts = {name: np.zeros(depth.size) for name in CAUSES}
    orders = list(permutations(CAUSES))
    for order in orders:
        for at, name in enumerate(order):
            parts[name] += (speed(frozenset(order[: at + 1])) - speed(frozenset(order[:at]))) / len(orders)
    return parts
