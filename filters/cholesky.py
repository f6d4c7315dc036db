"""Cholesky factors of small matrices; sizes are arguments so that the compiler unrolls the loops.

A factor is kept as the lower triangle of L with the reciprocals of its diagonal in place of the
diagonal, so that solving multiplies where it would divide.
"""

from __future__ import annotations

import math
from typing import Any

from filters.compiled import helper


@helper
def factorise(n: int, matrix: Any, factor: Any) -> bool:
    """Write the factor of matrix = L L', reading the lower triangle; False if not possible.

    matrix (n, n) symmetric positive definite; factor (n, n), its upper triangle is left as it is.
    """
    for column in range(n):
        pivot = matrix[column, column]
        for k in range(column):
            pivot -= factor[column, k] * factor[column, k]
        if not pivot > 0.0:
            return False
        reciprocal = 1.0 / math.sqrt(pivot)
        factor[column, column] = reciprocal
        for row in range(column + 1, n):
            value = matrix[row, column]
            for k in range(column):
                value -= factor[row, k] * factor[column, k]
            factor[row, column] = value * reciprocal
    return True


@helper
def inverse_root_determinant(n: int, factor: Any) -> float:
    """One over the root of the determinant of L L'."""
    product = 1.0
    for i in range(n):
        product *= factor[i, i]
    return product


@helper
def squared_distance(n: int, factor: Any, difference: Any, work: Any) -> float:
    """Squared Mahalanobis distance d' (L L')^-1 d; factor (n, n), difference and work (n,)."""
    total = 0.0
    for row in range(n):
        value = difference[row]
        for k in range(row):
            value -= factor[row, k] * work[k]
        value *= factor[row, row]
        work[row] = value
        total += value * value
    return total


@helper
def factorise_semidefinite(n: int, matrix: Any, lower: Any) -> None:
    """Write L itself, for drawing noise of a covariance that may be singular, as one of rank one.

    A pivot that is zero to rounding gives a zero column. matrix, lower (n, n).
    """
    for column in range(n):
        pivot = matrix[column, column]
        for k in range(column):
            pivot -= lower[column, k] * lower[column, k]
        nothing_left = pivot <= 1e-14 * matrix[column, column]
        root = 0.0 if nothing_left else math.sqrt(pivot)
        lower[column, column] = root
        for row in range(n):
            if row < column:
                lower[row, column] = 0.0
            elif row > column:
                value = matrix[row, column]
                for k in range(column):
                    value -= lower[row, k] * lower[column, k]
                lower[row, column] = 0.0 if nothing_left else value / root
