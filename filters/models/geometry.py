"""Range, bearing and range rate of a state from a site.

States and sites hold position, then velocity, along the same axes.
"""

from __future__ import annotations

import math
from typing import Any

from filters.compiled import helper


@helper
def range_between(axes: int, position: Any, site: Any) -> float:
    """Distance of a position from a site, m; both begin with their axes."""
    square = 0.0
    for axis in range(axes):
        offset = position[axis] - site[axis]
        square += offset * offset
    return math.sqrt(square)


@helper
def bearing_between(position: Any, site: Any) -> float:
    """Bearing in the plane of the first two axes, counter-clockwise from the first, rad."""
    return math.atan2(position[1] - site[1], position[0] - site[0])


@helper
def range_rate_between(axes: int, state: Any, site: Any) -> float:
    """Rate of the range, m/s, positive when the distance grows; 0 right on the site."""
    square, product = 0.0, 0.0
    for axis in range(axes):
        offset = state[axis] - site[axis]
        square += offset * offset
        product += offset * (state[axes + axis] - site[axes + axis])
    return product / math.sqrt(square) if square > 0.0 else 0.0
