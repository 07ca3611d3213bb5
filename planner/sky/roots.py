"""Zeros of many functions at once: one bracket each, all refined together."""

import numpy as np


def refine(function, low, high, f_low, f_high, tolerance=1e-4, most_steps=60):
    """Zeros of `function` inside [low, high], all (n,), where f_low and f_high differ in sign.

    False position with the stale end's value halved (the Illinois rule, Dowell and Jarratt 1971), which cannot leave
    its bracket. `function(time, index)` gives the values of the members `index`, (m,) each.
    """
    a, b, fa, fb = (np.array(x, dtype=float) for x in (low, high, f_low, f_high))
    zero = np.where(fa == 0, a, b)
    active = np.flatnonzero((fa != 0) & (fb != 0))
    for _ in range(most_steps):
        if not active.size:
            break
        x0, x1, y0, y1 = a[active], b[active], fa[active], fb[active]
        x = (x0 * y1 - x1 * y0) / (y1 - y0)
        x = np.where((x > np.minimum(x0, x1)) & (x < np.maximum(x0, x1)), x, (x0 + x1) / 2)
        y = function(x, active)
        crossed = (y < 0) != (y1 < 0)
        a[active] = np.where(crossed, x1, x0)
        fa[active] = np.where(crossed, y1, y0 / 2)
        b[active], fb[active], zero[active] = x, y, x
        done = (y == 0) | (np.abs(x - x1) < tolerance) | (np.abs(x1 - x0) < tolerance)
        active = active[~done]
    return zero
