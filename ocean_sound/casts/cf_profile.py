"""One cast or profile in CF netCDF: variables along one dimension, by standard name, else by the package's names."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import CastFileError, InputError
from ..files.cf import attributes as cf_attributes
from .building import build_cast
from .cast import FLAGS, MEASURED, NO_TIME, VARIABLES, VERTICAL, Cast, utc
from .names import plain_words
from .netcdf import floats, text, text_of
from .units import from_name, to_ours

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from .origin import Origin

_STANDARD = {cf_attributes(name)["standard_name"]: name for name in VARIABLES} | {
    "sea_water_salinity": "salinity",
    "height": "height",
}
_KEPT = {"equation", "title", "institution", "project", "platform", "platform_code", "instrument", "license"}


def read_cf(dataset: Any, origin: Origin) -> Cast:
    """Read one cast from CF netCDF.

    Parameters
    ----------
    dataset : netCDF4.Dataset
        Open, without masks.
    origin : Origin
        For names and messages.

    Returns
    -------
    Cast

    Raises
    ------
    CastFileError
        No depth or pressure, nothing measured, or more than one cast in the file.
    """
    where = origin.where
    if not dataset.variables:
        raise CastFileError(f"{where}: holds no variable: it is empty or cut short; fetch it again")
    chosen = _choose(dataset)
    if not any(name in chosen for name in (*VERTICAL, "height")):
        held = ", ".join(dataset.variables)
        raise CastFileError(
            f"{where}: no variable with the standard name of depth ({cf_attributes('depth')['standard_name']}) or of "
            f"sea pressure ({cf_attributes('pressure')['standard_name']}); it holds {held}"
        )
    if not any(name in chosen for name in MEASURED):
        held = ", ".join(dataset.variables)
        raise CastFileError(f"{where}: no temperature, salinity, conductivity or sound speed; it holds {held}")
    _check_shape(dataset, chosen, where)
    values, flags, notes = {}, {}, []
    for name, key in chosen.items():
        variable = dataset.variables[key]
        column = np.atleast_1d(np.squeeze(floats(variable)))
        if name == "depth" and text_of(variable, "positive").lower() == "up":
            name = "height"  # noqa: PLW2901
        try:
            unit = text_of(variable, "units") or None
            column, converted = to_ours(name, column, unit, where=f"{where}: variable {key}", settled=True)
        except InputError as error:
            raise CastFileError(str(error)) from error
        ours = "depth" if name == "height" else name
        values[ours], turned = from_name(name, column)
        notes += [line for line in (converted, turned) if line]
        flag = _flags(dataset, key, where)
        if flag is not None:
            flags[ours] = flag
    fields = _scalars(dataset, origin)
    kept = text_of(dataset, "notes")
    fields["notes"] = (*(line for line in kept.split("\n") if line), *notes)
    return build_cast(where, values=values, flags=flags, **fields)


def _choose(dataset: Any) -> dict[str, str]:
    """Our name -> the variable that holds it: by standard name first, then by our own name."""
    chosen: dict[str, str] = {}
    for key, variable in dataset.variables.items():
        name = _STANDARD.get(text_of(variable, "standard_name"))
        if name is not None and variable.ndim:
            chosen.setdefault(name, key)
    for name in VARIABLES:
        if name in dataset.variables and dataset.variables[name].ndim:
            chosen.setdefault(name, name)
    return {name: chosen[name] for name in (*VARIABLES, "height") if name in chosen}


def _check_shape(dataset: Any, chosen: dict[str, str], where: str) -> None:
    """All variables lie along one dimension; others may be there with length one."""
    long: dict[str, int] = {}
    for key in chosen.values():
        variable = dataset.variables[key]
        long |= {name: size for name, size in zip(variable.dimensions, variable.shape, strict=True) if size != 1}
    if len(long) > 1:
        sizes = ", ".join(f"{name} {size}" for name, size in long.items())
        raise CastFileError(
            f"{where}: holds more than one cast (dimensions {sizes}); only files of one cast each are read here"
        )
    kind = text_of(dataset, "featureType").lower()
    counted = [key for key, variable in dataset.variables.items() if "sample_dimension" in variable.ncattrs()]
    if counted and dataset.variables[counted[0]].size > 1:
        raise CastFileError(
            f"{where}: holds {dataset.variables[counted[0]].size} casts of the feature type {kind or 'unknown'}; "
            "only files of one cast each are read here"
        )


def _flags(dataset: Any, key: str, where: str) -> NDArray[np.int8] | None:
    """The companion of QARTOD flags. Flags of another scheme are no reason to take bad values for good ones."""
    for name in [*text_of(dataset.variables[key], "ancillary_variables").split(), f"{key}_flag"]:
        if name not in dataset.variables:
            continue
        variable = dataset.variables[name]
        own = np.asarray(getattr(variable, "flag_values", []))
        if own.shape == (len(FLAGS),) and (own == FLAGS).all():
            return np.atleast_1d(np.squeeze(np.asarray(variable[:]))).astype(np.int8)
        if "flag" in text_of(variable, "standard_name") or own.size:
            raise CastFileError(
                f"{where}: the flags of {key} ({name}) are not QARTOD's ({', '.join(map(str, FLAGS))}): another scheme "
                "is not read here, and without its flags the cast can't be trusted"
            )
    return None


def _scalars(dataset: Any, origin: Origin) -> dict[str, Any]:
    by_standard = {
        text_of(variable, "standard_name"): variable for variable in dataset.variables.values() if variable.size == 1
    }

    def find(name: str) -> Any:
        own = dataset.variables.get(name)
        return own if own is not None and own.size == 1 else by_standard.get(name)

    fields: dict[str, Any] = {"source": origin.source, "time": NO_TIME, "id": origin.name}
    for kind in ("latitude", "longitude"):
        variable = find(kind)
        if variable is not None:
            fields[kind] = float(np.ravel(floats(variable))[0])
    if (variable := find("time")) is not None:
        fields["time"] = _time(variable)
    ident = next((v for v in dataset.variables.values() if text_of(v, "cf_role") == "profile_id"), None)
    if ident is not None:
        fields["id"] = text(ident[()] if ident.ndim == 0 else np.squeeze(np.asarray(ident[:]))[()]) or origin.name
    attributes = {}
    for key in dataset.ncattrs():
        value = text_of(dataset, key)
        if value and (key.startswith("cast_") or key.lower() in _KEPT):
            attributes[plain_words(key.removeprefix("cast_")).replace(" ", "_")] = value
    fields["attributes"] = attributes
    return fields


def _time(variable: Any) -> np.datetime64:
    import netCDF4

    value = np.ravel(floats(variable))[0]
    if not np.isfinite(value):
        return NO_TIME
    calendar = text_of(variable, "calendar") or "standard"
    moment: Any = netCDF4.num2date(
        value, text_of(variable, "units"), calendar, only_use_cftime_datetimes=False, only_use_python_datetimes=True
    )
    return utc(moment.replace(tzinfo=None))
