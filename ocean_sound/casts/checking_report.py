"""What the tests found: a flag for each test, variable and level, and for what concerns a cast as a whole."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..files.cf import FLAG_MEANINGS, FLAG_VALUES
from .cast import FAIL, MISSING, NOT_EVALUATED, PASS, SUSPECT

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    import xarray as xr
    from numpy.typing import NDArray

    Flags = NDArray[np.int8]

_WORDS = {PASS: "pass", NOT_EVALUATED: "not_evaluated", SUSPECT: "suspect", FAIL: "fail", MISSING: "missing"}
# Tests that have a standard name of their own in the CF table (version 83); the others are quality_flag.
_STANDARD_NAMES = {
    "location": "location_test_quality_flag",
    "gross_range": "gross_range_test_quality_flag",
    "climatology": "climatology_test_quality_flag",
    "spike": "spike_test_quality_flag",
    "rate_of_change": "rate_of_change_test_quality_flag",
    "flat_line": "flat_line_test_quality_flag",
}
_SHOWN = 8  # runs of levels that a note names


@dataclass(frozen=True, eq=False)
class CheckReport:
    """Flags of each test by itself.

    Parameters
    ----------
    thresholds : str
        Name of the set, or the file, by which was judged.
    id : tuple of str
        Names of the casts.
    row_size : numpy.ndarray of int, shape (casts,)
        Levels of each cast.
    levels : mapping of str to mapping of str to numpy.ndarray of int8, shape (levels of all casts,)
        By test and variable the QARTOD flags: 1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing.
    casts : mapping of str to numpy.ndarray of int8, shape (casts,)
        By test the flags of ``location``, ``date`` and ``truncated``.
    notes : tuple of tuple of str
        For each cast what was found, in words.
    """

    thresholds: str
    id: tuple[str, ...]
    row_size: NDArray[np.int64]
    levels: Mapping[str, Mapping[str, Flags]]
    casts: Mapping[str, Flags]
    notes: tuple[tuple[str, ...], ...]

    def of_cast(self, index: int) -> CheckReport:
        """The report of one of the casts.

        Parameters
        ----------
        index : int
            Which, from 0.

        Returns
        -------
        CheckReport
        """
        index = range(len(self.id))[index]
        start = int(self.row_size[:index].sum())
        rows = slice(start, start + int(self.row_size[index]))
        return CheckReport(
            self.thresholds,
            self.id[index : index + 1],
            self.row_size[index : index + 1],
            {test: {name: flag[rows] for name, flag in flags.items()} for test, flags in self.levels.items()},
            {test: flag[index : index + 1] for test, flag in self.casts.items()},
            self.notes[index : index + 1],
        )

    def counts(self) -> dict[str, dict[str, dict[str, int]]]:
        """How many levels have which flag, by test and variable; casts for the tests of a cast as a whole.

        Returns
        -------
        dict
            ``{"spike": {"temperature": {"pass": 998, "fail": 1, ...}}, "location": {"cast": {...}}}``; flags that no
            level has are left out.
        """
        found = {test: {name: _counted(flag) for name, flag in flags.items()} for test, flags in self.levels.items()}
        return {**{test: {"cast": _counted(flag)} for test, flag in self.casts.items()}, **found}

    def lines(self) -> list[str]:
        """The counts of suspect and failed, in words: a line for each test and variable.

        Returns
        -------
        list of str
        """
        lines = []
        for test, by_name in self.counts().items():
            for name, count in by_name.items():
                judged = sum(count.get(word, 0) for word in ("pass", "suspect", "fail"))
                what = f"{test.replace('_', ' ')}, {name.replace('_', ' ')}"
                lines.append(
                    f"{what}: {judged} judged, {count.get('suspect', 0)} suspect, {count.get('fail', 0)} failed"
                    if judged
                    else f"{what}: not judged"
                )
        return lines

    def to_dataset(self) -> xr.Dataset:
        """The flags as an `xarray.Dataset` by the CF conventions.

        Returns
        -------
        xarray.Dataset
            ``<variable>_<test>_flag`` on ``obs`` (``level`` for one cast), ``<test>_flag`` on ``cast``; with
            ``row_size`` and ``cast_id``.
        """
        import xarray as xr

        dimension = "level" if len(self.id) == 1 else "obs"
        variables: dict[str, Any] = {
            f"{name}_{test}_flag": (dimension, flag, _attributes(test, name.replace("_", " ")))
            for test, flags in self.levels.items()
            for name, flag in flags.items()
        }
        variables |= {f"{test}_flag": ("cast", flag, _attributes(test, "cast")) for test, flag in self.casts.items()}
        variables["row_size"] = ("cast", self.row_size, {"long_name": "number of levels of the cast", "units": "1"})
        return xr.Dataset(variables, {"cast_id": ("cast", list(self.id))}, {"thresholds": self.thresholds})


def _counted(flags: Flags) -> dict[str, int]:
    values, counts = np.unique(flags, return_counts=True)
    return {_WORDS[value]: count for value, count in zip(values.tolist(), counts.tolist(), strict=True)}


def _attributes(test: str, what: str) -> dict[str, object]:
    return {
        "long_name": f"{test.replace('_', ' ')} test of the {what}",
        "standard_name": _STANDARD_NAMES.get(test, "quality_flag"),
        "flag_values": np.array(FLAG_VALUES, np.int8),
        "flag_meanings": FLAG_MEANINGS,
    }


def levels_in_words(levels: Iterable[int]) -> str:
    """Numbers of levels, counted from 1, with runs drawn together.

    Parameters
    ----------
    levels : iterable of int
        Ascending, counted from 0.

    Returns
    -------
    str

    Examples
    --------
    >>> levels_in_words([2]), levels_in_words([0, 4, 5, 6])
    ('level 3', 'levels 1, 5-7')
    """
    numbers = [level + 1 for level in levels]
    runs: list[list[int]] = []
    for number in numbers:
        if runs and number == runs[-1][1] + 1:
            runs[-1][1] = number
        else:
            runs.append([number, number])
    shown = ", ".join(str(first) if first == last else f"{first}-{last}" for first, last in runs[:_SHOWN])
    more = f" and more, {len(numbers)} in all" if len(runs) > _SHOWN else ""
    return f"level{'' if len(numbers) == 1 else 's'} {shown}{more}"
