"""Completing a cast: salinity where it has none, water above its first and below its last level, each value marked."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ..grids import Climatology
from .cast import AS_MEASURED, ASSUMED, MISSING, NOT_EVALUATED, Cast, plain_fields
from .donors import Source, donor_of, usable_water
from .extending import SCALE_ABOVE, SCALE_BELOW, Above, Below, Extension, spread_of_lent

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

ASSUMED_SALINITY_UNCERTAINTY = 1.0
"""Most of the open ocean lies within 1 of a salinity that one would assume there (common practice)."""
# Salinity by a T-S relation: the scatter about it in one region, and beyond the neighbour's temperatures (common
# practice).
_RELATION, _BEYOND_RELATION = 0.1, 0.3
_SALINITY_RANGE = (0.0, 500.0)


def complete_cast(
    cast: Cast,
    *,
    salinity: float | Source | None = None,
    above: Above | None = None,
    below: Below | Sequence[Below] | None = None,
    to_depth: float | None = None,
    scale: float | None = None,
    temperature_uncertainty: float | None = None,
    salinity_uncertainty: float | None = None,
) -> Cast:
    """A cast with the water that it did not measure, each added value marked as such.

    Parameters
    ----------
    cast : Cast
        Never changed. Of a cast that goes down and up the longer way is extended.
    salinity : float, Cast or Climatology, optional
        For a cast with neither usable salinity nor usable conductivity: a constant (practical salinity), a neighbouring
        cast whose T-S relation serves, or a climatology whose salinity at each depth serves. Others are left alone.
    above : "first", Cast or Climatology, optional
        What to put between the surface and the first usable level: the water of that level, or lent water.
    below : "constant", Cast, Climatology, or a sequence of these, optional
        What to put below the last usable level: its own temperature and salinity, or lent water. Of a sequence each
        goes on where the one before ended.
    to_depth : float, optional
        How deep to extend, m; needed for "constant". Lent water otherwise goes down as far as it reaches.
    scale : float, optional
        Distance, m, over which the difference at the join dies away by a factor e; 50 above, 300 below where not given.
    temperature_uncertainty, salinity_uncertainty : float, optional
        Standard uncertainty (k = 1) of the added water far from the cast; stated defaults otherwise, see notes.

    Returns
    -------
    Cast
        The measured levels as they were; added levels in their place, flagged 2 (not evaluated), with `origins` and
        `uncertainties`; a note for each thing done. A cast with nothing to complete comes back as it is.

    Raises
    ------
    InputError
        A cast without usable levels, a source that does not reach, has no salinity or does not know the place, or an
        option that is impossible.

    Notes
    -----
    Lent water joins without a step: T(z) = T_lent(z) + (T_cast - T_lent)(join) exp(-|z - join| / scale), salinity
    alike. That is the expected anomaly of a Gauss-Markov process known at the join, whose uncertainty is
    u(z) sqrt(1 - exp(-2 |z - join| / scale)): nothing at the join, all of u(z) far away. By default u(z) falls from
    2.05 degC and 0.31 at the surface to 0.05 degC and 0.01 far down, over 400 m; where the join shows a larger
    difference, it is scaled up to that. Carried water is uncertain by the distance times a gradient. These defaults
    are common practice, not published numbers.

    A cast that measured the speed of sound is extended by the speed of the lent water in the same way, or with constant
    temperature and salinity by the effect of pressure alone.

    Examples
    --------
    >>> cast = Cast(id="X1", values={"depth": [2.0, 400.0], "temperature": [18.0, 9.0]}, latitude=40.0, longitude=-30.0)
    >>> whole = complete_cast(cast, salinity=35.5, above="first", below="constant", to_depth=600.0)
    >>> whole.depth.tolist(), whole.temperature.tolist()
    ([0.0, 2.0, 400.0, 600.0], [18.0, 18.0, 9.0, 9.0])
    >>> whole.origins["temperature"].tolist(), whole.origins["salinity"].tolist()
    ([1, 0, 0, 2], [1, 5, 5, 2])
    >>> whole.notes[0]
    'salinity assumed: 35.5'
    """
    sources = _checked(cast, below, to_depth, scale, temperature_uncertainty, salinity_uncertainty)
    spread = {"temperature": temperature_uncertainty, "salinity": salinity_uncertainty}
    if above is not None and above != "first" and not isinstance(above, Cast | Climatology):
        raise InputError(f"above is {above!r}; 'first', a cast or a climatology would be right")
    if salinity is not None:
        cast = _with_salinity(cast, salinity, salinity_uncertainty)
    if above is not None:
        cast = Extension(cast, scale or SCALE_ABOVE, spread).up(above)
    for source in sources:
        cast = Extension(cast, scale or SCALE_BELOW, spread).down(source, to_depth)
    if sources and to_depth is not None:
        _require_reach(cast, to_depth)
    return cast


def _checked(
    cast: Cast,
    below: Below | Sequence[Below] | None,
    to_depth: float | None,
    scale: float | None,
    *spreads: float | None,
) -> list[Below]:
    """The sources below as a list, all options looked at."""
    where = f"cast {cast.id!r}"
    sources: list[Below] = []
    if below is not None:
        alone = isinstance(below, str | Cast | Climatology) or not isinstance(below, Sequence)
        sources = [below] if alone else list(below)  # type: ignore[list-item,arg-type]
    for source in sources:
        if source != "constant" and not isinstance(source, Cast | Climatology):
            raise InputError(f"below is {source!r}; 'constant', a cast or a climatology would be right")
    if "constant" in [source for source in sources if isinstance(source, str)] and to_depth is None:
        raise InputError(f"{where}: below='constant' has no end of its own; give to_depth=")
    if to_depth is not None and not sources:
        raise InputError(f"{where}: to_depth is {to_depth:g}, but nothing to put below is given; give below=")
    for name, value in (("to_depth", to_depth), ("scale", scale)):
        if value is not None and not 0.0 < value < 12000.0:
            raise InputError(f"{name} is {value:g}; a number of metres above 0 and below 12000 would be right")
    for name, value in zip(("temperature", "salinity"), spreads, strict=True):
        if value is not None and not (value >= 0.0 and np.isfinite(value)):
            raise InputError(f"{name}_uncertainty is {value:g}; a finite number of 0 or more would be right")
    return sources


def _require_reach(cast: Cast, to_depth: float) -> None:
    reach = Extension(cast, SCALE_BELOW, {}).deepest
    if reach < to_depth - 0.5:
        raise InputError(
            f"cast {cast.id!r}: the water below reaches to {reach:.0f} m, not to {to_depth:g} m; add a source that "
            "goes deeper, or 'constant', as below=(source, 'constant')"
        )


def _with_salinity(cast: Cast, salinity: float | Source, uncertainty: float | None) -> Cast:
    """The cast with a salinity on every level that has a temperature."""
    measured = [name for name in ("salinity", "conductivity") if name in cast.values and cast.good(name).any()]
    if measured or "temperature" not in cast.values:
        return cast
    rows, depth, temperature, _ = usable_water(cast)
    found, spread = np.full(len(cast), np.nan), np.full(len(cast), np.nan)
    if isinstance(salinity, Cast | Climatology):
        donor = donor_of(salinity, cast)
        if donor.salinity is None:
            raise InputError(f"cast {cast.id!r}: {donor.words} has no salinity to lend")
        origin = donor.origin
        if isinstance(salinity, Cast):
            found[rows], outside = donor.salinity_of(temperature, depth)
            beyond = f"; {outside.sum()} levels outside its temperatures take the end's" if outside.any() else ""
            note = f"salinity by the T-S relation of {donor.words}{beyond}"
            spread[rows] = np.where(outside, _BEYOND_RELATION, _RELATION)
        else:
            found[rows] = donor.at(depth)[1]
            note = f"salinity at each depth from {donor.words}"
            spread[rows] = spread_of_lent("salinity", depth)
        if uncertainty is not None:
            spread[rows] = uncertainty
    else:
        low, high = _SALINITY_RANGE
        if not low <= salinity <= high:
            raise InputError(f"salinity is {salinity:g}; a practical salinity from {low:g} to {high:g} would be right")
        origin, note = ASSUMED, f"salinity assumed: {salinity:g}"
        found[rows] = salinity
        spread[rows] = ASSUMED_SALINITY_UNCERTAINTY if uncertainty is None else uncertainty
    if "salinity" in cast.values:
        note += "; that in the file has no usable value"
    there = np.isfinite(found)
    fields = plain_fields(cast)
    fields["values"]["salinity"] = found
    fields["flags"]["salinity"] = np.where(there, NOT_EVALUATED, MISSING).astype(np.int8)
    fields["origins"]["salinity"] = np.where(there, origin, AS_MEASURED).astype(np.int8)
    fields["uncertainties"]["salinity"] = spread
    return Cast(**(fields | {"notes": (*cast.notes, note)}))
