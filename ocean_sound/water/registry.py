"""The one registry of equations."""

from __future__ import annotations

import difflib
from typing import Any

from ..errors import InputError
from . import (
    belogolskii,
    bilaniuk_wong,
    coppens,
    del_grosso,
    leroy,
    mackenzie,
    marczak,
    medwin,
    teos10,
    unesco,
)
from .equation import Equation

DEFAULT_EQUATION = "teos10"

_FILES: tuple[Any, ...] = (
    teos10,
    unesco,
    del_grosso,
    mackenzie,
    medwin,
    coppens,
    leroy,
    bilaniuk_wong,
    marczak,
    belogolskii,
)
_EQUATIONS: dict[str, Equation] = {equation.name: equation for file in _FILES for equation in file.EQUATIONS}


def equations() -> dict[str, Equation]:
    """All equations for the speed of sound, by name.

    Returns
    -------
    dict of str to Equation
        A new dictionary each time, in the order in which they are shown side by side.

    Examples
    --------
    >>> sorted(equations())[:4]
    ['belogolskii', 'bilaniuk-wong', 'coppens', 'del-grosso']
    """
    return dict(_EQUATIONS)


def find_equation(name: str | Equation) -> Equation:
    """The equation of a name (an `Equation` is handed back as it is).

    Raises
    ------
    InputError
        If there is none; the message lists those that are known, and the nearest.

    Examples
    --------
    >>> find_equation("unesco").vertical
    'pressure'
    """
    if isinstance(name, Equation):
        return name
    found = _EQUATIONS.get(name)
    if found is None:
        near = difflib.get_close_matches(str(name), _EQUATIONS, n=1)
        suggestion = f"did you mean {near[0]!r}? " if near else ""
        raise InputError(f"equation: {name!r} is unknown; {suggestion}known are {', '.join(_EQUATIONS)}")
    return found
