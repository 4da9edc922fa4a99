"""Survey orders: how large the uncertainty of a sounding may be, and which soundings and beams stay within it.

Limits and what is held against them are of 95 %: total vertical (TVU) and total horizontal uncertainty (THU).
"""

from __future__ import annotations

from dataclasses import astuple, dataclass, fields
from functools import lru_cache
from importlib.resources import as_file, files
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from ..errors import InputError
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


class ErrorLimits(NamedTuple):
    """How large errors may be.

    Parameters
    ----------
    depth, across : numpy.ndarray
        m, at each of some depths; infinite without a limit.
    words : str
        Whose limits they are.
    """

    depth: Floats
    across: Floats
    words: str


def error_limits(order: Order | str | None, tolerance: float | None, depth: ArrayLike) -> ErrorLimits:
    """The largest errors by an order or a tolerance, one of which is given.

    Parameters
    ----------
    order : Order or str, optional
        Or the name of one of IHO S-44: an error may be as large as its TVU and THU.
    tolerance : float, optional
        The largest error of depth, m.
    depth : array_like
        m, positive down.

    Returns
    -------
    ErrorLimits

    Raises
    ------
    InputError
        If both are given or neither, the order is unknown, or the tolerance is no positive number.

    Examples
    --------
    >>> error_limits("Special", None, [10.0, 100.0]).depth.round(2)
    array([0.26, 0.79])
    """
    if (order is None) == (tolerance is None):
        raise InputError("give an order, or a tolerance in metres, and not both")
    below = np.asarray(depth, dtype=np.float64)
    if tolerance is not None:
        if not (np.isfinite(tolerance) and tolerance > 0.0):
            raise InputError(f"tolerance is {tolerance:g} m: a number above 0 would be right")
        every, none = np.full(below.shape, float(tolerance)), np.full(below.shape, np.inf)
        return ErrorLimits(every, none, f"a tolerance of {tolerance:g} m")
    chosen = order if isinstance(order, Order) else named_orders([str(order)])[str(order)]
    return ErrorLimits(np.asarray(chosen.tvu(below)), np.asarray(chosen.thu(below)), f"the TVU of order {chosen.name}")


def named_orders(names: Iterable[str], known: Mapping[str, Order] | None = None) -> dict[str, Order]:
    """The orders of some names, of IHO S-44 where nothing else is given.

    Raises
    ------
    InputError
        If a name is unknown.
    """
    of = read_orders() if known is None else known
    wanted = list(names)
    for name in wanted:
        if name not in of:
            raise InputError(f"order '{name}' is unknown: {', '.join(of)} are known")
    return {name: of[name] for name in wanted}


def limit_rows(orders: Mapping[str, Order]) -> Floats:
    """Fixed part and share of TVU and of THU of each order, shape (orders, 4); infinite where there is no limit."""
    rows = []
    for order in orders.values():
        row = []
        for fixed, share in ((order.tvu_fixed, order.tvu_share), (order.thu_fixed, order.thu_share)):
            row += [np.inf, 0.0] if fixed is None and share is None else [fixed or 0.0, share or 0.0]
        rows.append(row)
    return np.array(rows, dtype=np.float64).reshape(-1, 4)


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


def share_of(value: Floats, limit: Floats) -> Floats:
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
        float(np.fmax.reduce(share_of(value, np.asarray(limit)), axis=None, initial=np.nan))
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


def _judged_on(depth: ArrayLike, tvu_95: ArrayLike, thu_95: ArrayLike) -> tuple[Floats, ...]:
    given = {"depth": depth, "tvu_95": tvu_95, "thu_95": thu_95}
    return together(**{name: checked_array(name, values) for name, values in given.items()})


def _wet(depth: ArrayLike) -> Floats:
    """Depths, with those that dry as 0."""
    return np.maximum(checked_array("depth", depth), 0.0)
