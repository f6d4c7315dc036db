"""Which linearisation a filter uses: the class of its settings, so that only one is compiled.

Each gives four helpers, with the arguments of the first-order ones.
"""

from __future__ import annotations

from filters.compiled import chosen_by_type
from filters.linearisation.converted import (
    Converted,
    compare_positions,
    given_position,
    positions_are_measured,
)
from filters.linearisation.first_order import (
    ByJacobian,
    compare_measurements,
    first_order,
    given_measurement,
    move_by_jacobian,
)
from filters.linearisation.iterated import Iterated, given_iterated
from filters.linearisation.rules import PointRule
from filters.linearisation.sigma_points import by_sigma_points, move_by_points

# Move a Gaussian on by the target's motion.
move = chosen_by_type(
    "how",
    {
        ByJacobian: move_by_jacobian,
        Iterated: move_by_jacobian,
        PointRule: move_by_points,
        Converted: move_by_jacobian,
    },
)
# Fill what all detections of a scan share; False if nothing can be said of the scan.
predict_measurement = chosen_by_type(
    "how",
    {
        ByJacobian: first_order,
        Iterated: first_order,
        PointRule: by_sigma_points,
        Converted: positions_are_measured,
    },
)
# The squared distance of one detection.
compare = chosen_by_type(
    "how",
    {
        ByJacobian: compare_measurements,
        Iterated: compare_measurements,
        PointRule: compare_measurements,
        Converted: compare_positions,
    },
)
# Write the state given the detection just compared; the log of that detection's density.
given_detection = chosen_by_type(
    "how",
    {
        ByJacobian: given_measurement,
        Iterated: given_iterated,
        PointRule: given_measurement,
        Converted: given_position,
    },
)
