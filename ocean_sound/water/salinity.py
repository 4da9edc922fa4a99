"""Practical salinity from conductivity, and the Absolute Salinity and Conservative Temperature of TEOS-10."""

from __future__ import annotations

from typing import Any

import gsw
import numpy as np

from ..files.cf import attributes as cf_attributes
from ._arrays import elementwise

MS_CM_PER_S_M = 10.0


def absolute_salinity_of(salinity: Any, pressure: Any, latitude: Any, longitude: Any) -> Any:
    """Absolute Salinity (g/kg) of plain arrays: from the atlas where a position is known, else the Reference Salinity.

    The position is not known where latitude or longitude is missing or NaN, nor beyond 86 degrees south, where the
    atlas has no water.
    """
    reference = gsw.SR_from_SP(salinity)
    if latitude is None or longitude is None or np.isnan(latitude).all() or np.isnan(longitude).all():
        return reference
    known = gsw.SA_from_SP(salinity, pressure, longitude, latitude)
    gaps = np.isnan(known)
    return np.where(gaps, reference + 0.0 * pressure, known) if gaps.any() else known


def absolute_salinity(
    salinity: Any, pressure: Any, *, latitude: Any | None = None, longitude: Any | None = None
) -> Any:
    """Absolute Salinity of TEOS-10 from practical salinity.

    Parameters
    ----------
    salinity
        Practical salinity (PSS-78), from 0; scalar, array or xarray object.
    pressure
        Sea pressure, dbar.
    latitude, longitude
        Degrees; the composition of sea water varies from place to place. Without a position the result is the
        Reference Salinity, 35.16504/35 times the practical salinity.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Absolute Salinity, g/kg, of the broadcast shape.

    Raises
    ------
    InputError
        If a value is impossible.

    Notes
    -----
    McDougall et al. (2012), Ocean Science 8, 1123-1134, atlas of gsw (with its own relation for the
    Baltic). Valid for salinity 0 to 42.

    Examples
    --------
    >>> round(absolute_salinity(35.0, 0.0), 5)
    35.16504
    >>> round(absolute_salinity(7.0, 10.0, latitude=58.0, longitude=20.0), 4)
    7.1026
    """

    def core(*, salinity: Any, pressure: Any, latitude: Any = None, longitude: Any = None) -> Any:
        return absolute_salinity_of(salinity, pressure, latitude, longitude)

    known = latitude is not None and longitude is not None
    return elementwise(
        core,
        {"salinity": salinity, "pressure": pressure, "latitude": latitude, "longitude": longitude},
        name="absolute_salinity",
        attributes={
            **cf_attributes("absolute_salinity"),
            "long_name": "Absolute Salinity" if known else "Reference Salinity, taken for Absolute Salinity",
        },
    )


def conservative_temperature(absolute_salinity: Any, temperature: Any, pressure: Any) -> Any:
    """Conservative Temperature of TEOS-10.

    Parameters
    ----------
    absolute_salinity
        Absolute Salinity, g/kg; scalar, array or xarray object.
    temperature
        In-situ temperature, degrees Celsius on ITS-90.
    pressure
        Sea pressure, dbar.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Conservative Temperature, degrees Celsius, of the broadcast shape.

    Raises
    ------
    InputError
        If a value is impossible.

    Notes
    -----
    IOC, SCOR and IAPSO (2010), TEOS-10 manual, section 3.3.

    Examples
    --------
    >>> round(conservative_temperature(34.7118, 28.7856, 10.0), 5)
    28.80992
    """

    def core(*, absolute_salinity: Any, temperature: Any, pressure: Any) -> Any:
        return gsw.CT_from_t(absolute_salinity, temperature, pressure)

    return elementwise(
        core,
        {"absolute_salinity": absolute_salinity, "temperature": temperature, "pressure": pressure},
        name="conservative_temperature",
        attributes=cf_attributes("conservative_temperature"),
    )


def salinity_from_conductivity(conductivity: Any, temperature: Any, pressure: Any) -> Any:
    """Practical salinity from conductivity.

    Parameters
    ----------
    conductivity
        S/m (10 mS/cm = 1 S/m); scalar, array or xarray object.
    temperature
        In-situ temperature, degrees Celsius on ITS-90.
    pressure
        Sea pressure, dbar.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Practical salinity (PSS-78), of the broadcast shape.

    Raises
    ------
    InputError
        If a value is impossible; a conductivity above 20 S/m is one in mS/cm.

    Notes
    -----
    PSS-78 (UNESCO 1983), valid for salinity 2 to 42, with the extension of Hill et al. (1986) below 2, as in gsw.

    Examples
    --------
    >>> round(salinity_from_conductivity(3.45487, 28.7856, 10.0), 6)
    20.00987
    """

    def core(*, conductivity: Any, temperature: Any, pressure: Any) -> Any:
        return gsw.SP_from_C(conductivity * MS_CM_PER_S_M, temperature, pressure)

    return elementwise(
        core,
        {"conductivity": conductivity, "temperature": temperature, "pressure": pressure},
        name="salinity",
        attributes=cf_attributes("salinity"),
    )


def conductivity_from_salinity(salinity: Any, temperature: Any, pressure: Any) -> Any:
    """Conductivity from practical salinity: the inverse of `salinity_from_conductivity`.

    Parameters
    ----------
    salinity
        Practical salinity (PSS-78), from 0; scalar, array or xarray object.
    temperature
        In-situ temperature, degrees Celsius on ITS-90.
    pressure
        Sea pressure, dbar.

    Returns
    -------
    float, numpy.ndarray or xarray.DataArray
        Conductivity, S/m, of the broadcast shape.

    Raises
    ------
    InputError
        If a value is impossible.

    Notes
    -----
    PSS-78 solved for conductivity, as in gsw. Standard sea water, salinity 35 at 15 degC (IPTS-68),
    conducts 4.2914 S/m.

    Examples
    --------
    >>> round(conductivity_from_salinity(35.0, 15.0 / 1.00024, 0.0), 4)
    4.2914
    """

    def core(*, salinity: Any, temperature: Any, pressure: Any) -> Any:
        return gsw.C_from_SP(salinity, temperature, pressure) / MS_CM_PER_S_M

    return elementwise(
        core,
        {"salinity": salinity, "temperature": temperature, "pressure": pressure},
        name="conductivity",
        attributes=cf_attributes("conductivity"),
    )
