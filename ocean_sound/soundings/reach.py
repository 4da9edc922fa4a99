"""How far out, by depth, beams hold a survey order."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ..profile import Profile
from ..water._arrays import float_array
from ._arguments import checked_array
from .beams import HIT, beam_times
from .carrying import completed
from .changing import least_reach
from .components import Component, Components
from .orders import share_of
from .sensitivity import DEFAULT_ANGLE, path_uncertainty

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence
    from typing import Any

    import xarray
    from numpy.typing import ArrayLike, NDArray

    from .orders import Order

    Floats = NDArray[np.float64]
    Booleans = NDArray[np.bool_]

LIMITED_BY = ("not_limited", "tvu", "thu", "tvu_and_thu", "unknown")
"""By its code, what ends the angles of `Reach`."""

_DEPTHS = 20
_STEP = 1.0  # degrees


@dataclass(frozen=True, eq=False)
class Reach:
    """How far out, by depth, beams hold an order; arrays of one length.

    Parameters
    ----------
    order : str
    depth : numpy.ndarray
        m.
    angle : numpy.ndarray
        The largest beam angle up to which all beams hold the order, degrees; NaN where already the first does not.
    limited_by : numpy.ndarray of int8
        What ends it, by its code in `LIMITED_BY`: 0 where all beams of the table hold, and 4 where an uncertainty is
        unknown there.
    holds_beyond : numpy.ndarray of bool
        Whether beams farther out hold the order again: a wrong speed in a layer at the transducer, say, does not move
        the depth at 45 degrees.
    """

    order: str
    depth: Floats
    angle: Floats
    limited_by: NDArray[np.int8]
    holds_beyond: Booleans

    def to_dataset(self) -> xarray.Dataset:
        """On the dimension `depth`, with units and meanings.

        Examples
        --------
        >>> from ocean_sound.soundings.orders import read_orders
        >>> angles, tvu = [0.0, 40.0, 60.0], [[0.1], [0.2], [0.4]]
        >>> reach = largest_angle(read_orders()["Special"], angles, [20.0], tvu, 0.5)
        >>> reach.to_dataset()["largest_angle"].attrs["units"]
        'degree'
        """
        import xarray as xr

        codes = np.arange(len(LIMITED_BY), dtype=np.int8)
        meanings = {"long_name": "what limits the angle", "flag_values": codes, "flag_meanings": " ".join(LIMITED_BY)}
        angle = {"long_name": "largest beam angle up to which all beams hold the order", "units": "degree"}
        beyond = {"long_name": "whether beams farther out hold the order again", "flag_values": codes[:2],
                  "flag_meanings": "no yes"}  # fmt: skip
        depth = {"long_name": "depth below the water surface", "standard_name": "depth", "units": "m",
                 "positive": "down"}  # fmt: skip
        return xr.Dataset(
            {
                "largest_angle": ("depth", self.angle, angle),
                "limited_by": ("depth", self.limited_by, meanings),
                "holds_beyond": ("depth", self.holds_beyond.astype(np.int8), beyond),
            },
            coords={"depth": ("depth", self.depth, depth)},
            attrs={"order": self.order},
        )


def largest_angle(order: Order, angle: ArrayLike, depth: ArrayLike, tvu_95: ArrayLike, thu_95: ArrayLike) -> Reach:
    """The largest beam angle that holds an order, by depth.

    Parameters
    ----------
    order : Order
    angle : array_like
        Beam angles from the vertical, degrees, from 0 to less than 90, increasing. A side of the swath at a time.
    depth : array_like
        m, positive down.
    tvu_95, thu_95 : array_like
        Uncertainty (95 %) over (angle, depth), m, or what broadcasts to that; NaN where it is unknown.

    Returns
    -------
    Reach
        Up to that angle all beams hold, from the first on. Between the angles of the table the share of the limit is
        taken along a straight line, which for one that grows ever faster is on the safe side; what happens within one
        step of the table is not seen.

    Raises
    ------
    InputError
        If the angles or depths are not as above, an uncertainty is negative, or the tables have another shape.

    Examples
    --------
    >>> from ocean_sound.soundings.orders import Order
    >>> limits = Order("channel", tvu_fixed=0.2)
    >>> largest_angle(limits, [0.0, 30.0, 60.0], [10.0, 20.0], [[0.1, 0.1], [0.1, 0.2], [0.3, 0.4]], 0.0).angle
    array([45., 30.])
    """
    theta, below = float_array("angle", angle), checked_array("depth", depth)
    rising = theta.ndim == 1 and theta.size > 0 and bool((np.diff(theta) > 0.0).all())
    if not (rising and 0.0 <= theta[0] <= theta[-1] < 90.0):
        raise InputError("angle: an increasing row of degrees from 0 to less than 90 would be right")
    if below.ndim != 1 or np.isnan(below).any():
        raise InputError("depth: a row of finite metres would be right")
    table = (theta.size, below.size)
    shares = [
        share_of(_table(value, name, table), np.asarray(limit(below)))
        for value, name, limit in ((tvu_95, "tvu_95", order.tvu), (thu_95, "thu_95", order.thu))
    ]
    (tvu_ends, tvu_unknown), (thu_ends, thu_unknown) = (_end(theta, share) for share in shares)
    end = np.minimum(tvu_ends, thu_ends)
    by_tvu, by_thu = (tvu_ends == end) & ~tvu_unknown, (thu_ends == end) & ~thu_unknown
    limited_by = np.where(by_tvu | by_thu, by_tvu + 2 * by_thu, LIMITED_BY.index("unknown"))
    limited_by[np.isposinf(end)] = 0
    good = (shares[0] <= 1.0) & (shares[1] <= 1.0)
    beyond: Booleans = np.asarray((good & ~np.logical_and.accumulate(good, axis=0)).any(axis=0))
    reached = np.where(np.isneginf(end), np.nan, np.minimum(end, theta[-1]))
    return Reach(order.name, below, reached, limited_by.astype(np.int8), beyond)


def _end(angle: Floats, share: Floats) -> tuple[Floats, Booleans]:
    """For each depth where the share of the limit first passes 1, and whether it is unknown there.

    Minus infinity where that is the first angle, infinity where it never happens.
    """
    over = ~(share <= 1.0)
    first, column = np.argmax(over, axis=0), np.arange(share.shape[1])
    before = np.maximum(first - 1, 0)
    inside, outside = share[before, column], share[first, column]
    step = outside - inside
    part = np.where(step > 0.0, (1.0 - inside) / np.where(step > 0.0, step, 1.0), 0.0)
    end = np.where(first == 0, -np.inf, angle[before] + part * (angle[first] - angle[before]))
    never = ~over.any(axis=0)
    return np.where(never, np.inf, end), np.isnan(outside) & ~never


def _table(values: ArrayLike, name: str, shape: tuple[int, int]) -> Floats:
    array = checked_array(name, values)
    try:
        return np.broadcast_to(array, shape)
    except ValueError:
        raise InputError(f"{name}: its shape is {array.shape}; {shape} for angle and depth would be right") from None


def uncertainty_by_angle(
    profiles: Profile | Sequence[Profile],
    *,
    depths: ArrayLike | None = None,
    transducer_depth: float = 0.0,
    flat_array: bool = True,
    change: Mapping[str, Any] | None = None,
    changed: float = 0.0,
    steering_speed_uncertainty: float = 0.0,
    components: Components | Iterable[Component] = (),
    max_angle: float = DEFAULT_ANGLE,
) -> xarray.Dataset:
    """Uncertainty of soundings over beam angle and depth, as one cast would give it.

    Parameters
    ----------
    profiles : Profile or sequence of Profile
        Casts. Of several each angle and depth has the largest uncertainty that one of them gives.
    depths : array_like, optional
        Of the seabed, m below the water surface, increasing; twenty even steps down to where the shallowest cast ends
        if not given. A cast that ends above is carried on, with the larger uncertainty that this has.
    transducer_depth : float
        m below the water surface.
    flat_array : bool
        Whether beams come from a level flat array steered with the speed at the transducer, and so keep
        sin(angle)/speed; otherwise they keep their angle.
    change : mapping, optional
        Shapes of the water's change, from `water_change`; without them the cast is taken as that of the moment.
    changed : float
        Variance of the water's change since and away from the cast, relative to that of these shapes; as
        `Choice.change`, see also `choosing.LAST_CHANGE`.
    steering_speed_uncertainty : float
        As for `Options`.
    components : Components or iterable of Component
        The survey's other uncertainties.
    max_angle : float
        Degrees from the vertical at the transducer.

    Returns
    -------
    xarray.Dataset
        `tvu_95` and `thu_95`, m, on (`angle`, `depth`), from sound speed and the components together; NaN for beams
        that turn, and where no cast knows its uncertainty.

    Raises
    ------
    InputError
        If there is no cast, or depths or the transducer can't be.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> from ocean_sound.soundings.orders import read_orders
    >>> water = Profile([0, 100], [1500, 1500], shapes={"sound_speed": [2.0, 2.0]})
    >>> table = uncertainty_by_angle(water, depths=[10.0, 100.0])
    >>> reach = largest_angle(read_orders()["Exclusive"], table.angle, table.depth, table.tvu_95, table.thu_95)
    >>> reach.angle.round(1)  # where 1.96 |1 - tan²| h 2/1500 passes the TVU, and 1.96 (2 tan) h 2/1500 the THU
    array([69.8, 62.4])
    """
    import xarray as xr

    casts = [profiles] if isinstance(profiles, Profile) else list(profiles)
    if not casts:
        raise InputError("there is no cast: give at least one")
    others = components if isinstance(components, Components) else Components(tuple(components))
    down = _depths(casts, depths, transducer_depth)
    angle = np.append(np.arange(0.0, max_angle - 0.5 * _STEP, _STEP), max_angle)
    tvu, thu = np.full((2, angle.size, down.size), np.nan)
    for cast in casts:
        water = completed(cast, float(down[-1]))
        uncertainty = path_uncertainty(water, transducer_depth=transducer_depth, change=change, max_angle=max_angle)
        sine = np.sin(np.radians(angle))[:, np.newaxis]
        turned = -sine / uncertainty.water.source_speed**2
        zz, _, xx = uncertainty.covariance(
            sine,
            down - transducer_depth,
            slowness_per_speed=0.0 if flat_array else turned,
            slowness_per_steering_speed=turned if flat_array else 0.0,
            steering_speed_uncertainty=steering_speed_uncertainty,
            change=changed,
        )
        beams = beam_times(water, angle[:, np.newaxis], down, transducer_depth=transducer_depth)
        away = np.degrees(np.arctan2(beams.across, down - transducer_depth))
        away = np.where(beams.status == HIT, away, np.nan)
        tvu = np.fmax(tvu, others.tvu_95(down, away, zz))
        thu = np.fmax(thu, others.thu_95(down, away, xx))
    words = "uncertainty (95 %) from the speed of sound" + (" and the other components" if others.parts else "")
    return xr.Dataset(
        {
            "tvu_95": (("angle", "depth"), tvu, {"long_name": f"total vertical {words}", "units": "m"}),
            "thu_95": (("angle", "depth"), thu, {"long_name": f"total horizontal {words}", "units": "m"}),
        },
        {
            "angle": ("angle", angle, {"long_name": "angle of the beam from the vertical", "units": "degree"}),
            "depth": ("depth", down, {"long_name": "depth below the water surface", "standard_name": "depth",
                                      "units": "m", "positive": "down"}),
        },
        {"casts": len(casts), "transducer_depth": float(transducer_depth), "changed": float(changed)},
    )  # fmt: skip


def even_depths(transducer_depth: float, bottom: float) -> Floats:
    """Twenty even steps from below the transducer to a bottom, m.

    Raises
    ------
    InputError
        If the bottom is not below the transducer.

    Examples
    --------
    >>> even_depths(4.0, 44.0)[[0, -1]]
    array([ 6., 44.])
    """
    if not 0.0 <= transducer_depth < bottom < np.inf:
        raise InputError(
            f"the transducer is at {transducer_depth:g} m, and the seabed at {bottom:g} m: the first above the second "
            "would be right"
        )
    return transducer_depth + (bottom - transducer_depth) * np.arange(1, _DEPTHS + 1) / _DEPTHS


def _depths(casts: Sequence[Profile], depths: ArrayLike | None, transducer_depth: float) -> Floats:
    if depths is None:
        return even_depths(transducer_depth, least_reach(casts))
    down = np.atleast_1d(np.asarray(depths, dtype=np.float64))
    if not (down.ndim == 1 and down.size and (np.diff(down) > 0.0).all() and transducer_depth < down[0] < np.inf):
        raise InputError(
            f"depths: an increasing row of metres below the transducer, at {transducer_depth:g} m, would be right"
        )
    return down
