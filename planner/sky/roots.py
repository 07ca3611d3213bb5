"""Zeros of many functions of time at once: one bracket each, all refined together."""

import numpy as np

WITHIN_S = 5e-3  # width of the last bracket; a straight line across it finds the zero to microseconds
SLOPE_STEP_S = 0.01
EVERYONE = slice(None)  # picks all members without copying them


def refine(function, low, high, f_low, f_high):
    """The zero of each function inside its bracket [low, high], all (n,), whose end values differ in sign.

    `function(time_s, k)` gives the values (m,) of the members `k` (m,) at `time_s` (m,). False position with the stale
    end's value halved, which cannot leave its bracket: the Illinois rule (Dowell, Jarratt, BIT 11, 1971, from memory).
    No step is shorter than half WITHIN_S, so that the zero is bracketed from both sides and not only approached.
    """
    a, b, fa, fb = (np.array(x, dtype=float) for x in (low, high, f_low, f_high))
    weight = fa.copy()  # of end a, halved while it is stale
    active = np.flatnonzero((fa != 0) & (fb != 0) & (np.abs(b - a) > WITHIN_S))
    while active.size:
        a1, b1, fa1, fb1, w1 = a[active], b[active], fa[active], fb[active], weight[active]
        gap = a1 - b1
        share = fb1 / (fb1 - w1)
        least = np.minimum(WITHIN_S / 2 / np.abs(gap), 0.5)
        x = b1 + gap * np.minimum(np.maximum(share, least), 1 - least)
        y = function(x, active if active.size < a.size else EVERYONE)
        crossed = (y < 0) != (fb1 < 0)
        a[active], fa[active] = np.where(crossed, b1, a1), np.where(crossed, fb1, fa1)
        weight[active] = np.where(crossed, fb1, w1 / 2)
        b[active], fb[active] = x, y
        active = active[(y != 0) & (np.abs(x - a[active]) > WITHIN_S)]
    flat = np.where(fa == fb, 1.0, fb - fa)  # only where both are 0
    return b - fb * (b - a) / flat


def crossings(function, low, high):
    """All zeros in intervals [low, high], (n,), in each of which the function turns at most once.

    Returns k (m,), the interval of each zero, and its time (m,), in no order. A zero that only touches is not found.
    """
    everyone = np.arange(len(low))
    # one call for both ends and a moment inside each: the function may have a corner at an end
    inside = np.minimum(low + SLOPE_STEP_S, high), np.maximum(high - SLOPE_STEP_S, low)
    f_low, f_high, f_after, f_before = function(np.concatenate([low, high, *inside]), np.tile(everyone, 4)).reshape(
        4, -1
    )
    differ = (f_low < 0) != (f_high < 0)
    once = np.flatnonzero(differ)
    twice, turn_s, f_turn = _turns(function, low, high, f_low, f_after - f_low, f_high - f_before, ~differ)
    k = np.concatenate([once, twice, twice])
    time_s = refine(
        lambda t, j: function(t, k[j]),
        np.concatenate([low[once], low[twice], turn_s]),
        np.concatenate([high[once], turn_s, high[twice]]),
        np.concatenate([f_low[once], f_low[twice], f_turn]),
        np.concatenate([f_high[once], f_turn, f_high[twice]]),
    )
    return k, time_s


def _turns(function, low, high, f_low, start, end, same):
    """Of the intervals `same`, those in which the function turns on the far side of zero; when, and its value there."""
    towards = np.where(f_low < 0, 1.0, -1.0)
    k = np.flatnonzero(same & (towards * start > 0) & (towards * end < 0))

    def slope(time_s, j):
        after, before = np.minimum(time_s + SLOPE_STEP_S, high[k[j]]), np.maximum(time_s - SLOPE_STEP_S, low[k[j]])
        return function(after, k[j]) - function(before, k[j])

    turn_s = refine(slope, low[k], high[k], start[k], end[k])
    f_turn = function(turn_s, k)
    over = (f_turn < 0) != (f_low[k] < 0)
    return k[over], turn_s[over], f_turn[over]
