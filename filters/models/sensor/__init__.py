"""Sensors: what is measured of a target, with what noise, in which region."""

from filters.models.sensor.position import PositionSensor
from filters.models.sensor.range_bearing import RangeBearingSensor

SENSORS = (PositionSensor, RangeBearingSensor)
