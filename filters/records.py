"""Working memory as records: what a kernel needs beside its large arrays, behind one pointer.

An array reaches compiled code as seven or more numbers. Two dozen of them fill more stack than a
processor tells apart when it matches loads with earlier stores (4 kB), and kernels wait; fields of
a record are known when compiling. Fields that are arrays are handed to model functions as
`field[:]`, because their signatures take arrays of their own.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from filters.compiled import COMPILING


def zeroed_records(count: int, fields: Any) -> np.ndarray:
    """Records (count,) of zeros, with the fields of a dtype or of what makes one."""
    records = np.zeros(count, np.dtype(fields, align=True))
    # Plain Python needs a view for attributes that compiled code has by itself; there a field must
    # not be named as a method of arrays is.
    return records if COMPILING else records.view(np.recarray)
