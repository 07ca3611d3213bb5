"""Positions between the states of an ephemeris segment, how far off they may be, and whether the velocities fit.

Lagrange's polynomial through degree + 1 positions, or Hermite's through (degree + 1) / 2 positions and velocities,
around each moment; both, their remainders and derivatives after Davis, Interpolation and Approximation (from memory).
"""

import numpy as np

from planner.units import EARTH_GM_KM3_S2

KNOWN_RATE = 0.01  # of circular speed
COMPARED = 101  # moments in an overlap


def interpolate(segment, at_s, state, time_s):
    """Position (m, 3) [km] at `time_s` (m,) between states (k, 6) at `at_s` (k,), by the segment's own method."""
    near = _around(np.searchsorted(at_s, time_s), _points(segment, len(at_s)), len(at_s))
    return _blend(segment, at_s, state, near, time_s)


@np.errstate(over="ignore", invalid="ignore")  # of states microseconds and weeks apart: inf or nan says enough
def errors_km(segment):
    """About how far off the position is in the middle of each interval between n >= 3 states, (n - 1,) [km].

    Each inner state is interpolated without itself. What that misses by, over the product of the distances to its
    nodes, stands for the derivative in the polynomial's remainder; times the same product for an interval it is the
    error there. Where an orbit turns too far from state to state for that to be true, the figure is large as well.
    """
    at_s, state = _arrays(segment)
    count = len(at_s)
    points = _points(segment, count - 1)
    left_out = np.arange(1, count - 1)
    others = _around(left_out, points, count - 1)
    others = others + (others >= left_out[:, None])
    miss_km = np.linalg.norm(_blend(segment, at_s, state, others, at_s[1:-1]) - state[1:-1, :3], axis=1)
    derivative = np.pad(miss_km / _distances(segment, at_s, others, at_s[1:-1]), 1, mode="edge")
    middle_s = (at_s[1:] + at_s[:-1]) / 2
    near = _around(np.arange(1, count), points, count)
    return np.maximum(derivative[1:], derivative[:-1]) * _distances(segment, at_s, near, middle_s)


def velocity_misfits(segment):
    """How far each state's velocity is from the rate of the positions about it, (n,), as a share of circular speed.

    The rate is that of the polynomial through seven positions; what that through five differs from it by is granted.
    0 at the three states nearest to either end and where the two differ by KNOWN_RATE: there the rate is not known.
    """
    at_s, state = _arrays(segment)
    misfit = np.zeros(len(at_s))
    if len(at_s) < 7:
        return misfit
    seven, five = _rates(at_s, state, 3), _rates(at_s, state, 2)[1:-1]
    inner = state[3:-3]
    circular_km_s = np.sqrt(EARTH_GM_KM3_S2 / np.linalg.norm(inner[:, :3], axis=1))
    miss, granted = (np.linalg.norm(rate - seven, axis=1) / circular_km_s for rate in (inner[:, 3:], five))
    misfit[3:-3] = np.where(granted < KNOWN_RATE, np.maximum(miss - granted, 0.0), 0.0)
    return misfit


def farthest_apart_km(one, other, begin, end) -> float:
    """The greatest distance between what two segments of one frame say from `begin` to `end` [km]."""
    time_s = np.linspace(0.0, (end - begin).total_seconds(), COMPARED)
    (mine_s, mine), (theirs_s, theirs) = _arrays(one, begin), _arrays(other, begin)
    apart_km = interpolate(one, mine_s, mine, time_s) - interpolate(other, theirs_s, theirs, time_s)
    return float(np.linalg.norm(apart_km, axis=1).max())


def _arrays(segment, zero=None):
    """Moments (n,) [s after `zero`, or after the first] and states (n, 6)."""
    seconds = [(moment - (zero or segment.moment[0])).total_seconds() for moment in segment.moment]
    return np.array(seconds), np.array(segment.state)


def _points(segment, most: int) -> int:
    """How many states an interpolation uses, where there are `most`."""
    degree = 1 if segment.interpolation == "LINEAR" else segment.degree
    return min(max((degree + 1) // 2 if segment.interpolation == "HERMITE" else degree + 1, 2), most)


def _around(index, points: int, count: int):
    """Indices (m, points) of the states of `count` about the gaps before `index` (m,)."""
    return np.clip(index - points // 2, 0, count - points)[:, None] + np.arange(points)


def _distances(segment, at_s, near, time_s):
    """The product that stands in the remainder: of the distances of each moment to its nodes, (m,)."""
    product = np.prod(np.abs(at_s[near] - time_s[:, None]), axis=1)
    return product**2 if segment.interpolation == "HERMITE" else product


def _blend(segment, at_s, state, near, time_s):
    """Position (m, 3) at `time_s` (m,) from the states whose indices stand in `near` (m, points)."""
    nodes = at_s[near] - time_s[:, None]  # the moment itself at 0
    position_km = np.zeros((len(time_s), 3))
    for j in range(near.shape[1]):
        others = np.delete(nodes, j, axis=1)
        gaps = nodes[:, [j]] - others
        basis = np.prod(-others / gaps, axis=1)
        own = state[near[:, j]]
        if segment.interpolation == "HERMITE":
            lever = -nodes[:, j]
            weight = (1 - 2 * np.sum(1 / gaps, axis=1) * lever) * basis**2
            position_km += weight[:, None] * own[:, :3] + (lever * basis**2)[:, None] * own[:, 3:]
        else:
            position_km += basis[:, None] * own[:, :3]
    return position_km


def _rates(at_s, state, reach: int):
    """The rate of Lagrange's polynomial through each state and `reach` to either side, (n - 2 reach, 3) [km/s]."""
    middle = np.arange(reach, len(at_s) - reach)
    near = middle[:, None] + np.delete(np.arange(-reach, reach + 1), reach)
    to_node = at_s[near] - at_s[middle][:, None]
    rate_km_s = np.zeros((len(middle), 3))
    for j in range(2 * reach):
        others = np.delete(to_node, j, axis=1)
        weight = np.prod(-others / (to_node[:, [j]] - others), axis=1) / to_node[:, j]
        rate_km_s += weight[:, None] * (state[near[:, j], :3] - state[middle, :3])
    return rate_km_s
