"""Values that exist only at the scans with an estimate.

`present` (trials, scans) is False where a tracker reports 'no track'. What an array holds there
(NaN by convention) is never read. Cut arrays to the scoring window before handing them over.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]


def presence(present: ArrayLike) -> BoolArray:
    """`present` as an array; ValueError unless it is boolean, as ~ would misread 0 and 1."""
    present = np.asarray(present)
    if present.dtype != np.bool_:
        raise ValueError(f"present must be a bool array, got dtype {present.dtype}")
    return present


def values_and_presence(values: ArrayLike, present: ArrayLike) -> tuple[FloatArray, BoolArray]:
    """Both as arrays, once it is known that they fit each other.

    raises  ValueError: `present` is not boolean, the shapes differ, or a value is NaN where
            `present` is True
    """
    values, present = np.asarray(values, float), presence(present)
    if values.shape != present.shape:
        raise ValueError(
            f"values and present must have one shape, got {values.shape} and {present.shape}"
        )
    undefined = np.isnan(values) & present
    if undefined.any():
        place = tuple(int(i) for i in np.argwhere(undefined)[0])
        raise ValueError(
            f"the value at {place} (trial, scan) is NaN although an estimate is present; "
            "leave failed trials out, or mark the scan as absent"
        )
    return values, present


def mean_where_present(
    values: ArrayLike, present: ArrayLike, axis: int | None = None
) -> np.float64 | FloatArray:
    """Mean over the entries with an estimate; NaN where there is none.

    values   (trials, scans), any unit: squared errors, NEES, ...
    present  (trials, scans) bool
    axis     None: over all; 1: over scans, one mean a trial; 0: over trials, one mean a scan
    raises   ValueError as `values_and_presence`
    """
    values, present = values_and_presence(values, present)
    count = present.sum(axis=axis)
    mean = np.full(np.shape(count), np.nan)
    np.divide(values.sum(axis=axis, where=present), count, out=mean, where=count > 0)
    return mean[()]


def share_absent(present: ArrayLike) -> float:
    """Share of scans without an estimate; NaN where there are no scans at all."""
    present = presence(present)
    return float(np.mean(~present)) if present.size else np.nan
