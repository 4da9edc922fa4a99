"""Polynomials by Horner's rule, with no array made that is not needed."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Sequence


def polynomial(coefficients: Sequence[float], x: Any) -> Any:
    """Sum of coefficients[i] * x**i; real or complex x (a complex step differentiates the equations)."""
    if len(coefficients) == 1:
        return 0.0 * x + coefficients[0]
    result = x * coefficients[-1]
    for coefficient in coefficients[-2:0:-1]:
        result += coefficient
        result *= x
    result += coefficients[0]
    return result


def double_polynomial(rows: Sequence[Sequence[float]], x: Any, y: Any) -> Any:
    """Sum of rows[i][j] * x**i * y**j, outer powers of x."""
    result = polynomial(rows[-1], y)
    for row in rows[-2::-1]:
        result = result * x
        result = result + polynomial(row, y)
    return result
