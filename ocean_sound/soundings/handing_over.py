"""A profile as a file for an echo sounder, in the user's own format, with a guarantee for the numbers as printed."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from ..errors import InputError
from ..files.writing import check_output, write_text
from .template import Template, read_template
from .thinning import (
    ADDED,
    DEFAULT_ANGLE,
    DEFAULT_TOLERANCE,
    Thinned,
    check_thinning,
    fewest_levels,
    rebuilt,
    with_transducer,
)

if TYPE_CHECKING:
    from os import PathLike

    from ..profile import Profile

# How speed grows with depth alone, m/s: the terms in D of Mackenzie (1981), JASA 70, 807-812.
_PER_METRE, _PER_SQUARE_METRE = 1.630e-2, 1.675e-7
_DEEPEST = 12_000.0  # m


def hand_over(
    profile: Profile,
    path: str | PathLike[str],
    *,
    template: Template | str | PathLike[str],
    to_depth: float | None = None,
    max_levels: int | None = None,
    tolerance: float = DEFAULT_TOLERANCE,
    max_angle: float = DEFAULT_ANGLE,
    transducer_depth: float = 0.0,
    measured: bool = False,
    overwrite: bool = False,
) -> Thinned:
    """Write a profile for an echo sounder: few levels from 0 m strictly downward, in the user's own format.

    Parameters
    ----------
    profile : Profile
        The water; never changed. One that starts below the surface is extended to it at its first speed.
    path : path-like
        The file to write.
    template : Template or path-like
        How it is written, or a TOML that says so (`read_template`).
    to_depth : float, optional
        Depth of the last level, m; the profile's deepest where not given. Where the profile ends above, it is carried
        on with the water of its last level: speed grows by what depth alone adds (see `carried_down`), and a note says
        so.
    max_levels : int, optional
        How many levels the echo sounder takes.
    tolerance, max_angle, transducer_depth, measured
        As for `thin`.
    overwrite : bool
        Whether an existing file may be replaced.

    Returns
    -------
    Thinned
        The levels as printed. The guarantee is for these, against the profile that was given.

    Raises
    ------
    InputError
        If an argument is out of range; if the template asks for a time or position that is not known; or if so many
        levels with so many decimals can't keep beams within the tolerance. Nothing is written then, and the message
        says what can be kept.
    PlanError
        If the template is at fault.
    OutputError
        If the file exists and may not be replaced, or can't be written.

    Notes
    -----
    The speed at the transducer is printed with an error too, and a beam of the same angle in water of another speed
    there bends otherwise all the way down: with two decimals, 5 mm at 65 degrees can't be promised much beyond 200 m.

    Examples
    --------
    >>> import tempfile
    >>> from ocean_sound.profile import Profile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = Path(folder) / "levels.txt"
    ...     water = Profile([0, 20, 40], [1500, 1500, 1490.125])
    ...     done = hand_over(water, path, template=Template("{depth:.1f} {speed:.2f}"))
    ...     print(path.read_text(), end="")
    0.0 1500.00
    20.0 1500.00
    40.0 1490.12
    """
    check_output(path, replace=overwrite)
    check_thinning(max_levels=max_levels, tolerance=tolerance, max_angle=max_angle)
    format_ = template if isinstance(template, Template) else read_template(template)
    water = profile.to_surface()
    if to_depth is not None:
        water = to_exactly(water, to_depth)
    water = with_transducer(water, transducer_depth)
    depth, speed, guarantee = fewest_levels(
        water,
        max_levels=max_levels,
        tolerance=tolerance,
        max_angle=max_angle,
        transducer_depth=transducer_depth,
        fit=not measured,
        printed=format_.printed,
    )
    if guarantee.distance > tolerance:
        many = "" if max_levels is None else f" and at most {max_levels} levels"
        raise InputError(
            f"{path}: not written, for as printed by {format_.level!r}{many} beams within {max_angle:g} degrees move "
            f"by up to {guarantee.distance:.2g} m down to {guarantee.to_depth:g} m, more than the tolerance of "
            f"{tolerance:g} m: allow more decimals, more levels or a larger tolerance"
        )
    levels = np.searchsorted(profile.depth, depth)
    levels = np.where(profile.depth[np.minimum(levels, len(profile) - 1)] == depth, levels, ADDED)
    about = {
        "id": profile.id,
        "time": None if np.isnat(profile.time) else profile.time.astype("datetime64[us]").item(),
        "latitude": None if np.isnan(profile.latitude) else profile.latitude,
        "longitude": None if np.isnan(profile.longitude) else profile.longitude,
    }
    write_text(path, format_.lines(depth, speed, about), replace=overwrite)
    note = f"{depth.size} levels as printed in {Path(path).name}: {guarantee}"
    return Thinned(rebuilt(water, depth, speed, note), levels, guarantee, float(tolerance))


def to_exactly(profile: Profile, to_depth: float) -> Profile:
    """The profile cut at a depth, or carried down to it.

    Parameters
    ----------
    profile : Profile
        Never changed.
    to_depth : float
        m, below its first level and at most 12000.

    Returns
    -------
    Profile
        Where it was carried down, with a note. Below its last level the water is taken to be that of the last level,
        so that speed grows with depth alone, by 0.0163 D + 1.675e-7 D² m/s: the terms in D of Mackenzie (1981), JASA
        70, 807-812. The uncertainty of the added level is not known.

    Raises
    ------
    InputError
        If the depth is not below the first level, or beyond 12000 m.

    Examples
    --------
    >>> from ocean_sound.profile import Profile
    >>> to_exactly(Profile([0, 100], [1500, 1490]), 200.0).speed.round(3)
    array([1500.   , 1490.   , 1491.635])
    """
    last = float(profile.depth[-1])
    if not profile.depth[0] < to_depth <= _DEEPEST:
        raise InputError(
            f"to_depth is {to_depth:g} m: a depth below {profile.depth[0]:g} m and of at most {_DEEPEST:g} m would be "
            "right"
        )
    if to_depth <= last:
        inner = profile.depth[profile.depth < to_depth]
        depth = np.concatenate((inner, [to_depth]))
        return rebuilt(profile, depth, np.interp(depth, profile.depth, profile.speed))
    added = _PER_METRE * (to_depth - last) + _PER_SQUARE_METRE * (to_depth**2 - last**2)
    note = (
        f"carried from {last:g} m down to {to_depth:g} m with the water of the last level: speed grows with depth "
        f"alone, by {added:.2f} m/s"
    )
    return replace(
        profile,
        depth=np.append(profile.depth, to_depth),
        speed=np.append(profile.speed, profile.speed[-1] + added),
        uncertainty=None,
        shapes={name: np.append(shape, np.nan) for name, shape in profile.shapes.items()},
        noise=None if profile.noise is None else np.append(profile.noise, np.nan),
        notes=(*profile.notes, note),
    )
