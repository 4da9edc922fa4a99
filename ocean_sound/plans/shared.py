"""Fields and faults that plans have in common."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, TypeAlias, TypeVar

from pydantic import Field

from ..errors import PlanError
from ..files.fields import Fields, checked, load_toml

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence
    from os import PathLike

    Plan = TypeVar("Plan", bound=Fields)

Depth: TypeAlias = Annotated[float, Field(ge=0, le=12_000)]

ABSORBS = "absorbs all"
"""The kind of a seabed that sends nothing back."""


class Sediment(Fields):
    """A seabed in numbers of its own."""

    speed: float
    density: float
    attenuation: float
    shear_speed: float = 0.0
    shear_attenuation: float = 0.0


def read(model: type[Plan], path: str | PathLike[str], faults: Callable[[Plan], Iterator[str]]) -> Plan:
    """A plan whose fields are possible each by itself and, by `faults`, together.

    Raises
    ------
    PlanError
    """
    plan = checked(model, load_toml(path, error=PlanError), str(path), error=PlanError)
    found = list(faults(plan))
    if found:
        raise PlanError("\n".join(f"{path}: field {fault}" for fault in found))
    return plan


def either(table: str, model: Fields, first: str, second: str, hint: str) -> Iterator[str]:
    """One of two fields must be given, and not both."""
    given = [getattr(model, name) is not None for name in (first, second)]
    if all(given):
        yield f"'{table}.{second}' stands beside '{table}.{first}': give one of them"
    elif not any(given):
        yield f"'{table}.{first}' is missing: give {hint}"


def places_faults(name: str, places: Sequence[Sequence[float]] | None) -> Iterator[str]:
    """Places that are none, of a list of them."""
    for at, place in enumerate(places or []):
        yield from place_faults(f"{name}[{at}]", place)


def place_faults(name: str, place: Sequence[float] | None) -> Iterator[str]:
    """A place that is none."""
    if place is not None and not (len(place) == 2 and abs(place[0]) <= 90.0 and abs(place[1]) <= 360.0):
        yield f"'{name}' is {list(place)}: give latitude and longitude in degrees, as [31.5, -64.2]"


def kind_faults(name: str, kind: str) -> Iterator[str]:
    """A sediment that nobody knows."""
    from ..section.sediments import SEDIMENTS

    if kind not in SEDIMENTS and kind != ABSORBS:
        yield f"'{name}' is {kind!r}: give {', '.join(SEDIMENTS)} or {ABSORBS!r}"
