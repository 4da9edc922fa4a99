"""Plans in TOML, read field by field.

A plan says what is asked, in the words of the package; the same checks serve the options of the command line. An error
names the file, the field, the value found and what would be accepted, one line for each field at fault.
"""

from __future__ import annotations

import difflib
import tomllib
from pathlib import Path
from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from .errors import PlanError


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)


class Water(_Table):
    """Where the profile comes from."""

    file: str = Field(min_length=1)
    cast: str | None = None
    equation: str = "teos10"
    salinity: float | None = Field(default=None, ge=0, le=50)
    instrument: Literal["float", "ctd", "xbt"] | None = None
    columns: dict[str, str] = Field(default_factory=dict)


class Source(_Table):
    """The source of sound."""

    depth: float = Field(ge=0, le=12_000)


class Seabed(_Table):
    """A flat seabed; without it the deepest level is the bottom."""

    depth: float | None = Field(default=None, gt=0, le=12_000)


class Rays(_Table):
    """The fan of rays."""

    max_range: float = Field(gt=0, le=20_100_000)
    lowest_angle: float = Field(default=-20.0, ge=-90, le=90)
    highest_angle: float = Field(default=20.0, ge=-90, le=90)
    number: int = Field(default=41, ge=1, le=1_000_000)
    points: int = Field(default=0, ge=0, le=1_000_000)
    max_surface_bounces: int = Field(default=10_000, ge=0, le=10_000)
    max_seabed_bounces: int = Field(default=10_000, ge=0, le=10_000)


class Shadow(_Table):
    """Whether shadow zones are wanted, and on how fine a grid."""

    wanted: bool = False
    depths: int = Field(default=201, ge=2, le=5000)
    ranges: int = Field(default=501, ge=2, le=20_000)


class RaysPlan(_Table):
    """What `ocean-sound rays` is to do."""

    title: str = ""
    water: Water
    source: Source
    rays: Rays
    seabed: Seabed = Seabed()
    shadow: Shadow = Shadow()


def read_rays_plan(path: str | Path) -> RaysPlan:
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
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     plan = Path(folder) / "plan.toml"
    ...     _ = plan.write_text('water.file = "cast.csv"\nsource.depth = 30.0\nrays.max_range = 5000.0\n')
    ...     read_rays_plan(plan).rays.number
    41
    """
    try:
        with Path(path).open("rb") as file:
            fields = tomllib.load(file)
    except OSError as error:
        raise PlanError(f"{path}: can't be read: {error.strerror or error}") from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise PlanError(f"{path}: is not TOML: {error}") from error
    try:
        return RaysPlan.model_validate(fields)
    except ValidationError as error:
        raise PlanError("\n".join(f"{path}: {_told(fault, RaysPlan)}" for fault in error.errors())) from None


def _told(fault: Any, plan: type[BaseModel]) -> str:
    """One line for one fault: the field, the value found, and what would be accepted."""
    place = [str(part) for part in fault["loc"]]
    field = ".".join(place)
    kind, found = fault["type"], fault["input"]
    if kind == "missing":
        return f"field '{field}' is missing: {_wanted(plan, place)}"
    if kind == "extra_forbidden":
        known = list(_model_at(plan, place[:-1]).model_fields)
        near = difflib.get_close_matches(place[-1], known, n=1)
        hint = f"did you mean '{near[0]}'?" if near else f"known here: {', '.join(known)}"
        return f"field '{field}' is unknown: {hint}"
    return f"field '{field}' is {found!r}: {_wanted(plan, place)}"


def _model_at(plan: type[BaseModel], place: list[str]) -> type[BaseModel]:
    for part in place:
        inner = plan.model_fields[part].annotation if part in plan.model_fields else None
        if not (isinstance(inner, type) and issubclass(inner, BaseModel)):
            break
        plan = inner
    return plan


_KINDS = {
    float: "a number",
    float | None: "a number",
    int: "a whole number",
    str: "a text",
    str | None: "a text",
    bool: "true or false",
    Literal["float", "ctd", "xbt"] | None: "'float', 'ctd' or 'xbt'",
    dict[str, str]: "a table of names and column headers",
}


def _wanted(plan: type[BaseModel], place: list[str]) -> str:
    """What a field accepts, from its own declaration."""
    model, name = _model_at(plan, place[:-1]), place[-1]
    if name not in model.model_fields:
        return f"give {_KINDS[str]}"
    field = model.model_fields[name]
    kind: Any = field.annotation
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        return f"give a table [{'.'.join(place)}] with {', '.join(kind.model_fields)}"
    words = {"ge": "at least", "gt": "above", "le": "at most", "min_length": "not shorter than"}
    limits = [
        f"{text} {getattr(bound, mark):g}"
        for bound in field.metadata
        for mark, text in words.items()
        if getattr(bound, mark, None) is not None
    ]
    return " ".join(["give", _KINDS.get(kind, "a value"), " and ".join(limits)]).rstrip()
