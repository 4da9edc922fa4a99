"""What `ocean-sound soundings` reads beside the beams, and how it tells its results."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ..errors import CastFileError, InputError
from . import _shared as shared

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence
    from pathlib import Path

    from ..casts import Cast
    from ..profile import Profile
    from ..soundings.orders import Order
    from ..soundings.passport import Passport
    from ..soundings.streaming import Corrected

_SHOWN = 10
_NAMED = 3  # casts that share a note; more are counted
_UNCERTAINTIES = {
    "tvu_95": "TVU (95 %) from sound speed alone",
    "thu_95": "THU (95 %) from sound speed alone",
    "total_tvu_95": "TVU (95 %) from all components",
    "total_thu_95": "THU (95 %) from all components",
}
_HELD = {"orders_held_by_sound_speed": "by sound speed alone", "orders_held": "by all components"}


@dataclass(frozen=True, eq=False)
class Casts:
    """The casts that correct, in the order of their times, and what could not be used."""

    casts: Sequence[Cast]
    profiles: Sequence[Profile]
    sources: Sequence[tuple[str, str]]
    left_out: Sequence[tuple[str, str]]


def read_casts(
    paths: Sequence[Path],
    *,
    mapping: Sequence[str],
    equation: str,
    salinity: float | None,
    instrument: str | None,
    thresholds: str | None,
) -> Casts:
    """All casts of some files and folders that give a profile, the earliest first; what gives none is told."""
    from ..files import checksum
    from ..profile import Profile

    found: list[tuple[Cast, Profile, tuple[str, str]]] = []
    left_out: list[tuple[str, str]] = []
    for path in _files(paths):
        digest = checksum(path)
        for cast in _checked(_read(path, mapping, left_out), thresholds):
            try:
                profile = Profile.from_cast(cast, equation=equation, salinity=salinity, accuracy=instrument)
            except InputError as error:
                left_out.append((f"{path}: {cast.id}", str(error)))
                continue
            found.append((cast, profile, (path.name, digest)))
    shared.tell(*(f"left out: {which}: {why}" for which, why in left_out))
    if not found:
        raise InputError(f"{', '.join(map(str, paths))}: no cast gives a sound-speed profile")
    found.sort(key=lambda each: (str(each[1].time) == "NaT", str(each[1].time)))
    casts, profiles, sources = zip(*found, strict=True)
    return Casts(casts, profiles, sources, left_out)


def _files(paths: Sequence[Path]) -> Iterator[Path]:
    """The files themselves, and those in folders, but for hidden ones and the settings beside casts."""
    for path in paths:
        if not path.is_dir():
            yield path
            continue
        inside = sorted(
            one for one in path.iterdir() if one.is_file() and one.name[0] != "." and one.suffix.lower() != ".toml"
        )
        if not inside:
            raise InputError(f"{path}: the folder holds no file")
        yield from inside


def _read(path: Path, mapping: Sequence[str], left_out: list[tuple[str, str]]) -> list[Cast]:
    from ..casts import read_blocks

    casts: list[Cast] = []
    try:
        for block in read_blocks(path, mapping=shared.parse_mapping(mapping)):
            casts.extend(block)
            left_out += [(f"{path}: {name}", reason) for name, reason in block.left_out]
    except CastFileError as error:
        left_out.append((str(path), str(error).removeprefix(f"{path}: ")))
    return casts


def _checked(casts: Sequence[Cast], thresholds: str | None) -> list[Cast]:
    if thresholds is None or not casts:
        return list(casts)
    from ..casts import CastBlock, check_block

    return list(check_block(CastBlock.from_casts(casts), thresholds=thresholds)[0])


def told_of_casts(casts: Casts) -> dict[str, Any]:
    """The casts in a summary."""
    having: dict[str, list[str]] = {}
    for one in casts.profiles:
        for note in one.notes:
            having.setdefault(note, []).append(one.id)
    notes = [f"{', '.join(ids) if len(ids) <= _NAMED else f'{len(ids)} casts'}: {note}" for note, ids in having.items()]
    return {
        "used": [
            {
                "cast_id": profile.id,
                "time": None if str(profile.time) == "NaT" else str(profile.time),
                "latitude": profile.latitude,
                "longitude": profile.longitude,
                "deepest_level": float(profile.depth[-1]),
                "source_file": source,
                "source_checksum": digest,
            }
            for profile, (source, digest) in zip(casts.profiles, casts.sources, strict=True)
        ],
        "left_out": [{"cast": which, "reason": why} for which, why in casts.left_out],
        "notes": notes,
    }


def chosen_orders(limits: Path | None, names: Sequence[str]) -> dict[str, Order]:
    """The orders to judge by: all of S-44 or of a file, or those of them that are named."""
    from ..soundings.orders import named_orders, read_orders

    known = read_orders(limits)
    return named_orders(names or known, known)


def cast_lines(casts: Casts) -> list[str]:
    """The casts for a person."""
    first, last = casts.profiles[0].time, casts.profiles[-1].time
    when = "" if str(first) == "NaT" else f", {str(first)[:16]} to {str(last)[:16]}"
    left = f"; {len(casts.left_out)} left out" if casts.left_out else ""
    return [f"Casts: {len(casts.profiles)}{when}{left}"]


def number(value: float, form: str = ".3f", unit: str = " m") -> str:
    """A number for a person, '-' for none."""
    return "-" if value is None or math.isnan(value) else format(value, form) + unit


def lines_of(done: Corrected) -> list[str]:
    """What became of a file, for a person."""
    told = done.to_dict()
    counts = done.tally
    goal = f" -> {done.output}" if done.output else ""
    rate = counts.soundings / done.seconds if done.seconds > 0.0 else 0.0
    flags = ", ".join(f"{count:,} {name.replace('_', ' ')}" for name, count in told["flags"].items() if count)
    from ..soundings.columns import REASONS
    from ..soundings.orders import SWATH_NOTE

    lines = [
        "",
        f"{done.source}{goal}: {counts.soundings:,} soundings in {done.seconds:.1f} s ({rate:,.0f} a second)",
        f"  {flags}",
        *(
            f"    {told['reasons'][reason.name]:,}: {reason.text}"
            for reason in REASONS[1:]
            if told["reasons"].get(reason.name)
        ),
        f"  Depths {number(counts.shallowest, '.2f')} to {number(counts.deepest, '.2f')} below the water surface",
    ]
    for name, words in _UNCERTAINTIES.items():
        if name in told and not math.isnan(told[name]["largest"]):
            one = told[name]
            lines.append(
                f"  {words}: median {number(one['median'])}, 95 % within {number(one['95_percent'])}, largest "
                f"{number(one['largest'])}"
            )
    for name, words in _HELD.items():
        if told.get(name):
            shares = ", ".join(f"{order} {_share(share)}" for order, share in told[name].items())
            lines.append(f"  Soundings that hold each order, {words}: {shares}")
    lines += [f"  {SWATH_NOTE}"] if any(told.get(name) for name in _HELD) else []
    worst = f"{done.arithmetic_error * 1e3:.2g} mm"
    lines.append(f"  Tables within {worst} of exact tracing: that is arithmetic, not the accuracy of soundings")
    if not math.isnan(counts.midpoint):
        lines.append(
            f"  One position stands for transmission and reception: soundings may be {counts.midpoint:.2f} m off along "
            "the track"
        )
    return lines + _surface_lines(done)


def _share(share: float) -> str:
    """A share that is 100 % only if all hold."""
    return "-" if math.isnan(share) else f"{math.floor(1000.0 * share) / 10.0:.1f} %"


def _surface_lines(done: Corrected) -> list[str]:
    told = done.surface
    if not told:
        return []
    runs = told["partings"]
    mean, largest = (f"{told[name]:+.2f}" for name in ("mean_difference", "largest_difference"))
    beyond = f"{told['pings_beyond']:,} of {told['pings_compared']:,} pings beyond {told['largest_allowed']:g} m/s"
    lines = [f"  Surface sound speed less cast: mean {mean} m/s, largest {largest}; {beyond}"]
    for run in runs[:_SHOWN]:
        when = "" if run["start"] is None else f", {run['start'][:19]} to {run['end'][:19]}"
        lines.append(
            f"    pings {run['first_ping']} to {run['last_ping']}{when}: {run['largest_difference']:+.1f} m/s against "
            f"cast {run['cast_id']}"
        )
    return lines + ([f"    ... and {len(runs) - _SHOWN} stretches more"] if len(runs) > _SHOWN else [])


def told_of_passport(found: Passport) -> dict[str, Any]:
    """How one sounding came about, in a summary."""
    return {
        "ping": found.ping,
        "beam": found.beam,
        "results": dict(found.results),
        "casts": [
            {"cast_id": each.id, "weight": each.weight, "time_apart": each.time_apart, "distance": each.distance}
            for each in found.casts
        ],
        "tvu_95": found.tvu_95,
        "thu_95": found.thu_95,
        "causes": dict(found.causes),
        "command": found.command,
        "notes": list(found.notes),
    }


def scale_lines(scales: Mapping[str, Any]) -> list[str]:
    """By which scales casts are chosen, for a person."""
    if not scales:
        return []
    from ..soundings.choosing import Scales

    return [f"A cast stands for the water within {Scales(scales['time'], scales['length'])} ({scales['how']})"]


def warnings_of(done: Corrected, scales: Mapping[str, Any]) -> list[str]:
    """What a person should not miss of a file."""
    from ..soundings.choosing import Scales
    from ..soundings.columns import REASON

    alone = int(done.tally.reasons[REASON["no_cast_near_enough"]])
    if not alone:
        return []
    within = Scales(scales["time"], scales["length"])
    share = max(alone / done.tally.soundings, 0.001)
    remedy = "take more casts, or give --time-scale (hours) and --length-scale (km) if the water changes less than that"
    where = f"{done.source}: {share:.1%} of the soundings have no cast within {within} ({scales['how']})"
    return [f"warning: {where}: {remedy}"]
