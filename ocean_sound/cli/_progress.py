"""How far a command is: one bar on a terminal, nothing elsewhere."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, Protocol

if TYPE_CHECKING:
    from collections.abc import Iterator

_SETTLED = 0.5  # s before a rate says anything


class Told(Protocol):
    """What a command calls as it goes on."""

    def __call__(self, what: str, done: float, of: float, *, count: int | None = None, unit: str = "") -> None:
        """Say that so much of something is done; of 1 or less if there is no telling how much it is.

        count, unit: how many of what there are so far, where their rate is of interest.
        """


@contextmanager
def progress(*, quiet: bool) -> Iterator[Told]:
    """A bar with rate and time left, for the part of the work that is being done."""
    if quiet or not sys.stderr.isatty():
        yield _nothing
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn, TimeRemainingColumn

    columns = (
        TextColumn("{task.description}"), BarColumn(), TextColumn("{task.fields[counted]}"), TimeElapsedColumn(),
        TextColumn("left"), TimeRemainingColumn(),
    )  # fmt: skip
    with Progress(*columns, console=Console(stderr=True), transient=True) as bars:
        parts: dict[str, Any] = {}

        def told(what: str, done: float, of: float, *, count: int | None = None, unit: str = "") -> None:
            if what not in parts:
                for part in parts.values():
                    bars.update(part, visible=False)
                parts[what] = bars.add_task(what, total=None, counted="")
            elapsed = bars.tasks[parts[what]].elapsed or 0.0
            counted = "" if count is None else f"{count:,} {unit}"
            if count is not None and elapsed > _SETTLED:
                counted += f", {count / elapsed:,.0f}/s"
            bars.update(parts[what], completed=done, total=of if of > 1 else None, counted=counted)

        yield told


def _nothing(what: str, done: float, of: float, *, count: int | None = None, unit: str = "") -> None:
    """Where nobody looks."""
