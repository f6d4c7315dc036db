"""One Gaussian: predict it, and condition it on a measurement that is linear in the state.

Covariances are computed in their lower triangle and mirrored, so they are symmetric to the bit.
"""

from __future__ import annotations

from typing import Any

from filters.compiled import helper


@helper
def predict_covariance(n: int, jacobian: Any, noise: Any, before: Any, work: Any, out: Any) -> None:
    """Write F P F' + Q.

    jacobian F, noise Q, before P, work, out: (n, n); out must not be before.
    """
    for row in range(n):
        for column in range(n):
            value = 0.0
            for k in range(n):
                value += jacobian[row, k] * before[k, column]
            work[row, column] = value
    for row in range(n):
        for column in range(row + 1):
            value = noise[row, column]
            for k in range(n):
                value += work[row, k] * jacobian[column, k]
            out[row, column] = value
            out[column, row] = value


@helper
def innovation_covariance(
    n: int, m: int, jacobian: Any, noise: Any, covariance: Any, cross: Any, out: Any
) -> None:
    """Write P H' (n, m) and the innovation covariance S = H P H' + R (m, m)."""
    for row in range(n):
        for column in range(m):
            value = 0.0
            for k in range(n):
                value += covariance[row, k] * jacobian[column, k]
            cross[row, column] = value
    for row in range(m):
        for column in range(row + 1):
            value = noise[row, column]
            for k in range(n):
                value += jacobian[row, k] * cross[k, column]
            out[row, column] = value
            out[column, row] = value


@helper
def gain(n: int, m: int, cross: Any, factor: Any, out: Any) -> None:
    """Write K = P H' S^-1 (n, m), given P H' and the factor of S (see cholesky)."""
    for row in range(n):
        for i in range(m):  # forward: y L' = cross
            value = cross[row, i]
            for k in range(i):
                value -= out[row, k] * factor[i, k]
            out[row, i] = value * factor[i, i]
        for i in range(m - 1, -1, -1):  # backward: K L = y
            value = out[row, i]
            for k in range(i + 1, m):
                value -= out[row, k] * factor[k, i]
            out[row, i] = value * factor[i, i]


@helper
def condition_covariance(
    n: int,
    m: int,
    gain_: Any,
    cross: Any,
    jacobian: Any,
    noise: Any,
    prior: Any,
    work: Any,
    out: Any,
) -> None:
    """Write (I - K H) P (I - K H)' + K R K', Joseph's form.

    With A = (I - K H) P it is A - (A H' - K R) K', which takes fewer products.
    It stays positive definite where P - K S K' would lose its digits to cancellation, as when a
    precise measurement meets a vague prior. cross P H' (n, m); work (2, n, n).

    source      Bucy and Joseph (1968); Bar-Shalom, Li and Kirubarajan (2001), eq. 5.2.3-18
    """
    kept, left = work[0], work[1]
    for row in range(n):  # A = P - K (P H')'
        for column in range(n):
            value = prior[row, column]
            for k in range(m):
                value -= gain_[row, k] * cross[column, k]
            kept[row, column] = value
    for row in range(n):  # A H' - K R: zero but for rounding at the best gain
        for column in range(m):
            value = 0.0
            for k in range(n):
                value += kept[row, k] * jacobian[column, k]
            for k in range(m):
                value -= gain_[row, k] * noise[k, column]
            left[row, column] = value
    for row in range(n):
        for column in range(row + 1):
            value = kept[row, column]
            for k in range(m):
                value -= left[row, k] * gain_[column, k]
            out[row, column] = value
            out[column, row] = value
