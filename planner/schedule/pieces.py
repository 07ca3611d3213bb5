"""Curves as straight pieces that a linear programme can hold."""

import numpy as np

Lines = list[tuple[float, float]]  # (slope, value at 0): the curve lies on or below every line

SAME_SLOPE = 1e-6  # relative: neighbouring pieces this alike are one


def concave_hull(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Corners of the least concave curve on or above the points; `x` rises.

    Source: Andrew's monotone chain (1979), upper half.
    """
    corners: list[tuple[float, float]] = []
    for point in zip(x.tolist(), y.tolist(), strict=True):
        while len(corners) > 1 and _turns_up(corners[-2], corners[-1], point):
            corners.pop()
        corners.append(point)
    hull = np.array(corners)
    return hull[:, 0], hull[:, 1]


def _turns_up(a: tuple, b: tuple, c: tuple) -> bool:
    left, right = (b[1] - a[1]) * (c[0] - b[0]), (c[1] - b[1]) * (b[0] - a[0])
    return left <= right + SAME_SLOPE * max(abs(left), abs(right))


def lines_above(x: np.ndarray, y: np.ndarray) -> Lines:
    """The lines of the concave hull of the points."""
    corner_x, corner_y = concave_hull(x, y)
    if len(corner_x) < 2:
        return [(0.0, float(corner_y[0]))]
    slopes = np.diff(corner_y) / np.diff(corner_x)
    return [(float(k), float(v - k * u)) for k, u, v in zip(slopes, corner_x[:-1], corner_y[:-1], strict=True)]


def best_volume_by_duration(step_s: np.ndarray, rate: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The most that any set of seconds of a given total could deliver: (duration_s, volume), concave."""
    order = np.argsort(-rate, kind="stable")
    duration_s = np.concatenate([[0.0], np.cumsum(step_s[order])])
    volume = np.concatenate([[0.0], np.cumsum((rate * step_s)[order])])
    return duration_s, volume
