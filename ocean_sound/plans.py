"""Plans in TOML, read field by field.

A plan says what is asked, in the words of the package; the same checks serve the options of the command line. An error
names the file, the field, the value found and what would be accepted, one line for each field at fault.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

from pydantic import Field

from .errors import PlanError
from .files.fields import Fields, checked, load_toml

if TYPE_CHECKING:
    from os import PathLike


class Water(Fields):
    """Where the profile comes from."""

    file: str = Field(min_length=1)
    cast: str | None = None
    equation: str = "teos10"
    salinity: float | None = Field(default=None, ge=0, le=50)
    instrument: Literal["float", "ctd", "xbt"] | None = None
    columns: dict[str, str] = Field(default_factory=dict)


class Source(Fields):
    """The source of sound."""

    depth: float = Field(ge=0, le=12_000)


class Seabed(Fields):
    """A flat seabed; without it the deepest level is the bottom."""

    depth: float | None = Field(default=None, gt=0, le=12_000)


class Rays(Fields):
    """The fan of rays."""

    max_range: float = Field(gt=0, le=20_100_000)
    lowest_angle: float = Field(default=-20.0, ge=-90, le=90)
    highest_angle: float = Field(default=20.0, ge=-90, le=90)
    number: int = Field(default=41, ge=1, le=1_000_000)
    points: int = Field(default=0, ge=0, le=1_000_000)
    max_surface_bounces: int = Field(default=10_000, ge=0, le=10_000)
    max_seabed_bounces: int = Field(default=10_000, ge=0, le=10_000)


class Shadow(Fields):
    """Whether shadow zones are wanted, and on how fine a grid."""

    wanted: bool = False
    depths: int = Field(default=201, ge=2, le=5000)
    ranges: int = Field(default=501, ge=2, le=20_000)


class RaysPlan(Fields):
    """What `ocean-sound rays` is to do."""

    title: str = ""
    water: Water
    source: Source
    rays: Rays
    seabed: Seabed = Seabed()
    shadow: Shadow = Shadow()


def read_rays_plan(path: str | PathLike[str]) -> RaysPlan:
    r"""Read a plan for `ocean-sound rays`.

    Parameters
    ----------
    path : path-like
        A TOML file with the tables `water`, `source` and `rays`, and if wanted `seabed` and `shadow`.

    Returns
    -------
    RaysPlan
        The checked plan; file names in it stand as written, relative to the plan's own folder.

    Raises
    ------
    PlanError
        If the file can't be read, is not TOML, or a field is missing, unknown or impossible.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     plan = Path(folder) / "plan.toml"
    ...     _ = plan.write_text('water.file = "cast.csv"\nsource.depth = 30.0\nrays.max_range = 5000.0\n')
    ...     read_rays_plan(plan).rays.number
    41
    """
    return checked(RaysPlan, load_toml(path, error=PlanError), str(path), error=PlanError)
