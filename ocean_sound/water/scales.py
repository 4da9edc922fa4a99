"""Temperature scales: all temperatures come in on ITS-90, and papers before 1990 mean IPTS-68."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from ..files.cf import attributes as cf_attributes
from ._arrays import elementwise

if TYPE_CHECKING:
    from collections.abc import Callable

#: t68 = 1.00024 t90 between -2 and 40 degC; Saunders (1990), WOCE Newsletter 10.
RATIO_68_TO_90 = 1.00024


def _converted(conversion: Callable[[Any], Any], temperature: Any, scale: str) -> Any:
    # No limits here: raw columns of a file are converted before anything is flagged.
    return elementwise(
        lambda *, temperature: conversion(temperature),
        {"temperature": temperature},
        name="temperature",
        attributes={**cf_attributes("temperature"), "long_name": f"temperature on {scale}"},
        limits={},
    )


def t68_from_t90(temperature: Any) -> Any:
    """Temperature on IPTS-68 from ITS-90, both in degrees Celsius: t68 = 1.00024 t90.

    Parameters
    ----------
    temperature
        Degrees Celsius on ITS-90; scalar, array or xarray object, of any shape.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Degrees Celsius on IPTS-68, of the same shape.

    Notes
    -----
    Valid for -2 to 40 degC within the uncertainty of either scale. Source: Saunders (1990), WOCE Newsletter 10.

    Examples
    --------
    >>> t68_from_t90(10.0)
    10.0024
    """
    return _converted(lambda t: t * RATIO_68_TO_90, temperature, "IPTS-68")


def t90_from_t68(temperature: Any) -> Any:
    """Temperature on ITS-90 from IPTS-68 (data from 1968 to 1989), both in degrees Celsius: t90 = t68 / 1.00024.

    Parameters
    ----------
    temperature
        Degrees Celsius on IPTS-68; scalar, array or xarray object, of any shape.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Degrees Celsius on ITS-90, of the same shape.

    Notes
    -----
    Valid for -2 to 40 degC. Source: Saunders (1990), WOCE Newsletter 10.

    Examples
    --------
    >>> round(t90_from_t68(29.0), 6)
    28.993042
    """
    return _converted(lambda t: t / RATIO_68_TO_90, temperature, "ITS-90")


def t90_from_t48(temperature: Any) -> Any:
    """Temperature on ITS-90 from IPTS-48 (data before 1968), both in degrees Celsius.

    Parameters
    ----------
    temperature
        Degrees Celsius on IPTS-48; scalar, array or xarray object, of any shape.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Degrees Celsius on ITS-90, of the same shape.

    Notes
    -----
    t68 = t48 - 4.4e-6 t48 (100 - t48), then t90 = t68 / 1.00024. Source: Fofonoff and Bryden (1975) for
    the first, Saunders (1990) for the second, together as in the TEOS-10 library.

    Examples
    --------
    >>> round(t90_from_t48(29.0), 6)
    28.983984
    """
    return _converted(lambda t: (t - 4.4e-6 * t * (100.0 - t)) / RATIO_68_TO_90, temperature, "ITS-90")
