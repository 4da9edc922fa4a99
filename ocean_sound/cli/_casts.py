"""What `ocean-sound cast` does to a cast, step by step: check, complete, average, thin."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import click

from . import _shared as shared

if TYPE_CHECKING:
    from pathlib import Path

    from ..casts import Cast, CheckReport
    from ..profile import Profile

checking = shared.options(
    click.option("--check", "with_check", is_flag=True, help="Run the quality tests of QARTOD and Argo on the cast."),
    click.option(
        "--thresholds",
        metavar="NAME|FILE",
        help="Thresholds of the tests: ocean, coast, estuary, lake, or a TOML file; implies --check.",
    ),
    click.option(
        "--flags",
        "verdicts",
        type=shared.FILE,
        help="A person's verdicts (CSV: level, variable, flag, reason, who).",
    ),
)
completing = shared.options(
    shared.salinity_option,
    click.option("--neighbour", type=shared.FILE, help="A cast that lends salinity, and water above and below."),
    click.option("--climatology", type=shared.FILE, help="A CF grid of temperature and salinity that lends them."),
    click.option(
        "--grid-temperature",
        type=click.Choice(["in-situ", "potential", "conservative"]),
        help="What the grid's temperature is, if it does not say.",
    ),
    click.option(
        "--grid-salinity",
        type=click.Choice(["practical", "absolute"]),
        help="What the grid's salinity is, if it does not say.",
    ),
    click.option("--to-depth", type=float, help="Carry the cast down to this depth, m."),
)
thinning = shared.options(
    click.option("--bin", "thickness", type=float, help="Average the profile over bins of this thickness, m."),
    click.option("--smooth", "scale", type=float, help="Smooth the profile over this length, m."),
    click.option("--thin", "tolerance", type=float, help="Keep few levels: no beam moves by more than this, m."),
    click.option("--levels", type=int, help="Keep at most so many levels."),
    click.option(
        "--max-angle",
        type=float,
        default=65.0,
        show_default=True,
        help="Largest beam angle, degrees from the vertical.",
    ),
    click.option("--transducer-depth", type=float, default=0.0, show_default=True, help="Depth of the transducer, m."),
    click.option("--template", type=shared.FILE, help="How to write the profile for an echo sounder (TOML); needs -o."),
)


@dataclass(frozen=True, eq=False)
class Checked:
    """A cast with its flags, and what the tests found."""

    cast: Cast
    report: CheckReport | None


def checked(cast: Cast, *, with_check: bool, thresholds: str | None, verdicts: Path | None) -> Checked:
    """The cast with the flags of the tests and of a person, as far as asked for."""
    report = None
    if with_check or thresholds is not None:
        from ..casts import CastBlock, check_block

        block, report = check_block(CastBlock.from_casts([cast]), thresholds=thresholds or "ocean")
        cast = block[0]
    if verdicts is not None:
        from ..casts import apply_verdicts, read_verdicts

        cast = apply_verdicts(cast, read_verdicts(verdicts))
    return Checked(cast, report)


def completed(
    cast: Cast,
    *,
    salinity: float | None,
    neighbour: Path | None,
    climatology: Path | None,
    grid_temperature: Any,
    grid_salinity: Any,
    to_depth: float | None,
) -> Cast:
    """The cast with lent or carried water, as far as asked for; a neighbour comes before a climatology."""
    from ..casts import complete_cast

    lenders: list[Any] = []
    if neighbour is not None:
        lenders.append(shared.pick(shared.read_all(neighbour, ()), neighbour, None))
    if climatology is not None:
        from ..grids import open_climatology

        lenders.append(open_climatology(climatology, temperature=grid_temperature, salinity=grid_salinity))
    if not lenders and to_depth is None:
        return cast if salinity is None else complete_cast(cast, salinity=salinity)
    below = [*lenders, *(["constant"] if to_depth is not None else [])]
    return complete_cast(
        cast,
        salinity=salinity if salinity is not None else (lenders[0] if lenders else None),
        above=lenders[0] if lenders else "first",
        below=below,
        to_depth=to_depth,
    )


def thinned(
    profile: Profile,
    *,
    thickness: float | None,
    scale: float | None,
    tolerance: float | None = None,
    levels: int | None = None,
    max_angle: float,
    transducer_depth: float,
) -> tuple[Profile, list[str]]:
    """The profile averaged and thinned as far as asked for, and in words what that does to a beam."""
    said = []
    place: dict[str, Any] = {"max_angle": max_angle, "transducer_depth": transducer_depth}
    if thickness is not None or scale is not None:
        from ..soundings import bin_levels, smooth

        for average, length, what in ((bin_levels, thickness, "bins"), (smooth, scale, "smoothing")):
            if length is not None:
                done = average(profile, length, **place)
                profile = done.profile
                said.append(f"{what} of {length:g} m: {done.shift}")
    if tolerance is not None or levels is not None:
        from ..soundings import thin

        given: dict[str, Any] = {} if tolerance is None else {"tolerance": tolerance}
        fewer = thin(profile, max_levels=levels, **given, **place)
        said.append(f"thinned from {len(profile)} to {len(fewer.profile)} levels: {fewer.guarantee}")
        profile = fewer.profile
    return profile, said
