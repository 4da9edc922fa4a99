"""What `ocean-sound soundings` says of its casts: how far out beams hold, when the next is due, what each is worth."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any, NamedTuple

from ..errors import InputError

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from matplotlib.figure import Figure

    from ..soundings.interval import CastInterval, Growth
    from ..soundings.leaving_out import LeftOut
    from ..soundings.orders import Order
    from ._soundings import Casts

    Orders = Mapping[str, Order]
    Options = Mapping[str, Any]
    Judged = tuple[Any, list[str], Callable[[], Figure] | None]

_HOUR, _KILOMETRE, _KILOHERTZ = 3600.0, 1000.0, 1000.0
_SHOWN = 10
_COLUMNS = 8  # depths of a table for a person


class Beam(NamedTuple):
    """By which beam casts are judged."""

    angle: float
    depth: float | None
    transducer_depth: float
    flat_array: bool


def _absorption(casts: Casts, _orders: Orders, _scales: Options, beam: Beam, asked: Options) -> Judged:
    """Mean absorption at the sonar's frequencies, for each cast that can tell."""
    from ..soundings.watching import mean_absorption

    frequencies = [kilohertz * _KILOHERTZ for kilohertz in asked["absorption"]]
    rows: list[dict[str, Any]] = []
    for cast in casts.casts:
        try:
            values = mean_absorption(cast, frequencies, transducer_depth=beam.transducer_depth, to_depth=beam.depth)
        except InputError as error:
            rows.append({"cast_id": cast.id, "reason": str(error)})
            continue
        rows.append({"cast_id": cast.id, "frequency": frequencies, "absorption": values.tolist()})
    return rows, _absorption_lines(rows, beam), None


def _absorption_lines(rows: Sequence[Mapping[str, Any]], beam: Beam) -> list[str]:
    """For the settings of the echo sounder."""
    to = "down" if beam.depth is None else f"to {beam.depth:g} m"
    lines = [f"Mean absorption from {beam.transducer_depth:.3g} m {to}, dB/km (Francois and Garrison 1982):"]
    for row in rows[:_SHOWN]:
        if "reason" in row:
            lines.append(f"  {row['reason']}")
            continue
        pairs = zip(row["frequency"], row["absorption"], strict=True)
        lines.append(f"  {row['cast_id']}: " + ", ".join(f"{hertz / 1e3:g} kHz {value:.2f}" for hertz, value in pairs))
    return lines + ([f"  ... and {len(rows) - _SHOWN} casts more"] if len(rows) > _SHOWN else [])


def _by_angle(casts: Casts, orders: Orders, scales: Options, beam: Beam, asked: Options) -> Judged:
    """The largest beam angle that holds each order, by depth: at a cast, and where it only just serves."""
    from ..soundings.changing import least_reach, water_change
    from ..soundings.choosing import LAST_CHANGE, Scales
    from ..soundings.components import read_components
    from ..soundings.reach import even_depths, largest_angle, uncertainty_by_angle

    change: Any = {"change": ([0.0], [asked["water_change"]])}
    if asked["water_change"] is None:
        change = water_change(casts.profiles, scales=Scales(scales["time"], scales["length"]) if scales else None)
    bottom = least_reach(casts.profiles) if beam.depth is None else beam.depth
    cases = {"at a cast": 0.0}
    if change and math.isfinite(min(scales["time"], scales["length"])):
        cases["where a cast only just serves"] = LAST_CHANGE
    others = () if asked["components"] is None else read_components(asked["components"])
    tables = {
        words: uncertainty_by_angle(
            casts.profiles,
            depths=even_depths(beam.transducer_depth, bottom),
            transducer_depth=beam.transducer_depth,
            flat_array=beam.flat_array,
            change=change,
            changed=changed,
            steering_speed_uncertainty=asked["steering_speed_uncertainty"] or 0.0,
            components=others,
        )
        for words, changed in cases.items()
    }
    told = [
        {"case": words, "order": name, "depth": reach.depth, "largest_angle": reach.angle,
         "limited_by": reach.limited_by, "holds_beyond": reach.holds_beyond}
        for words, table in tables.items()
        for name, order in orders.items()
        for reach in (largest_angle(order, table["angle"], table["depth"], table["tvu_95"], table["thu_95"]),)
    ]  # fmt: skip
    of = "all components" if others else "sound speed alone"
    words, table = list(tables.items())[-1]

    def draw() -> Figure:
        from ..figures import orders_figure

        return orders_figure(
            table,
            orders,
            title=f"Uncertainty from {of} against survey orders",
            remark=f"{words[0].upper()}{words[1:]}.",
        )

    return told, _by_angle_lines(told, of), draw


def _by_angle_lines(told: Sequence[Mapping[str, Any]], of: str) -> list[str]:
    """The largest angles as tables for a person."""
    lines = []
    depths = told[0]["depth"]
    shown = range(len(depths) - 1, -1, -max(1, -(-len(depths) // _COLUMNS)))[::-1]
    for case in dict.fromkeys(each["case"] for each in told):
        lines.append(f"Largest beam angle up to which all beams hold the order by {of}, degrees, {case}:")
        lines.append("  to m      " + "".join(f"{depths[at]:8.4g}" for at in shown))
        for each in (one for one in told if one["case"] == case):
            cells = (
                f"{'none' if math.isnan(each['largest_angle'][at]) else format(each['largest_angle'][at], '.1f'):>8}"
                for at in shown
            )
            lines.append(f"  {each['order'][:10]:<10}" + "".join(cells))
    return lines


def _next_cast(casts: Casts, orders: Orders, scales: Options, beam: Beam, _asked: Options) -> Judged:
    """When the next cast is due."""
    from ..soundings.choosing import Scales
    from ..soundings.interval import cast_interval

    interval = cast_interval(
        casts.profiles,
        **beam._asdict(),
        order=next(iter(orders.values())),
        scales=Scales(scales["time"], scales["length"]),
    )

    def draw() -> Figure:
        from ..figures import interval_figure

        return interval_figure(interval)

    return _told_of_interval(interval), _interval_lines(interval), draw


def _told_of_interval(interval: CastInterval) -> dict[str, Any]:
    """When the next cast is due, in a summary."""

    def growth(one: Growth) -> dict[str, Any]:
        return {"due": one.due, "due_low": one.due_low, "due_high": one.due_high, "pairs": int(one.pairs.sum())}

    return {
        "depth": interval.depth,
        "limit": interval.limit,
        "limited_by": interval.limited_by,
        "angle": interval.angle,
        "confidence": interval.confidence,
        "by_time": growth(interval.by_time),
        "by_distance": growth(interval.by_distance),
        "scale_of_time": interval.scales.time,
        "scale_of_length": interval.scales.length,
        "casts": interval.casts,
        "notes": list(interval.notes),
    }


def _interval_lines(interval: CastInterval) -> list[str]:
    """When the next cast is due, for a person."""
    lines = [f"Next cast, for {interval.limited_by} at the beam of {interval.angle:g} degrees:"]
    for at, depth in enumerate(interval.depth.tolist()):
        for growth, unit, size in ((interval.by_time, "h", _HOUR), (interval.by_distance, "km", _KILOMETRE)):
            due, low, high = (float(one[at]) / size for one in (growth.due, growth.due_low, growth.due_high))
            what = "after" if unit == "h" else "within"
            if math.isnan(due):
                said = f"{what} how many {unit}: too few pairs of casts to tell"
            elif math.isinf(due):
                said = f"not passed within the {'times' if unit == 'h' else 'distances'} that the casts are apart"
            else:
                said = f"{what} {due:.2g} {unit} ({interval.confidence:.0%}: {low:.2g} to {high:.2g})"
            lines.append(f"  to {depth:g} m, limit {interval.limit[at]:.2f} m: {said}")
    return [*lines, *(f"  note: {note}" for note in interval.notes)]


def _leave_one_out(casts: Casts, orders: Orders, scales: Options, beam: Beam, asked: Options) -> Judged:
    """What each cast is worth."""
    from ..soundings.choosing import DEFAULT_MOST, Scales
    from ..soundings.leaving_out import leave_one_out

    found = leave_one_out(
        casts.profiles,
        **beam._asdict(),
        scales=Scales(scales["time"], scales["length"]),
        order=next(iter(orders.values())),
        as_it_was=asked["as_it_was"],
        most=1 if asked["nearest"] else DEFAULT_MOST,
    )
    return _told_of_left_out(found), found.lines(), None


def _told_of_left_out(found: LeftOut) -> dict[str, Any]:
    """What each cast is worth, in a summary."""
    return {
        "angle": found.angle,
        "depth": found.depth,
        "largest_depth_error": found.largest_depth_error,
        "largest_across_track_error": found.largest_across_error,
        "casts": [
            {
                "cast_id": which,
                "depth_error": float(found.depth_error[at]),
                "across_track_error": float(found.across_error[at]),
                "depth_uncertainty": float(found.depth_uncertainty[at]),
                "foreseen": bool(found.foreseen[at]),
                "needed": at in found.kept,
            }
            for at, which in enumerate(found.ids)
        ],
        "fewest": found.fewest,
        "notes": list(found.notes),
    }


def _differ_most(casts: Casts, orders: Orders, _scales: Options, beam: Beam, _asked: Options) -> Judged:
    """The two casts that differ most at the outer beam, and what that does to soundings."""
    from ..soundings.changing import least_reach
    from ..soundings.comparing import refraction_errors
    from ..soundings.exchanging import depth_errors, differ_most
    from ..soundings.reach import even_depths

    bottom = least_reach(casts.profiles) if beam.depth is None else beam.depth
    of: dict[str, Any] = {"transducer_depth": beam.transducer_depth, "flat_array": beam.flat_array}
    errors = depth_errors(casts.profiles, depths=[bottom], angle=beam.angle, **of)
    used, true = differ_most(errors)
    found = refraction_errors(
        casts.profiles[used],
        casts.profiles[true],
        angles=range(76),
        depths=even_depths(beam.transducer_depth, bottom),
        **of,
    )
    names = casts.profiles[used].id, casts.profiles[true].id
    worst = float(errors[used, true, 0])
    told = {"used": names[0], "water": names[1], "angle": beam.angle, "depth": bottom, "depth_error": worst}

    def draw() -> Figure:
        from ..figures import refraction_figure

        return refraction_figure(found, used=names[0], true=names[1], orders=orders)

    line = (
        f"Most apart: {names[0]} used in the water of {names[1]} puts the beam of {beam.angle:g} degrees to "
        f"{bottom:g} m {abs(worst):.3f} m too {'deep' if worst > 0.0 else 'shallow'}"
    )
    return told, [line], draw


BY_OPTION: Mapping[str, Callable[[Casts, Orders, Options, Beam, Options], Judged]] = {
    "absorption": _absorption,
    "by_angle": _by_angle,
    "next_cast": _next_cast,
    "leave_one_out": _leave_one_out,
    "differ_most": _differ_most,
}
"""What is asked for by an option: what it tells, its lines, and its picture where it has one."""
DRAWN = ("by_angle", "next_cast", "differ_most")
"""Those with a picture."""
