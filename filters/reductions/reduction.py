"""What a reduction is: a compiled function over the table of hypotheses, and the room it needs.

The function has the signature REDUCE: (hypotheses, rows, origin, settings, mixture) -> components.
When it is called, `mixture` still holds the components that the hypotheses came from; it writes the
reduced mixture in their place, weights summing to one, each component with its mode.
"""

from __future__ import annotations

import functools
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from filters.compiled import compile_to_pointer
from filters.hypotheses import REDUCE


@dataclass(frozen=True)
class Reduction:
    """One way to make a mixture small, with its settings."""

    build: Callable[[int], Callable[..., int]]  # the function, for states of n numbers
    capacity: int = 1  # most components that it leaves
    settings: np.ndarray = field(default_factory=lambda: np.zeros(1))
    depth: int = 0  # scans of associations that components keep for it
    slots: int = 1  # rooms of (n + 2, n) that it works in

    def compiled(self, n: int) -> Any:
        """The function as kernels take it, for states of n numbers."""
        return _compiled(self.build, n)


@functools.cache
def _compiled(build: Callable[[int], Callable[..., int]], n: int) -> Any:
    return compile_to_pointer(REDUCE, build(n))
