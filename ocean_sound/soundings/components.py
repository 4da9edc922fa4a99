"""What else makes a sounding uncertain: positioning, motion, ranging, draught, tide, as the survey states them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from statistics import NormalDist
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from ..errors import InputError
from . import _arguments
from .radius import TVU_FACTOR, thu_95_from_covariance

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping
    from os import PathLike

    from numpy.typing import ArrayLike, NDArray

    Floats = NDArray[np.float64]

KINDS = ("vertical", "horizontal")
"""What a component moves: the depth, or the position by as much in all directions."""

_PARTS = ("fixed", "fixed_per_degree", "share", "share_per_degree")
_SOURCE = "source"
_STATED_LEVEL = 95.0  # per cent: the level for which S-44 gives the factor

# Nodes of the table that `together` makes: straight lines between them are within 0.3 %.
_ANGLES = np.arange(0.0, 85.1, 2.5)  # degrees
_DEPTHS = np.concatenate(([0.0], np.geomspace(0.5, 12_000.0, 80)))  # m


@dataclass(frozen=True)
class Component:
    """One cause of uncertainty other than the speed of sound.

    Its size is, of the depth d below the water surface and the beam's angle a from the vertical in degrees,

        hypot(fixed + fixed_per_degree a, (share + share_per_degree a) d)

    Parameters
    ----------
    name : str
    kind : str
        ``vertical`` or ``horizontal``; a horizontal one is alike in all directions.
    fixed : float
        The part that is alike at all depths, m.
    share : float
        The part that grows with depth, as a share of it.
    fixed_per_degree, share_per_degree : float
        What each degree of beam angle adds to these.
    k : float, optional
        How many standard uncertainties the size is; of a horizontal one, along any one axis.
    level : float, optional
        Or with how many per cent of normal errors it is not exceeded: those of depth, or horizontal distances.
    title : str
        What it is, or where it is stated.

    Raises
    ------
    InputError
        If a number can't be, all parts are 0, or not one of `k` and `level` is given.

    Examples
    --------
    >>> Component("tide", "vertical", fixed=0.196, level=95.0).sigma(20.0)
    0.1
    """

    name: str
    kind: str
    fixed: float = 0.0
    share: float = 0.0
    fixed_per_degree: float = 0.0
    share_per_degree: float = 0.0
    k: float | None = None
    level: float | None = None
    title: str = ""

    def __post_init__(self) -> None:
        where = f"component '{self.name}'"
        if self.kind not in KINDS:
            raise InputError(f"{where}: field 'kind' is {self.kind!r}: give {' or '.join(map(repr, KINDS))}")
        for name in _PARTS:
            value = getattr(self, name)
            if not (np.isfinite(value) and value >= 0.0):
                raise InputError(f"{where}: field '{name}' is {value:g}: give a number of at least 0")
        if not any(getattr(self, name) for name in _PARTS):
            raise InputError(f"{where}: has no size: give at least one of {', '.join(_PARTS)} above 0")
        if (self.k is None) == (self.level is None):
            found = "neither 'k' nor 'level' is given" if self.k is None else "both 'k' and 'level' are given"
            raise InputError(f"{where}: {found}: give one, such as k = 1 for a standard uncertainty or level = 95")
        if self.k is not None and not 0.0 < self.k < np.inf:
            raise InputError(f"{where}: field 'k' is {self.k:g}: give a number above 0")
        if self.level is not None and not 0.0 < self.level < 100.0:
            raise InputError(f"{where}: field 'level' is {self.level:g}: give per cent above 0 and below 100")

    @property
    def factor(self) -> float:
        """How many standard uncertainties the size is.

        By a level: of a normal error in one dimension, 1.96 for 95 % (IHO S-44, edition 6.0.0, section 2.6); of a
        horizontal distance with equal normal errors along two axes, the root of -2 ln(1 - level), 2.45 for 95 %.
        """
        if self.k is not None:
            return self.k
        chance = (self.level or 0.0) / 100.0
        if self.kind == "horizontal":
            return float(np.sqrt(-2.0 * np.log1p(-chance)))
        return TVU_FACTOR if self.level == _STATED_LEVEL else NormalDist().inv_cdf(0.5 + 0.5 * chance)

    def sigma(self, depth: ArrayLike, angle: ArrayLike = 0.0) -> Any:
        """Its standard uncertainty (k = 1), m; of a horizontal one along any one axis.

        Parameters
        ----------
        depth : array_like
            Depth below the water surface, m; what dries (negative) counts as 0.
        angle : array_like
            Angle of the beam from the vertical, degrees, of either sign.

        Returns
        -------
        float or numpy.ndarray
            In the broadcast shape; NaN where an argument is.

        Raises
        ------
        InputError
            If an argument is infinite or they do not broadcast.
        """
        return _arguments.given_back(np.sqrt(variance_by(self.coefficients, depth, angle)))

    @property
    def coefficients(self) -> Floats:
        """Of its variance, as `variance_by` takes them; those of independent components add up."""
        a, b, c, d = (getattr(self, name) / self.factor for name in _PARTS)
        return np.array([a * a, 2.0 * a * b, b * b, c * c, 2.0 * c * d, d * d])


def variance_by(coefficients: Floats, depth: ArrayLike, angle: ArrayLike = 0.0) -> Any:
    """Variance, m2, of which six coefficients are known: q0 + q1 a + q2 a² + (q3 + q4 a + q5 a²) d².

    Parameters
    ----------
    coefficients : numpy.ndarray, shape (6,)
    depth, angle
        As for `Component.sigma`.

    Raises
    ------
    InputError
        As `Component.sigma` does.

    Examples
    --------
    >>> variance_by(np.array([0.01, 0.0, 0.0, 1e-4, 0.0, 0.0]), [0.0, 10.0])
    array([0.01, 0.02])
    """
    angles = np.abs(np.asarray(angle, dtype=np.float64))
    d, a = _arguments.together(depth=_arguments.checked_array("depth", depth), angle=angles)
    q = coefficients
    below = np.maximum(d, 0.0)
    return _arguments.given_back(q[0] + a * (q[1] + a * q[2]) + below * below * (q[3] + a * (q[4] + a * q[5])))


@dataclass(frozen=True)
class Components:
    """All that makes soundings uncertain besides the speed of sound; the causes are independent of each other.

    Parameters
    ----------
    parts : tuple of Component
        Each with a name of its own; iterating over the whole gives them.
    source : str
        Where they are stated.

    Raises
    ------
    InputError
        If two have one name.

    Examples
    --------
    >>> others = Components(
    ...     (
    ...         Component("draught", "vertical", fixed=0.03, k=1.0),
    ...         Component("tide", "vertical", fixed=0.04, k=1.0),
    ...         Component("positioning", "horizontal", fixed=1.0, level=95.0),
    ...     )
    ... )
    >>> others.vertical(20.0), others.tvu_95(20.0, 0.0, 0.12**2)
    (0.05, 0.2548)
    """

    parts: tuple[Component, ...]
    source: str = ""

    def __post_init__(self) -> None:
        object.__setattr__(self, "parts", tuple(self.parts))
        names = [part.name for part in self.parts]
        for name in names:
            if names.count(name) > 1:
                raise InputError(f"component '{name}' is given {names.count(name)} times: give each a name of its own")

    def __iter__(self) -> Iterator[Component]:
        return iter(self.parts)

    def __len__(self) -> int:
        return len(self.parts)

    def coefficients(self, kind: str) -> Floats:
        """Six coefficients of the variance of all components of one kind together, as `variance_by` takes them."""
        own = [part.coefficients for part in self.parts if part.kind == kind]
        total: Floats = np.sum([np.zeros(6), *own], axis=0)
        return total

    def vertical(self, depth: ArrayLike, angle: ArrayLike = 0.0) -> Any:
        """Standard uncertainty (k = 1) of depth, m, as `Component.sigma`; 0 without such components."""
        return _arguments.given_back(np.sqrt(variance_by(self.coefficients("vertical"), depth, angle)))

    def horizontal(self, depth: ArrayLike, angle: ArrayLike = 0.0) -> Any:
        """Standard uncertainty (k = 1) of position along any one axis, m, as `vertical`."""
        return _arguments.given_back(np.sqrt(variance_by(self.coefficients("horizontal"), depth, angle)))

    def tvu_95(self, depth: ArrayLike, angle: ArrayLike, depth_variance: ArrayLike) -> Any:
        """TVU (95 %) of these and of the speed of sound together, m.

        Parameters
        ----------
        depth, angle
            As for `Component.sigma`.
        depth_variance : array_like
            Variance of depth by the speed of sound, m2; NaN where it is unknown.

        Returns
        -------
        float or numpy.ndarray
            1.96 times the root of the sum of all variances.

        Raises
        ------
        InputError
            If a variance is negative, or the arguments do not broadcast.
        """
        own, speed = self._with(_arguments.checked_array("depth_variance", depth_variance), "vertical", depth, angle)
        return _arguments.given_back(TVU_FACTOR * np.sqrt(own + speed))

    def thu_95(self, depth: ArrayLike, angle: ArrayLike, beam_variance: ArrayLike) -> Any:
        """THU (95 %) of these and of the speed of sound together, m: the radius that holds 95 %.

        Parameters
        ----------
        depth, angle
            As for `Component.sigma`.
        beam_variance : array_like
            Variance of the horizontal distance along the beam by the speed of sound, m2, which moves a sounding in no
            other direction.

        Returns
        -------
        float or numpy.ndarray

        Raises
        ------
        InputError
            As `tvu_95` does.
        """
        own, speed = self._with(_arguments.checked_array("beam_variance", beam_variance), "horizontal", depth, angle)
        return thu_95_from_covariance(own + speed, own)

    def _with(self, variance: Floats, kind: str, depth: ArrayLike, angle: ArrayLike) -> tuple[Floats, ...]:
        own = np.asarray(variance_by(self.coefficients(kind), depth, angle))
        return _arguments.together(components=own, variance=variance)


def together(components: Iterable[Component]) -> tuple[Floats, Floats, Floats, Floats]:
    """All components as one table over tangents of angles and depths, for the kernels.

    Returns
    -------
    tuple of numpy.ndarray
        Tangents of angles (up to 85 degrees), depths (up to 12,000 m), and standard uncertainties of depth and of
        position along any one axis, m, of shape (tangents, depths). Of a side over which nothing changes there is one
        value, which holds everywhere. Straight lines between are within 0.3 %.

    Examples
    --------
    >>> tangents, depths, vertical, _ = together([Component("tide", "vertical", fixed=0.1, k=1)])
    >>> tangents.size, depths.size, vertical.item()
    (1, 1, 0.1)
    """
    whole = Components(tuple(components))
    angles = _ANGLES if any(part.fixed_per_degree or part.share_per_degree for part in whole) else _ANGLES[:1]
    depths = _DEPTHS if any(part.share or part.share_per_degree for part in whole) else _DEPTHS[:1]
    grid = depths[np.newaxis, :], angles[:, np.newaxis]
    vertical, horizontal = (np.asarray(find(*grid)) for find in (whole.vertical, whole.horizontal))
    return np.tan(np.radians(angles)), depths.copy(), vertical, horizontal


def read_components(path: str | PathLike[str]) -> Components:
    """The components that a TOML file states.

    Parameters
    ----------
    path : str or path-like
        For each component a table by its name, with the fields of `Component`; at the top, if known, the `source`::

            source = "calibration of this spring"

            [heave]
            kind = "vertical"
            fixed = 0.05
            level = 95

            [roll]
            kind = "vertical"
            share_per_degree = 0.00002
            k = 1

    Returns
    -------
    Components

    Raises
    ------
    InputError
        The file can't be read or is not TOML, or a field is missing, unknown or impossible; one line for each.
    """
    from ..files.fields import load_toml  # pydantic is slow to load

    return components_from_fields(load_toml(path, error=InputError), str(path))


def components_from_fields(tables: Mapping[str, Any], where: str = "components") -> Components:
    """Components from a mapping laid out like the file of `read_components`.

    Parameters
    ----------
    tables : mapping
    where : str
        What messages call it.

    Raises
    ------
    InputError
        As `read_components` does.

    Examples
    --------
    >>> components_from_fields({"tide": {"kind": "vertical", "fixed": 0.1, "k": 1}}).vertical([5.0, 50.0])
    array([0.1, 0.1])
    """
    from ..files.fields import checked

    source = tables.get(_SOURCE, where)
    parts: list[Component] = []
    faults: list[str] = []
    if not isinstance(source, str):
        faults.append(f"{where}: field '{_SOURCE}' is {source!r}: give a text")
    for name, table in tables.items():
        if name == _SOURCE:
            continue
        if not isinstance(table, dict):
            faults.append(
                f"{where}: field '{name}' is {table!r}: give a table [{name}] with kind, a size, and k or level"
            )
            continue
        try:
            fields = checked(_model(), table, f"component '{name}'", error=InputError).model_dump()
            parts.append(Component(name, **fields))
        except InputError as fault:
            faults += [f"{where}: {line}" for line in str(fault).splitlines()]
    if not faults and not parts:
        faults.append(f"{where}: no component is in it: give a table such as [tide] with kind, fixed, and k or level")
    if faults:
        raise InputError("\n".join(faults))
    return Components(tuple(parts), str(source))


@lru_cache(maxsize=1)
def _model() -> Any:
    from pydantic import Field

    from ..files.fields import Fields

    class Stated(Fields):
        kind: Literal["vertical", "horizontal"]
        fixed: float = Field(default=0.0, ge=0)
        share: float = Field(default=0.0, ge=0, le=1)
        fixed_per_degree: float = Field(default=0.0, ge=0)
        share_per_degree: float = Field(default=0.0, ge=0, le=1)
        k: float | None = Field(default=None, gt=0)
        level: float | None = Field(default=None, gt=0, lt=100)
        title: str = ""

    return Stated
