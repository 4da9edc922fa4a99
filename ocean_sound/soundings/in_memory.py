"""Soundings of a dataset in memory corrected: the front door for people who work in Python."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import numpy as np

from ..casts import Cast
from ..errors import InputError
from ..profile import Profile
from .choosing import DEFAULT_MOST, Scales
from .columns import OUTPUTS
from .correcting import Options
from .orders import SWATH_NOTE, Order, named_orders, read_orders
from .reading import open_soundings
from .streaming import Job, corrector_for, stream
from .writing import About, attributes_beside

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray
    from numpy.typing import NDArray

    from .columns import PingBlock
    from .components import Component, Components


def correct_soundings(
    dataset: xarray.Dataset,
    profiles_or_casts: Profile | Cast | Sequence[Profile | Cast],
    *,
    options: Options | None = None,
    scales: Scales | None = None,
    as_it_was: bool = False,
    orders: Mapping[str, Order] | Sequence[str] | None = None,
    components: Components | Sequence[Component] = (),
    change: Mapping[str, Any] | float | None = None,
    corrected_with: Profile | None = None,
    most: int = DEFAULT_MOST,
    workers: int | None = None,
    **more: Any,
) -> xarray.Dataset:
    """Correct soundings for refraction, with what is known of each.

    Parameters
    ----------
    dataset : xarray.Dataset
        Beams on one dimension (`sounding`) or two (`ping`, `beam`): `two_way_travel_time` (s), `across_track_angle`
        (degrees, positive to starboard; without it every beam is vertical), `transducer_depth` (m), and what else
        `columns.INPUTS` names, such as `along_track_angle`, `surface_sound_speed`, `time`, `latitude`, `longitude`,
        `heading`, `water_level`, `transducer_height`. Never changed.
    profiles_or_casts : Profile, Cast, or a sequence of them
        Casts are turned into profiles as `Profile.from_cast` does.
    options : Options, optional
        How they are corrected; single ones may be given by keyword instead, as `array="curved"`.
    scales : Scales, optional
        Decorrelation time and length of the water, by which casts are chosen and blended; estimated from the casts
        where there are several.
    as_it_was : bool
        Whether only casts are used that were there when the ping was.
    orders : mapping of str to Order, or sequence of names, optional
        Which survey orders to judge against; those of IHO S-44 where not given.
    components : Components or sequence of Component
        The survey's other uncertainties.
    change : mapping or float, optional
        How the water changes; see `Corrector`.
    corrected_with : Profile, optional
        For soundings that were corrected before (`depth`, `across_track_distance`, `along_track_distance`): with what.
    most : int
        The largest number of casts blended for a sounding.
    workers : int, optional
        Threads; by default one for each usable processor.

    Returns
    -------
    xarray.Dataset
        All of the input, and the columns of `columns.OUTPUTS`: depth, distances, positions, the cast used, uncertainty
        from the speed of sound alone and together with the other components, the orders held, a flag and a reason. A
        sounding that can't be corrected is NaN. Attribute `notes` tells what was assumed; `table_error` (m) the largest
        error of the travel-time tables against exact tracing, which is arithmetic, not accuracy.

    Raises
    ------
    InputError
        If the dataset lacks something, there is no cast, or an option is none.

    Notes
    -----
    The water's layers are exact: speeds linear between levels. What counts as accuracy is in `tvu_95` and `thu_95`.
    Local rules and licensed practice decide whether a survey may be used for navigation.

    Examples
    --------
    >>> import numpy as np, xarray as xr
    >>> from ocean_sound.profile import Profile
    >>> angle = [[-60.0, 0.0, 60.0]]
    >>> beams = xr.Dataset(
    ...     {"two_way_travel_time": (("ping", "beam"), 2 * 50.0 / 1500.0 / np.cos(np.radians(angle))),
    ...      "across_track_angle": (("ping", "beam"), angle), "transducer_depth": ("ping", [2.0])}
    ... )
    >>> found = correct_soundings(beams, Profile([0, 100], [1500, 1500], [0.5, 0.5]), curvature=False)
    >>> found["depth"].values.round(3), found["tvu_95"].values.round(3)
    (array([[52., 52., 52.]]), array([[0.033, 0.033, 0.033]], dtype=float32))
    """
    chosen = Options(**more) if options is None else options
    if options is not None and more:
        raise InputError(f"options are given, and {', '.join(more)} beside them: give one or the other")
    profiles = _profiles(profiles_or_casts)
    with open_soundings(dataset, case=_case(dataset, chosen, corrected_with)) as soundings:
        choice = {
            "scales": scales, "as_it_was": as_it_was, "orders": _orders(orders), "components": components,
            "change": change, "corrected_with": corrected_with, "most": most,
        }  # fmt: skip
        corrector = corrector_for(soundings, Job(profiles, soundings.case, chosen, choice))
        columns: dict[str, NDArray[Any]] = {}

        def keep(block: PingBlock, found: Mapping[str, NDArray[Any]]) -> None:
            for name, values in found.items():
                whole = columns.setdefault(name, np.empty(soundings.shape, dtype=OUTPUTS[name].dtype))
                whole[block.start : block.start + block.shape[0]] = values

        stream(soundings, corrector, None, workers=workers, watch=keep)
        notes = (*soundings.notes, *corrector.notes)
        dimensions, single = soundings.dimensions, len(soundings.dimensions) == 1
    about = About(profiles, orders=tuple(corrector.orders))
    result = dataset.copy()
    result = result.drop_vars([name for name in columns if name in result])
    for name, values in columns.items():
        attributes = OUTPUTS[name].attributes() | attributes_beside(name, columns, about)
        attributes.pop("coordinates", None)  # xarray's own to write
        result[name] = (dimensions, values[:, 0] if single else values, attributes)
    result["cast_id"] = ("cast", np.array([profile.id for profile in profiles], dtype=str))
    result["cast_id"].attrs["long_name"] = "identifier of the cast"
    result.attrs |= {
        "comment": SWATH_NOTE,
        "notes": "; ".join(notes),
        "table_error": corrector.table_error,
        "settings": ", ".join(f"{name}={value}" for name, value in asdict(chosen).items()),
    }
    return result


def _profiles(given: Profile | Cast | Sequence[Profile | Cast]) -> list[Profile]:
    each = [given] if isinstance(given, Profile | Cast) else list(given)
    return [Profile.from_cast(one) if isinstance(one, Cast) else one for one in each]


def _case(dataset: xarray.Dataset, options: Options, corrected_with: Profile | None) -> str:
    """Of `columns.CASES`."""
    if corrected_with is not None:
        return "corrected"
    if options.recorded_speed is not None:
        return "recorded"
    return "beams" if "across_track_angle" in dataset or dataset["two_way_travel_time"].ndim > 1 else "vertical"


def _orders(given: Mapping[str, Order] | Sequence[str] | None) -> Mapping[str, Order]:
    if given is None:
        return read_orders()
    return dict(given.items()) if isinstance(given, Mapping) else named_orders(given)
