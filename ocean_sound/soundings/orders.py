"""Survey orders: how large the uncertainty of a sounding may be, and which soundings and beams stay within it.

Limits and what is held against them are of 95 %: total vertical (TVU) and total horizontal uncertainty (THU).
"""

from __future__ import annotations

from dataclasses import astuple, dataclass, fields
from functools import lru_cache
from importlib.resources import as_file, files
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..water._arrays import float_array
from ._arguments import checked_array, given_back, together

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence
    from os import PathLike

    import xarray
    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]
    Booleans = NDArray[np.bool_]


#: What every summary over soundings has to say with it.
SWATH_NOTE = (
    "an error of sound speed is shared by the whole swath and by all that one cast serves: it does not average out "
    "over soundings, and a share of soundings that hold an order is not the chance that the survey does"
)

LIMITED_BY = ("not_limited", "tvu", "thu", "tvu_and_thu", "unknown")
"""By its code, what ends the angles of `Reach`."""

_PACKAGED = "orders.toml"
_SOURCE = "source"


@dataclass(frozen=True)
class Order:
    """The largest uncertainty (95 %) that soundings may have.

    Parameters
    ----------
    name : str
    tvu_fixed, thu_fixed : float, optional
        The part that is alike at all depths, m.
    tvu_share, thu_share : float, optional
        The part that grows with depth, as a share of it. Of a pair the one not given is 0; without both there is no
        limit of that kind.
    title, source : str
        The name in full, and where the limits stand.

    Raises
    ------
    InputError
        If a number is negative or not finite, or there is no limit at all, or one of 0 at every depth.

    References
    ----------
    IHO S-44, edition 6.0.0 (2020), section 3.2.3: the fixed part and the share of TVU add as squares, those of THU as
    they are.

    Examples
    --------
    >>> order = read_orders()["1a"]
    >>> order.tvu([10.0, 100.0]).round(3), order.thu(100.0)
    (array([0.517, 1.393]), 10.0)
    """

    name: str
    tvu_fixed: float | None = None
    tvu_share: float | None = None
    thu_fixed: float | None = None
    thu_share: float | None = None
    title: str = ""
    source: str = ""

    def __post_init__(self) -> None:
        limits = {each.name: getattr(self, each.name) for each in fields(self) if each.name.startswith(("tvu", "thu"))}
        given = {name: value for name, value in limits.items() if value is not None}
        for name, value in given.items():
            if not (np.isfinite(value) and value >= 0.0):
                raise InputError(f"field '{name}' is {value:g}: give a number of at least 0")
        if not given:
            raise InputError(f"no limit is given: give at least one of {', '.join(limits)}")
        for kind in ("tvu", "thu"):
            pair = [value for name, value in given.items() if name.startswith(kind)]
            if pair and not any(pair):
                raise InputError(
                    f"the limit of {kind.upper()} is 0 m at every depth: give '{kind}_fixed' or '{kind}_share' above "
                    "0, or neither for no limit"
                )

    def tvu(self, depth: ArrayLike) -> Any:
        """The largest TVU (95 %) at a depth, m.

        Parameters
        ----------
        depth : array_like
            m, positive down. What dries (negative) counts as 0, which S-44 leaves open; NaN stays NaN.

        Returns
        -------
        float or numpy.ndarray
            In the shape of `depth`; infinite where the order sets no limit.

        Raises
        ------
        InputError
            If a depth is infinite.
        """
        below = _wet(depth)
        if self.tvu_fixed is None and self.tvu_share is None:
            return given_back(np.where(np.isnan(below), np.nan, np.inf))
        return given_back(np.hypot(self.tvu_fixed or 0.0, (self.tvu_share or 0.0) * below))

    def thu(self, depth: ArrayLike) -> Any:
        """The largest THU (95 %) at a depth, m; as `tvu` in all else."""
        below = _wet(depth)
        if self.thu_fixed is None and self.thu_share is None:
            return given_back(np.where(np.isnan(below), np.nan, np.inf))
        return given_back((self.thu_fixed or 0.0) + (self.thu_share or 0.0) * below)


def read_orders(path: str | PathLike[str] | None = None) -> Mapping[str, Order]:
    """The orders of IHO S-44, or limits of a person's own.

    Parameters
    ----------
    path : str or path-like, optional
        A TOML file laid out like the packaged ``orders.toml``: for each order a table with `tvu_fixed`, `tvu_share`,
        `thu_fixed`, `thu_share` (as for `Order`; shares at most 1) and a `title`; at the top the `source`. Its orders
        stand in place of the packaged ones; ``{**read_orders(), **read_orders(path)}`` has both.

    Returns
    -------
    mapping of str to Order
        In the order of the file; it can't be changed.

    Raises
    ------
    InputError
        The file can't be read or is not TOML, or a field is unknown or impossible; one line for each such field.

    References
    ----------
    IHO S-44, edition 6.0.0 (2020), Table 1.

    Examples
    --------
    >>> list(read_orders())
    ['2', '1b', '1a', 'Special', 'Exclusive']
    """
    return _packaged() if path is None else _read(path, str(path))


@lru_cache(maxsize=1)
def _packaged() -> Mapping[str, Order]:
    with as_file(files(__package__) / _PACKAGED) as path:
        return _read(path, _PACKAGED)


def _read(path: str | PathLike[str], where: str) -> Mapping[str, Order]:
    from ..files.fields import checked, load_toml  # pydantic is slow to load

    tables = load_toml(path, error=InputError)
    source = tables.pop(_SOURCE, where)
    orders: dict[str, Order] = {}
    faults: list[str] = []
    if not isinstance(source, str):
        faults.append(f"{where}: field '{_SOURCE}' is {source!r}: give a text")
    for name, table in tables.items():
        if not isinstance(table, dict):
            faults.append(f"{where}: field '{name}' is {table!r}: give a table [{name}] of limits")
            continue
        try:
            given = checked(_limits_model(), table, f"order '{name}'", error=InputError).model_dump()
            orders[name] = _made(name, given, str(source))
        except InputError as fault:
            faults += [f"{where}: {line}" for line in str(fault).splitlines()]
    if not tables:
        faults.append(f"{where}: no order is in it: give a table such as [channel] with tvu_fixed = 0.2")
    if faults:
        raise InputError("\n".join(faults))
    return MappingProxyType(orders)


def _made(name: str, given: dict[str, Any], source: str) -> Order:
    try:
        return Order(name, **given, source=source)
    except InputError as fault:
        raise InputError(f"order '{name}': {fault}") from None


@lru_cache(maxsize=1)
def _limits_model() -> Any:
    from pydantic import Field

    from ..files.fields import Fields

    class Limits(Fields):
        tvu_fixed: float | None = Field(default=None, ge=0)
        tvu_share: float | None = Field(default=None, ge=0, le=1)
        thu_fixed: float | None = Field(default=None, ge=0)
        thu_share: float | None = Field(default=None, ge=0, le=1)
        title: str = ""

    return Limits


@dataclass(frozen=True, eq=False)
class Held:
    """Which soundings stay within an order; arrays of one shape.

    Parameters
    ----------
    tvu, thu : numpy.ndarray of bool
        Whether that uncertainty is known and within its limit.
    tvu_fails, thu_fails : numpy.ndarray of bool
        Whether it is known and beyond. Where neither is true, the depth or the uncertainty is NaN.
    """

    tvu: Booleans
    thu: Booleans
    tvu_fails: Booleans
    thu_fails: Booleans

    @property
    def both(self) -> Booleans:
        """Whether the order holds: both are within."""
        return self.tvu & self.thu

    @property
    def fails(self) -> Booleans:
        """Whether the order certainly does not hold: at least one is beyond."""
        return self.tvu_fails | self.thu_fails


def holds(order: Order, depth: ArrayLike, tvu_95: ArrayLike, thu_95: ArrayLike) -> Held:
    """Which soundings stay within an order.

    Parameters
    ----------
    order : Order
    depth : array_like
        Depth of the soundings, m, positive down.
    tvu_95, thu_95 : array_like
        Their uncertainty (95 %), m: of sound speed alone, or of all components together. NaN where it is unknown;
        against an order without a limit of that kind it is within all the same.

    Returns
    -------
    Held
        Masks in the broadcast shape. An uncertainty just at its limit holds.

    Raises
    ------
    InputError
        If an uncertainty is negative, a depth infinite, or the arguments do not broadcast.

    Examples
    --------
    >>> holds(read_orders()["Special"], 20.0, [0.29, 0.30, np.nan], 1.9).both
    array([ True, False, False])
    """
    below, vertical, horizontal = _judged_on(depth, tvu_95, thu_95)
    tvu, tvu_fails = _within(vertical, np.asarray(order.tvu(below)))
    thu, thu_fails = _within(horizontal, np.asarray(order.thu(below)))
    return Held(tvu, thu, tvu_fails, thu_fails)


def _within(value: Floats, limit: Floats) -> tuple[Booleans, Booleans]:
    unlimited = np.isinf(limit)
    return (value <= limit) | unlimited, (value > limit) & ~unlimited


def _share_of(value: Floats, limit: Floats) -> Floats:
    """Uncertainties over their limit; 0 where there is none."""
    with np.errstate(divide="ignore", invalid="ignore"):
        share = value / limit
    share[np.isinf(limit) | ((limit == 0.0) & (value == 0.0))] = 0.0
    return share


@dataclass(frozen=True)
class OrderSummary:
    """How a set of soundings stands to an order. Those of two sets add up to that of both (``+``).

    Parameters
    ----------
    order : str
    soundings : int
        All of the set; the five that follow add up to it.
    held : int
        Within both limits.
    tvu_fails, thu_fails, both_fail : int
        Beyond the limit of TVU and not of THU, of THU and not of TVU, of both.
    not_judged : int
        Not beyond any limit, but depth or an uncertainty is unknown.
    largest_tvu, largest_thu : float
        The largest uncertainty as a share of its limit where it is known (0 without a limit); NaN if it never is.

    Raises
    ------
    InputError
        On adding, if the orders differ.
    """

    order: str
    soundings: int
    held: int
    tvu_fails: int
    thu_fails: int
    both_fail: int
    not_judged: int
    largest_tvu: float
    largest_thu: float

    @property
    def share_held(self) -> float:
        """Share of the soundings judged that hold the order, from 0 to 1; NaN if none is judged.

        It says nothing of chance: see `SWATH_NOTE`.
        """
        judged = self.soundings - self.not_judged
        return self.held / judged if judged else float("nan")

    @property
    def holds(self) -> bool:
        """Whether every sounding of the set is known to hold the order; False for none at all."""
        return self.soundings > 0 and self.held == self.soundings

    def __add__(self, other: OrderSummary) -> OrderSummary:
        if self.order != other.order:
            raise InputError(f"summaries of order '{self.order}' and of '{other.order}' do not add: give one order")
        mine, others = astuple(self)[1:], astuple(other)[1:]
        counts = (a + b for a, b in zip(mine[:-2], others[:-2], strict=True))
        return OrderSummary(self.order, *counts, *np.fmax(mine[-2:], others[-2:]).tolist())

    def __str__(self) -> str:
        """One line, without `SWATH_NOTE`.

        >>> print(summarise(read_orders(), 20.0, [0.2, 0.4], [1.0, 1.0])[3])
        Special: 50.0 % of 2 soundings hold it; beyond TVU 1, THU 0, both 0; largest TVU 1.37, THU 0.50 of its limit
        """
        unknown = f"; {self.not_judged} can't be judged" if self.not_judged else ""
        judged = self.soundings - self.not_judged
        share = "none" if not judged else f"{np.floor(1000.0 * self.share_held) / 10.0:.1f} %"  # 100 % is all of them
        return (
            f"{self.order}: {share} of {judged} soundings hold it; beyond TVU "
            f"{self.tvu_fails}, THU {self.thu_fails}, both {self.both_fail}{unknown}; largest TVU "
            f"{self.largest_tvu:.2f}, THU {self.largest_thu:.2f} of its limit"
        )


def summarise(
    orders: Mapping[str, Order] | Iterable[Order], depth: ArrayLike, tvu_95: ArrayLike, thu_95: ArrayLike
) -> tuple[OrderSummary, ...]:
    """How a set of soundings stands to each of some orders.

    Parameters
    ----------
    orders : mapping of str to Order, or iterable of Order
    depth, tvu_95, thu_95 : array_like
        As for `holds`.

    Returns
    -------
    tuple of OrderSummary
        One for each order. `SWATH_NOTE` belongs to them: counts of soundings are no measure of chance, since the error
        from sound speed is shared.

    Raises
    ------
    InputError
        As `holds` does.

    Examples
    --------
    >>> [summary.held for summary in summarise(read_orders(), [10.0, 10.0], [0.2, 0.4], [1.5, 1.5])]
    [2, 2, 2, 1, 0]
    """
    each = orders.values() if hasattr(orders, "values") else orders
    below, vertical, horizontal = _judged_on(depth, tvu_95, thu_95)
    return tuple(_summary(order, below, vertical, horizontal) for order in each)


def _summary(order: Order, depth: Floats, tvu_95: Floats, thu_95: Floats) -> OrderSummary:
    held = holds(order, depth, tvu_95, thu_95)
    kept, both = (int(np.count_nonzero(mask)) for mask in (held.both, held.tvu_fails & held.thu_fails))
    tvu, thu = (int(np.count_nonzero(mask)) - both for mask in (held.tvu_fails, held.thu_fails))
    largest = [
        float(np.fmax.reduce(_share_of(value, np.asarray(limit)), axis=None, initial=np.nan))
        for value, limit in ((tvu_95, order.tvu(depth)), (thu_95, order.thu(depth)))
    ]
    unknown = depth.size - kept - tvu - thu - both
    return OrderSummary(order.name, depth.size, kept, tvu, thu, both, unknown, *largest)


def summary_dataset(summaries: Sequence[OrderSummary]) -> xarray.Dataset:
    """Summaries as a dataset on the dimension `order`, with `SWATH_NOTE` as its comment.

    Examples
    --------
    >>> dataset = summary_dataset(summarise(read_orders(), 10.0, [0.2, 0.4], 1.5))
    >>> dataset["share_held"].sel(order="Special").item()
    0.5
    """
    import xarray as xr

    titles = {
        "soundings": "number of soundings",
        "held": "number of soundings within both limits of the order",
        "tvu_fails": "number of soundings beyond the limit of TVU only",
        "thu_fails": "number of soundings beyond the limit of THU only",
        "both_fail": "number of soundings beyond the limits of TVU and THU",
        "not_judged": "number of soundings of which depth or an uncertainty is unknown",
        "largest_tvu": "largest TVU (95 %) as a share of its limit",
        "largest_thu": "largest THU (95 %) as a share of its limit",
        "share_held": "share of the soundings judged that hold the order",
    }
    variables = {
        name: ("order", np.array([getattr(each, name) for each in summaries]), {"long_name": title, "units": "1"})
        for name, title in titles.items()
    }
    names = np.array([each.order for each in summaries], dtype=str)
    order = ("order", names, {"long_name": "survey order"})
    return xr.Dataset(variables, coords={"order": order}, attrs={"comment": SWATH_NOTE})


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
        _share_of(_table(value, name, table), np.asarray(limit(below)))
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


def _judged_on(depth: ArrayLike, tvu_95: ArrayLike, thu_95: ArrayLike) -> tuple[Floats, ...]:
    given = {"depth": depth, "tvu_95": tvu_95, "thu_95": thu_95}
    return together(**{name: checked_array(name, values) for name, values in given.items()})


def _wet(depth: ArrayLike) -> Floats:
    """Depths, with those that dry as 0."""
    return np.maximum(checked_array("depth", depth), 0.0)
