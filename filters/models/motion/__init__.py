"""Motion models: how a target moves, for the truth and as a strategy assumes it."""

from filters.models.motion.constant_turn import ConstantTurn
from filters.models.motion.coordinated_turn import CoordinatedTurn
from filters.models.motion.nearly_constant_acceleration import NearlyConstantAcceleration
from filters.models.motion.nearly_constant_velocity import NearlyConstantVelocity
from filters.models.motion.piecewise_constant_acceleration import PiecewiseConstantAcceleration
from filters.models.motion.singer import Singer

MOTIONS = (
    NearlyConstantVelocity,
    PiecewiseConstantAcceleration,
    NearlyConstantAcceleration,
    Singer,
    CoordinatedTurn,
    ConstantTurn,
)
