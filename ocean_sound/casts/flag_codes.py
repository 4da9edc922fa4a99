"""The flags of other schemes, turned into QARTOD's.

A scheme is taken from what the file says: the meanings beside the values (CF, section 3.5), a variable that the
flags refer to, or a named convention. Flags whose scheme nothing tells are not guessed: 1 is 'good' in most schemes,
'not calibrated' in one and 'bad' in some.

Sources. QARTOD: IOOS manuals. Argo: user's manual, reference table 2 (IMOS set 1, OceanSITES, GTSPP and SeaDataNet use
the same digits). WOCE: Operations Manual WHPO 91-1, tables of CTD and water sample codes. WOD: World Ocean Database
user's manual, tables of observed-level and profile flags. IMOS: netCDF conventions, quality control sets. All but Argo
from memory; the meanings that WOD, IMOS and WOCE files carry themselves agree with them.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np

from .cast import FAIL, MISSING, NOT_EVALUATED, PASS, SUSPECT

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from numpy.typing import NDArray

    from .store import Store, Variable

QARTOD = {1: PASS, 2: NOT_EVALUATED, 3: SUSPECT, 4: FAIL, 9: MISSING}
ARGO = {
    0: NOT_EVALUATED,
    1: PASS,
    2: PASS,  # probably good
    3: SUSPECT,  # probably bad
    4: FAIL,
    5: PASS,  # changed
    8: PASS,  # estimated
    9: MISSING,
}
WOCE_CTD = {
    1: NOT_EVALUATED,  # not calibrated
    2: PASS,  # acceptable
    3: SUSPECT,  # questionable
    4: FAIL,  # bad
    5: MISSING,  # not reported
    6: NOT_EVALUATED,  # interpolated over more than 2 dbar
    7: PASS,  # despiked
    9: MISSING,  # not sampled
}
WOCE_SAMPLE = {
    1: NOT_EVALUATED,  # sample drawn, analysis not received
    2: PASS,  # acceptable
    3: SUSPECT,  # questionable
    4: FAIL,  # bad
    5: MISSING,  # not reported
    6: PASS,  # mean of replicates
    7: NOT_EVALUATED,  # read off a chromatogram by hand
    8: NOT_EVALUATED,  # read off a chromatogram by hand, irregular
    9: MISSING,  # not drawn
}
# Of a value at its level: out of its range it is bad; what fails against its neighbours may be true.
WOD = {0: PASS, 1: FAIL, 2: SUSPECT, 3: SUSPECT, 4: SUSPECT, 5: SUSPECT, 6: FAIL, 7: FAIL, 8: FAIL, 9: FAIL}
_IMOS_SETS = {1: ARGO, 2: ARGO, 4: WOCE_CTD}

# What the netCDF library puts where no flag was written (netcdf.h).
_DEFAULT_FILLS = (-127.0, 255.0, -32767.0, -2147483647.0)

# The first that is found in a meaning decides: 'bad_data_that_are_potentially_correctable' before 'bad'.
_WORDS: tuple[tuple[str, int], ...] = (
    (r"not_used|unused|reserved|spare", SUSPECT),  # a code that should not occur
    (r"missing|not_reported|not_sampled|not_drawn|no_data|absent|no_value", MISSING),
    (
        r"not_evaluated|no_qc|no_quality|not_checked|not_performed|not_calibrated|unknown|no_flag|unflagged",
        NOT_EVALUATED,
    ),
    (r"not_(yet_)?(qc|controlled|assessed|tested|received)|(^|_)raw", NOT_EVALUATED),
    (r"probably_bad|potentially_correctable|possibly_bad|prob_bad", SUSPECT),
    (r"suspect|suspicious|questionable|doubtful|dubious|high_interest|uncertain", SUSPECT),
    (r"range_out|out_of_range|out_of_valid|range\+|\+range", FAIL),
    (r"not_(pass|good|valid|accept|ok)|no_good|(un|not_)accept|incorrect|inaccurate", FAIL),
    (r"fail|bad|wrong|erroneous|invalid|reject|remove|outlier|spike(?<!despike)", FAIL),
    (r"inversion|gradient|anomaly|duplicate|sd_out|cruise", SUSPECT),
    (r"interpolat|estimat|chromatogra|nominal|below_detection|in_excess|sample_drawn", NOT_EVALUATED),
    (r"good|pass|accept|correct|(^|_)ok|valid|changed|despiked|replicate|adjusted|modified|clean", PASS),
)
_NAMED: tuple[tuple[str, Mapping[int, int]], ...] = (
    (r"qartod", QARTOD),
    (r"woce", WOCE_CTD),
    (r"argo|imos standard|iode|oceansites|gtspp|seadatanet|sdn:|copernicus|reference table 2", ARGO),
)
_SUFFIXES = (
    *("_flag", "_QC", "_qc", "_quality_control", "_quality_flag", "_QC_flag", "_FLAG_W", "_qcflag", "_SEADATANET_QC"),
    *("_IQUODflag", "_WODflag", "_WODprofileflag", "_status_flag"),
)
# A test that passed outweighs one that was not run; one that failed outweighs all.
_RANK = np.zeros(256, np.int8)
_RANK[[PASS, SUSPECT, FAIL, MISSING]] = (1, 2, 4, 3)


class UnknownSchemeError(ValueError):
    """Flags that nothing in the file explains."""


@dataclass(frozen=True)
class Scheme:
    """What the codes of one flag variable mean.

    Parameters
    ----------
    codes : mapping of int or str to int
        Code to QARTOD flag.
    bits : bool
        Whether the codes are bits that may be set together.
    fills : tuple of float
        Codes that stand for 'no flag'.
    """

    codes: Mapping[Any, int]
    bits: bool = False
    fills: tuple[float, ...] = field(default=())

    def translate(self, raw: NDArray[Any]) -> tuple[NDArray[np.int8], tuple[str, ...]]:
        """QARTOD flags, and the codes that the scheme does not know: these are taken as suspect."""
        if raw.dtype.kind in "SUO":
            codes = np.char.strip(raw.astype(str))
            codes = np.char.strip(codes, "\x00")
        elif self.bits:
            return self._translate_bits(raw.astype(np.int64)), ()
        else:
            codes = raw
        flags = np.full(raw.shape, SUSPECT, np.int8)
        unknown = []
        for code in np.unique(codes).tolist():
            here = codes == code
            if code != code or code in self.fills or code == "":  # noqa: PLR0124
                flags[codes != codes if code != code else here] = NOT_EVALUATED  # noqa: PLR0124
            elif _as_code(code) in self.codes:
                flags[here] = self.codes[_as_code(code)]
            else:
                unknown.append(str(code))
        return flags, tuple(unknown)

    def _translate_bits(self, raw: NDArray[np.int64]) -> NDArray[np.int8]:
        flags = np.full(raw.shape, PASS, np.int8)
        for bit, flag in self.codes.items():
            flags = worst(flags, np.where((raw & bit) == bit, flag, PASS).astype(np.int8)) if bit else flags
        return flags


def _as_code(code: Any) -> Any:
    """A code as it stands in a table: digits are numbers whether they stand as text or not."""
    try:
        return int(code) if float(code).is_integer() else code
    except (TypeError, ValueError, OverflowError):
        return code


def worst(first: NDArray[np.int8], second: NDArray[np.int8]) -> NDArray[np.int8]:
    """The heavier of two verdicts, level by level."""
    chosen: NDArray[np.int8] = np.where(_RANK[second.view(np.uint8)] > _RANK[first.view(np.uint8)], second, first)
    return chosen


@lru_cache(maxsize=4096)
def meaning_of(word: str) -> int | None:
    """The QARTOD flag for the meaning of a code in words; None where the words say nothing.

    >>> meaning_of("Bad_data_that_are_potentially_correctable"), meaning_of("probably_good_data"), meaning_of("blue")
    (3, 1, None)
    """
    plain = re.sub(r"[\s\-]+", "_", word.strip().lower())
    for pattern, flag in _WORDS:
        if re.search(pattern, plain):
            return flag
    return None


def companions(store: Store, key: str) -> Iterator[Variable]:
    """The flag variables that belong to a variable: those it names, else those with a name that says so."""
    variable = store.variables[key]
    named = [*variable.text("ancillary_variables").replace(",", " ").split(), variable.text("OBS_QC_VARIABLE")]
    for name in dict.fromkeys([*named, *_suffixed(key)]):
        found = store.variables.get(name)
        if found is not None and _is_flag(found, name, key):
            yield found


def _is_flag(variable: Variable, name: str, key: str) -> bool:
    if name == f"{key}_origin":
        return False  # how a level came about, in flag_values too
    standard = variable.text("standard_name")
    if standard and not standard.endswith(("flag", "_test")):
        return False  # standard_error, number_of_observations
    if standard or any(variable.get(about) is not None for about in ("flag_values", "flag_masks", "flag_meanings")):
        return True
    return name in _suffixed(key) or name == "OBS_QC_VARIABLE"


@lru_cache(maxsize=4096)
def _suffixed(key: str) -> tuple[str, ...]:
    return tuple(f"{key}{suffix}" for suffix in _SUFFIXES)


def scheme_of(store: Store, variable: Variable) -> Scheme:
    """The scheme of a flag variable.

    Raises
    ------
    UnknownSchemeError
        Neither meanings nor a convention tell it; the text says what was found.
    """
    declared = tuple(
        float(fill)
        for name in ("_FillValue", "missing_value")
        if (found := variable.get(name)) is not None and not isinstance(found, str)
        for fill in np.ravel(np.asarray(found)).tolist()
        if isinstance(fill, int | float)
    )
    fills = (*declared, *_DEFAULT_FILLS)
    explained = variable
    refers = variable.text("flag_definitions")
    if refers in store.variables:
        explained = store.variables[refers]
    found = _by_meanings(explained, fills)
    if found is not None:
        return found
    conventions = " ".join(
        variable.text(name)
        for name in ("quality_control_conventions", "Conventions", "conventions", "units", "comment")
    )
    table = _named(conventions)
    if table is None and (number := _set_number(variable, store)) is not None:
        table = _IMOS_SETS.get(number)
    if table is None and variable.name.endswith("_WODflag"):
        table = WOD
    if table is None:
        table = _named(" ".join((store.text("Conventions"), store.text("conventions"), store.text("DATA_TYPE"))))
    if table is None:
        raise UnknownSchemeError("no flag_meanings and no known convention say what its codes mean")
    return Scheme(table, fills=fills)


def _named(conventions: str) -> Mapping[int, int] | None:
    return next((table for pattern, table in _NAMED if re.search(pattern, conventions.lower())), None)


def _set_number(variable: Variable, store: Store) -> int | None:
    for given in (variable.get("quality_control_set"), store.get("quality_control_set")):
        if given is not None:
            try:
                return int(float(given if isinstance(given, str) else np.ravel(given)[0]))
            except (TypeError, ValueError, IndexError, OverflowError):
                return None
    return None


def _by_meanings(variable: Variable, fills: tuple[float, ...]) -> Scheme | None:
    """By flag_values (or flag_masks) and flag_meanings; None where they are absent or don't match."""
    masks = variable.get("flag_masks")
    values = _codes(masks if masks is not None else variable.get("flag_values"))
    if not values:
        return None
    meanings = [word for word in re.split(r"[\s,;]+", variable.text("flag_meanings")) if word]
    if not meanings:
        return Scheme(QARTOD, fills=fills) if values == list(QARTOD) else None
    if len(meanings) != len(values):
        return None
    codes = {}
    for code, word in zip(values, meanings, strict=True):
        flag = meaning_of(word)
        # a bit that is set says that something is amiss; a code in words unknown to us can't be called good
        codes[code] = SUSPECT if flag is None else flag
    if masks is not None:
        return Scheme({code: flag for code, flag in codes.items() if isinstance(code, int)}, bits=True, fills=fills)
    return Scheme(codes, fills=fills)


def _codes(given: Any) -> list[Any]:
    """The values of flag_values, whether numbers, text between blanks or commas ('0b, 1b' too), or characters."""
    if given is None:
        return []
    if isinstance(given, str):
        parts = [part for part in re.split(r"[\s,;]+", given) if part]
        return [_as_code(re.sub(r"(?<=\d)[bBsS]$", "", part)) for part in parts]
    return [_as_code(code) for code in np.ravel(given).tolist()]
