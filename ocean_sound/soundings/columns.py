"""The variables of soundings, in and out: names, units, ranges, attributes, reasons; and the block they travel in.

One table says of each variable what files call it, what is stored, and what values can be; one says for which reasons
a sounding is not what it should be, with the QARTOD flag of each.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from ..errors import InputError
from ..files.cf import FLAG_MEANINGS, FLAG_VALUES

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from numpy.typing import NDArray

    Floats = NDArray[np.float64]

PASS, NOT_EVALUATED, SUSPECT, FAIL, MISSING = FLAG_VALUES
"""The QARTOD flags."""


@dataclass(frozen=True)
class Column:
    """A variable of soundings.

    Parameters
    ----------
    name : str
    title : str
        Its CF long name.
    units : str
        As CF writes them; empty for time, which has its own, and for codes.
    per : str
        ``ping`` or ``beam``: which one value of it belongs to. A file may have a value per beam of any of them.
    standard_name : str
        Of CF, where there is one.
    lowest, highest : float
        Between these a value of an input can be; others count as impossible.
    above_lowest : bool
        Whether the lowest value itself can't be.
    dtype : str
        How it is stored in an output.
    kind : str
        What its unit measures: ``length``, ``angle``, ``speed``, ``time span``, ``time`` or ``code``.
    """

    name: str
    title: str
    units: str
    per: str
    standard_name: str = ""
    lowest: float = -np.inf
    highest: float = np.inf
    above_lowest: bool = False
    dtype: str = "f8"
    kind: str = "length"

    @property
    def range_text(self) -> str:
        """What values can be, in words.

        >>> INPUTS["two_way_travel_time"].range_text
        'above 0 and at most 60 s'
        """
        low = f"above {self.lowest:g} and at most" if self.above_lowest else f"{self.lowest:g} to"
        return f"{low} {self.highest:g} {self.units.replace('m s-1', 'm/s')}".rstrip()

    def attributes(self) -> dict[str, Any]:
        """CF attributes, in a new dict.

        >>> OUTPUTS["depth"].attributes()["standard_name"]
        'sea_floor_depth_below_sea_surface'
        """
        found: dict[str, Any] = {"long_name": self.title}
        if self.standard_name:
            found["standard_name"] = self.standard_name
        if self.units:
            found["units"] = self.units
        if self.name in _POSITIVE:
            found["positive"] = _POSITIVE[self.name]
        if self.name == "sounding_flag":
            found |= {"flag_values": np.array(FLAG_VALUES, np.int8), "flag_meanings": FLAG_MEANINGS}
        if self.name == "sounding_reason":
            codes = np.array([reason.code for reason in REASONS], np.int16)
            found |= {"flag_values": codes, "flag_meanings": " ".join(reason.name for reason in REASONS)}
        return found


_POSITIVE = {
    "transducer_depth": "down",
    "depth": "down",
    "reduced_depth": "down",
    "recorded_depth": "down",
    "transducer_height": "up",
    "sounding_height": "up",
    "water_level": "up",
}
_HEIGHTS: dict[str, Any] = {"lowest": -12_000.0, "highest": 9_000.0}
_DEPTHS: dict[str, Any] = {"lowest": 0.0, "highest": 12_000.0}
_ANGLES: dict[str, Any] = {"lowest": -90.0, "highest": 90.0, "kind": "angle"}
_TURNS: dict[str, Any] = {"lowest": -360.0, "highest": 360.0, "kind": "angle"}
_SPEEDS: dict[str, Any] = {"lowest": 1300.0, "highest": 1800.0, "kind": "speed"}


def _table(*columns: Column) -> dict[str, Column]:
    return {column.name: column for column in columns}


INPUTS: Mapping[str, Column] = _table(
    Column(
        "two_way_travel_time", "two-way travel time of the sound", "s", "beam",
        "acoustic_signal_roundtrip_travel_time_in_sea_water", 0.0, 60.0, above_lowest=True, kind="time span",
    ),
    Column(
        "across_track_angle",
        "across-track angle of the beam after motion compensation, positive to starboard; its sine is the cosine "
        "along the athwartships axis",
        "degree", "beam", **_ANGLES,
    ),
    Column(
        "along_track_angle", "along-track angle of the beam after motion compensation, positive forward", "degree",
        "beam", **_ANGLES,
    ),
    Column("recorded_depth", "depth as recorded at a nominal speed of sound", "m", "beam", **_DEPTHS),
    Column(
        "transducer_depth", "depth of the transducer below the water surface, heave and lever arms included", "m",
        "ping", **_DEPTHS,
    ),
    Column("transducer_height", "height of the transducer above the ellipsoid WGS84", "m", "ping",
           "height_above_reference_ellipsoid", **_HEIGHTS),
    Column("surface_sound_speed", "speed of sound with which the beam was steered", "m s-1", "ping",
           "speed_of_sound_in_sea_water", **_SPEEDS),
    Column("face_roll", "roll of the array's face at reception, positive with starboard down", "degree", "ping",
           **_ANGLES),
    Column("face_pitch", "pitch of the array's face at reception, positive with the bow up", "degree", "ping",
           **_ANGLES),
    Column("time", "time of the ping", "", "ping", "time", kind="time"),
    Column("latitude", "latitude of the transducer", "degrees_north", "ping", "latitude", -90.0, 90.0, kind="angle"),
    Column("longitude", "longitude of the transducer", "degrees_east", "ping", "longitude", **_TURNS),
    Column("reception_latitude", "latitude of the transducer at reception", "degrees_north", "ping",
           lowest=-90.0, highest=90.0, kind="angle"),
    Column("reception_longitude", "longitude of the transducer at reception", "degrees_east", "ping", **_TURNS),
    Column("heading", "true heading of the vessel", "degree", "ping", "platform_orientation", **_TURNS),
    Column("speed_over_ground", "speed of the vessel over ground", "m s-1", "ping", "platform_speed_wrt_ground", 0.0,
           60.0, kind="speed"),
    Column("water_level", "height of the water surface above the datum", "m", "ping",
           "water_surface_height_above_reference_datum", **_HEIGHTS),
)  # fmt: skip
"""What is read. Where a file is already corrected, `depth` and the distances of `OUTPUTS` are read too."""

OUTPUTS: Mapping[str, Column] = _table(
    Column("depth", "depth of the sounding below the water surface", "m", "beam", "sea_floor_depth_below_sea_surface",
           **_DEPTHS),
    Column("across_track_distance", "horizontal distance of the sounding from the transducer, positive to starboard",
           "m", "beam", lowest=-100_000.0, highest=100_000.0),
    Column("along_track_distance", "horizontal distance of the sounding from the transducer, positive forward", "m",
           "beam", lowest=-100_000.0, highest=100_000.0),
    Column("reduced_depth", "depth of the sounding below the datum, negative where it dries", "m", "beam"),
    Column("sounding_height", "height of the sounding above the ellipsoid WGS84", "m", "beam",
           "height_above_reference_ellipsoid"),
    Column("sounding_latitude", "latitude of the sounding", "degrees_north", "beam", "latitude", kind="angle"),
    Column("sounding_longitude", "longitude of the sounding", "degrees_east", "beam", "longitude", kind="angle"),
    Column("harmonic_mean_speed", "harmonic mean of the speed of sound from the transducer to the sounding", "m s-1",
           "beam", lowest=1300.0, highest=1800.0, kind="speed"),
    Column("cast_used", "position in cast_id, from 0, of the cast with the largest weight; -1 for none", "", "beam",
           dtype="i2", kind="code"),
    Column("cast_weight", "weight of that cast", "1", "beam", dtype="f4", kind="code"),
    Column("depth_uncertainty", "standard uncertainty (k=1) of the depth, from the speed of sound alone", "m", "beam",
           "sea_floor_depth_below_sea_surface standard_error", dtype="f4"),
    Column("tvu_95", "total vertical uncertainty (95 %) from the speed of sound alone", "m", "beam", dtype="f4"),
    Column("thu_95", "total horizontal uncertainty (95 %) from the speed of sound alone", "m", "beam", dtype="f4"),
    Column("total_tvu_95", "total vertical uncertainty (95 %) from all components given", "m", "beam", dtype="f4"),
    Column("total_thu_95", "total horizontal uncertainty (95 %) from all components given", "m", "beam", dtype="f4"),
    Column("orders_held_by_sound_speed", "survey orders within whose limits the speed of sound alone stays", "",
           "beam", dtype="i2", kind="code"),
    Column("orders_held", "survey orders within whose limits all components together stay", "", "beam", dtype="i2",
           kind="code"),
    Column("sounding_flag", "quality flag of the corrected sounding", "", "beam", "quality_flag", dtype="i1",
           kind="code"),
    Column("sounding_reason", "reason for the quality flag of the sounding", "", "beam", dtype="i2", kind="code"),
)  # fmt: skip
"""What is added. Where a value can't be it is NaN, and the sounding's reason says why."""

CASES: Mapping[str, tuple[str, ...]] = {
    "beams": ("two_way_travel_time", "across_track_angle", "transducer_depth"),
    "vertical": ("two_way_travel_time", "transducer_depth"),
    "recorded": ("recorded_depth", "transducer_depth"),
    "corrected": ("depth", "across_track_distance", "transducer_depth"),
}
"""What a file must have: beams at an angle, a single-beam echo sounder, its depths recorded at a nominal speed, and
soundings corrected before, to be corrected anew."""


@dataclass(frozen=True)
class Reason:
    """Why a sounding has its flag: code in files, name in files, QARTOD flag, and in words."""

    code: int
    name: str
    flag: int
    text: str


REASONS: tuple[Reason, ...] = tuple(
    Reason(code, *row)
    for code, row in enumerate(
        (
            ("none", PASS, "corrected, nothing to say"),
            ("no_travel_time", MISSING, "the travel time, or the depth that stands for it, is missing"),
            # in the order of directions.DIRECTION_STATUSES, from its 1 on
            ("no_angle", MISSING, "an angle is missing, or 90 degrees and more"),
            ("no_direction", FAIL, "the two angles make no direction"),
            ("no_speed", MISSING, "the surface sound speed is missing"),
            ("no_attitude", MISSING, "the attitude of the face is missing"),
            ("not_at_face", FAIL, "the face can't send or hear this beam"),
            ("not_downward", FAIL, "the beam is not downward"),
            ("turned", FAIL, "the beam turns before its time is over"),
            ("beyond_the_cast", FAIL, "the beam leaves the water that its cast describes"),
            ("completed_below_the_cast", SUSPECT, "the seabed is below the cast, which was completed"),
            ("completed_above_the_cast", SUSPECT, "the transducer is above the cast's first level"),
            ("no_cast_near_enough", NOT_EVALUATED, "no cast is near enough in time and place: not corrected"),
            ("no_time_or_position", NOT_EVALUATED, "time or position is missing, so no cast can be chosen"),
            ("position_missing", SUSPECT, "position or heading is missing: the sounding has none, its depth holds"),
            ("no_transducer_depth", MISSING, "the depth of the transducer is missing"),
            ("impossible_value", FAIL, "a value of the input is outside what can be"),
            ("uncertainty_unknown", NOT_EVALUATED, "the uncertainty of the speed of sound is not known there"),
            ("served_in_part", SUSPECT, "in some of the casts blended here the beam turns, or their water ends"),
            ("surface_speed_differs", SUSPECT, "the surface sound speed is far from that of the casts"),
        )
    )
)
"""Every reason, by its code."""

REASON: Mapping[str, int] = {reason.name: reason.code for reason in REASONS}
"""Codes by name."""

FLAG_OF_REASON: NDArray[np.int8] = np.array([reason.flag for reason in REASONS], dtype=np.int8)
"""The QARTOD flag of each reason: `FLAG_OF_REASON[sounding_reason]` is `sounding_flag`."""
FLAG_OF_REASON.flags.writeable = False

REASON_OF_DIRECTION: NDArray[np.int16] = np.array(
    [REASON[name] for name in ("none", "no_angle", "no_direction", "no_speed", "no_attitude", "not_at_face",
                               "not_downward")],
    dtype=np.int16,
)  # fmt: skip
"""The reason for each of `directions.DIRECTION_STATUSES`."""
REASON_OF_DIRECTION.flags.writeable = False


@dataclass(frozen=True, eq=False)
class PingBlock:
    """Soundings of consecutive pings, in plain arrays.

    Parameters
    ----------
    pings : mapping of str to numpy.ndarray, each of shape (n,)
        One value for a ping, float64 (`time` datetime64[ns]); missing is NaN or NaT.
    beams : mapping of str to numpy.ndarray, each of shape (n, m)
        One value for a beam. A name is in one of the two; a column that belongs to pings may be given by beam.
    start : int
        Position of the first ping in the whole.
    impossible : numpy.ndarray of bool, shape (n, m), optional
        Where a value was outside what can be, and so is NaN in its column.

    Raises
    ------
    InputError
        If the arrays differ in shape.

    Examples
    --------
    >>> block = PingBlock({"transducer_depth": np.array([4.0, 4.5])}, {"two_way_travel_time": np.ones((2, 3))})
    >>> block.shape, block.of("transducer_depth").shape, block.of("heading") is None
    ((2, 3), (2, 1), True)
    """

    pings: Mapping[str, NDArray[Any]]
    beams: Mapping[str, NDArray[Any]]
    start: int = 0
    impossible: NDArray[np.bool_] | None = field(default=None)

    def __post_init__(self) -> None:
        shapes = {name: values.shape for name, values in self.beams.items()}
        lengths = {name: values.shape for name, values in self.pings.items()}
        if self.impossible is not None:
            shapes["impossible"] = self.impossible.shape
        good = len(set(shapes.values())) == 1 and all(len(shape) == 2 for shape in shapes.values())
        n = next(iter(shapes.values()))[0] if good else -1
        if not good or any(length != (n,) for length in lengths.values()):
            found = ", ".join(f"{name} {shape}" for name, shape in (lengths | shapes).items())
            raise InputError(
                f"a block of pings needs columns of (n,) and (n, m) for its beams; found {found or 'none'}"
            )

    @property
    def shape(self) -> tuple[int, int]:
        """Pings and beams of each."""
        n, m = next(iter(self.beams.values())).shape
        return int(n), int(m)

    @property
    def names(self) -> tuple[str, ...]:
        """All columns."""
        return (*self.pings, *self.beams)

    def of(self, name: str) -> NDArray[Any] | None:
        """A column in a shape that broadcasts to (n, m): (n, 1) of pings, (n, m) of beams; None where it is absent."""
        if name in self.beams:
            return self.beams[name]
        return self.pings[name][:, None] if name in self.pings else None

    def part(self, first: int, last: int) -> PingBlock:
        """The pings from one position in the block to before another, as views."""
        return PingBlock(
            {name: values[first:last] for name, values in self.pings.items()},
            {name: values[first:last] for name, values in self.beams.items()},
            self.start + first,
            None if self.impossible is None else self.impossible[first:last],
        )


def missing_line(case: str, found: Iterable[str], where: str) -> str | None:
    """What a file lacks, all of it in one line, and what it may leave out; None where it lacks nothing.

    >>> missing_line("vertical", ["transducer_depth"], "a.nc").split(";")[0]
    'a.nc: two_way_travel_time [s] is missing'
    """
    have = set(found)
    lacking = [name for name in CASES[case] if name not in have]
    if not lacking:
        return None
    known = {**INPUTS, **OUTPUTS}
    optional = ", ".join(name for name in INPUTS if name not in CASES[case] and name != "recorded_depth")
    each = ", ".join(f"{name} [{known[name].units}]" for name in lacking)
    return f"{where}: {each} {'is' if len(lacking) == 1 else 'are'} missing; optional are {optional}"
