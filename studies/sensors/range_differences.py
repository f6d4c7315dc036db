"""A sensor of one's own: how much farther a target is from two outposts than from the main post.

Listening posts that hear the same sound at different times measure such differences, times the
speed of sound. A study names the sensor as

    kind = "sensors/range_differences.py:range_differences"

and states noise, region and units itself. The second function is optional: without it, the
derivative is taken by central differences.
"""

import math


def range_differences(parameters, site, state, out):
    """Write the expected measurement of a state into out.

    parameters  positions of the two outposts, as the study states them: x, y, x, y in m
    site        position and velocity of the main post, in m and m/s
    state       position of the target, its velocity, then what else its motion holds
    out         one number for each component of the measurement, in m and rad
    """
    direct = math.hypot(state[0] - site[0], state[1] - site[1])
    for post in range(2):
        x, y = parameters[2 * post], parameters[2 * post + 1]
        out[post] = math.hypot(state[0] - x, state[1] - y) - direct


def range_differences_jacobian(parameters, site, state, out):
    """Write the derivative of the measurement by the state into out, which comes full of zeros."""
    direct = math.hypot(state[0] - site[0], state[1] - site[1])
    for post in range(2):
        x, y = parameters[2 * post], parameters[2 * post + 1]
        distance = math.hypot(state[0] - x, state[1] - y)
        out[post, 0] = (state[0] - x) / distance - (state[0] - site[0]) / direct
        out[post, 1] = (state[1] - y) / distance - (state[1] - site[1]) / direct
