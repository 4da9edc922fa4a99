"""Fields of a TOML file checked by a pydantic model, with one line for each field at fault.

Imported only where a TOML file is at hand: pydantic costs more time than a short command has.
"""

from __future__ import annotations

import difflib
import tomllib
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, Literal, TypeVar, Union, get_args, get_origin

from pydantic import BaseModel, ConfigDict, ValidationError

if TYPE_CHECKING:
    from collections.abc import Mapping
    from os import PathLike


class Fields(BaseModel):
    """The root of all models of TOML files: nothing unknown, nothing of another type, nothing infinite."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)


Model = TypeVar("Model", bound=BaseModel)


def load_toml(path: str | PathLike[str], *, error: type[Exception]) -> dict[str, Any]:
    """The content of a TOML file.

    Raises
    ------
    error
        The file can't be read, or is not TOML.
    """
    try:
        with Path(path).open("rb") as file:
            return tomllib.load(file)
    except OSError as trouble:
        raise error(f"{path}: can't be read: {trouble.strerror or trouble}") from trouble
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as trouble:
        raise error(f"{path}: is not TOML: {' '.join(str(trouble).split())}") from trouble


def checked(model: type[Model], fields: Mapping[str, Any], where: str, *, error: type[Exception]) -> Model:
    """The fields as the model has them.

    Raises
    ------
    error
        A field is missing, unknown or impossible; one line for each, with the field, the value and what would do.
    """
    try:
        return model.model_validate(fields)
    except ValidationError as faults:
        lines = dict.fromkeys(_told(fault, model) for fault in faults.errors())
        raise error("\n".join(f"{where}: {line}" for line in lines)) from None


def _told(fault: Any, model: type[BaseModel]) -> str:
    place = [str(part) for part in fault["loc"]]
    kind, found = fault["type"], fault["input"]
    if kind == "extra_forbidden":
        known = list(_model_at(model, place[:-1]).model_fields)
        near = difflib.get_close_matches(place[-1], known, n=1)
        hint = f"did you mean '{near[0]}'?" if near else f"known here: {', '.join(known)}"
        return f"field '{'.'.join(place)}' is unknown: {hint}"
    name, wanted = _wanted(model, place)
    if kind == "missing":
        return f"field '{name}' is missing: {wanted}"
    return f"field '{name}' is {found!r}: {wanted}"


def _model_at(model: type[BaseModel], place: list[str]) -> type[BaseModel]:
    for part in place:
        kind: Any = model.model_fields[part].annotation if part in model.model_fields else None
        # a table that may be left out
        inner = next((one for one in get_args(kind) if one is not type(None)), kind)
        if not (isinstance(inner, type) and issubclass(inner, BaseModel)):
            break
        model = inner
    return model


def _wanted(model: type[BaseModel], place: list[str]) -> tuple[str, str]:
    """A field by its name, and what it accepts by its own declaration."""
    depth = next(
        (at for at in range(len(place)) if place[at] not in _model_at(model, place[:at]).model_fields), len(place)
    )
    # what lies deeper is a key of a table, a place in a list or, where several types do, pydantic's name for one
    within, name = place[: max(depth - 1, 0)], place[max(depth - 1, 0)]
    owner = _model_at(model, within)
    if name not in owner.model_fields:
        return name, "give a text"
    field = owner.model_fields[name]
    kind: Any = field.annotation
    label = ".".join([*within, name])
    if kind is not None and get_origin(kind) is dict and len(place) > depth:
        label = f"{label}.{place[depth]}"
        kind = get_args(kind)[1]
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        return label, f"give a table [{label}] with {', '.join(kind.model_fields)}"
    words = {"ge": "at least", "gt": "above", "le": "at most", "min_length": "not shorter than"}
    limits = [
        f"{text} {getattr(bound, mark):g}"
        for bound in field.metadata
        for mark, text in words.items()
        if getattr(bound, mark, None) is not None
    ]
    return label, " ".join(["give", _in_words(kind), " and ".join(limits)]).rstrip()


_WORDS = {float: "a number", int: "a whole number", str: "a text", bool: "true or false"}


def _in_words(kind: Any) -> str:
    if kind in _WORDS:
        return _WORDS[kind]
    if get_origin(kind) is Annotated:
        return _in_words(get_args(kind)[0])
    inner = [one for one in get_args(kind) if one is not type(None)]
    if get_origin(kind) is Literal:
        return " or ".join(map(repr, inner))
    if get_origin(kind) is dict:
        return f"a table of names, each with {_in_words(inner[1])}"
    if get_origin(kind) in {list, tuple}:
        return f"a list, each {_in_words(inner[0])}"
    if get_origin(kind) is Union or len(inner) > 1:
        return " or ".join(dict.fromkeys(map(_in_words, inner)))
    if len(inner) == 1:
        return _in_words(inner[0])
    return {"datetime": "a date and time", "date": "a date"}.get(getattr(kind, "__name__", ""), "a value")
