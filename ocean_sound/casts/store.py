"""A netCDF file as the readers see it: dimensions, variables and attributes, whatever holds them underneath."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    import numpy as np
    from numpy.typing import NDArray

LARGEST = 2**25
"""Values read from one file, all variables together: 30 000 casts of 1000 levels, in some hundreds of megabytes."""


class UnfitError(ValueError):
    """What a file holds is not what it ought to be; the text says what, the caller adds the file."""


@dataclass
class Budget:
    """How many values may still be read: a small packed file can promise more than any memory holds."""

    left: int = LARGEST

    def take(self, count: int) -> None:
        """Count what is about to be read."""
        if count > self.left:
            raise UnfitError(f"more than {LARGEST} values would have to be read; split it into files of fewer casts")
        self.left -= count


def one_line(text: str) -> str:
    r"""A text from a file as it may stand in a message or note: no line ends, no control characters.

    >>> one_line("a\nb\x07c")
    'a b?c'
    """
    return "".join(letter if letter.isprintable() else "?" for letter in " ".join(text.split()))


class Owner(ABC):
    """What has attributes."""

    @abstractmethod
    def get(self, name: str) -> Any:
        """An attribute: text as str, one number or several as an array; None where it is absent."""

    @abstractmethod
    def names(self) -> tuple[str, ...]:
        """Names of all attributes."""

    def text(self, name: str) -> str:
        """A text attribute without blanks around it; empty where absent or not text."""
        value = self.get(name)
        return value.strip().strip("\x00").strip() if isinstance(value, str) else ""


class Variable(Owner):
    """A variable, not read before it is asked for."""

    name: str
    dimensions: tuple[str, ...]
    shape: tuple[int, ...]
    dtype: np.dtype[Any]

    @property
    def size(self) -> int:
        """Number of values."""
        return math.prod(self.shape)

    @property
    def ndim(self) -> int:
        """Number of dimensions."""
        return len(self.shape)

    @property
    def is_text(self) -> bool:
        """Whether it holds characters or strings."""
        return self.dtype.kind in "SUO"

    @abstractmethod
    def read(self) -> NDArray[Any]:
        """All values as they stand in the file, packed, fills among them."""


@dataclass(eq=False)
class Store:
    """An open file."""

    dimensions: Mapping[str, int]
    variables: Mapping[str, Variable]
    attributes: Owner
    close: Callable[[], None] = field(default=lambda: None)
    groups: tuple[str, ...] = ()
    _having: dict[str, list[tuple[str, Variable]]] = field(default_factory=dict, init=False)

    def having(self, name: str) -> list[tuple[str, Variable]]:
        """The variables with a text attribute of that name, and what it says; looked for once."""
        if name not in self._having:
            said = ((variable.text(name), variable) for variable in self.variables.values())
            self._having[name] = [(text, variable) for text, variable in said if text]
        return self._having[name]

    def get(self, name: str) -> Any:
        """An attribute of the file itself."""
        return self.attributes.get(name)

    def names(self) -> tuple[str, ...]:
        """Names of the attributes of the file itself."""
        return self.attributes.names()

    def text(self, name: str) -> str:
        """A text attribute of the file itself; empty where absent or not text."""
        return self.attributes.text(name)
