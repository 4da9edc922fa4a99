"""Published check values, handed to the tests that claim them.

A test marked `@pytest.mark.published("ss.mackenzie", ...)` with an argument `check` runs once for each check value
whose id begins with one of the prefixes; the test id is the id of the check. `values.json` says where each value
comes from.
"""

from __future__ import annotations

import ast
import json
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np
import pytest

FOLDER = Path(__file__).parent


@dataclass(frozen=True)
class Check:
    """One check value: inputs by name, the value expected, and how near is near enough."""

    id: str
    section: int
    inputs: dict[str, float]
    units: dict[str, str]
    expected: float
    tolerance: float
    source: str

    def __getitem__(self, name: str) -> float:
        return self.inputs[name]

    def agrees(self, value: float) -> None:
        """Assert that a value is the expected one within the tolerance."""
        error = abs(float(np.asarray(value)) - self.expected)
        assert error <= self.tolerance, (
            f"{self.id}: {value!r}, expected {self.expected} within {self.tolerance}; {self.source}"
        )


@cache
def load() -> dict:
    with (FOLDER / "values.json").open(encoding="utf-8") as file:
        return json.load(file)


@cache
def checks() -> tuple[Check, ...]:
    return tuple(
        Check(
            id=entry["id"],
            section=entry["section"],
            inputs={name: given["value"] for name, given in entry["inputs"].items()},
            units={name: given["units"] for name, given in entry["inputs"].items()},
            expected=entry["expected"],
            tolerance=entry["tolerance"],
            source=entry["source"],
        )
        for entry in load()["checks"]
    )


def pytest_configure(config: pytest.Config) -> None:
    config.addinivalue_line("markers", "published(*prefixes): run for each published check whose id begins so")


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    marker = metafunc.definition.get_closest_marker("published")
    if marker is None or "check" not in metafunc.fixturenames:
        return
    chosen = [check for check in checks() if check.id.startswith(marker.args)]
    for prefix in marker.args:
        if not any(check.id.startswith(prefix) for check in chosen):
            raise pytest.UsageError(f"{metafunc.definition.nodeid}: no published check begins with {prefix!r}")
    metafunc.parametrize("check", chosen, ids=[check.id for check in chosen])


@pytest.fixture
def coefficients() -> dict:
    """The coefficients as printed, by equation."""
    return load()["coefficients"]


@pytest.fixture
def cross_model() -> dict:
    """Several equations side by side."""
    return load()["cross_model"]


@pytest.fixture
def all_checks() -> tuple[Check, ...]:
    return checks()


@pytest.fixture
def claimed_prefixes() -> list[str]:
    """The prefixes that the tests of this folder claim, read from their source."""
    prefixes = []
    for path in sorted(FOLDER.glob("test_*.py")):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Call) and ast.unparse(node.func) == "pytest.mark.published":
                prefixes += [argument.value for argument in node.args]
    return prefixes
