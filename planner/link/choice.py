"""Which MODCOD is sent when: fixed, the best fixed one for each pass, or variable during the pass.

Rows are numbered in rising rate and rising need, so a slower row works wherever a faster one does. -1 is none.
"""

import itertools

import numpy as np

# Percentiles of the year that stand for the fading distribution; rain ends at 5 %, hence the two rows there.
FADING_PCT = (0.001, 0.003, 0.01, 0.03, 0.1, 0.3, 1.0, 2.0, 5.0, 5.001, 10.0, 20.0, 30.0, 50.0)


def fastest_row(esn0_db, needed_db, allowed):
    """Index of the fastest row whose need is met (n,), -1 where none is or where `allowed` is false.

    needed_db (m,) rises: required Es/N0 plus implementation loss plus the margin asked for [dB].
    """
    return np.where(allowed, np.searchsorted(needed_db, esn0_db, side="right") - 1, -1)


def variable_rows(esn0_db, time_s, offsets, needed_db, allowed, *, hysteresis_db: float, shortest_dwell_s: float):
    """The row sent at each sample (n,) when the MODCOD follows the pass.

    The plan is made in advance, so it looks ahead. A faster row is taken only where its need is met with the
    hysteresis to spare, and any row only if it holds for the shortest dwell (or to the end of the usable stretch);
    a slower one is taken as soon as the margin asks for it.
    """
    best = fastest_row(esn0_db, needed_db, allowed)
    spare = fastest_row(np.asarray(esn0_db) - hysteresis_db, needed_db, allowed)
    holds = _least_ahead(best, time_s, offsets, shortest_dwell_s)
    chosen = np.full(len(best), -1)
    for first, end in itertools.pairwise(offsets):
        row, since_s = -1, -np.inf
        for k in range(first, end):
            if best[k] < 0:
                row = -1
            elif row < 0 or best[k] < row:
                row, since_s = holds[k], time_s[k]
            elif time_s[k] - since_s >= shortest_dwell_s and min(spare[k], holds[k]) > row:
                row, since_s = min(spare[k], holds[k]), time_s[k]
            chosen[k] = row
    return chosen


def worthwhile_rows(usable, offsets):
    """Where each fixed row is worth offering (m, n): usable, in passes where no faster row is usable as long.

    usable (m, n) : rows in rising rate, so each contains the next one's samples.
    """
    count = np.add.reduceat(usable, offsets[:-1], axis=1, dtype=int)
    next_faster = np.vstack([count[1:], np.zeros_like(count[:1])])
    return usable & np.repeat(count > next_faster, np.diff(offsets), axis=1)


def share_of_year(margin_db, unavailability_pct):
    """Share of the year in which a margin is not below zero (n,), 0 to 1.

    Parameters
    ----------
    margin_db : (k, n) [dB] at each unavailability, against the required value and implementation loss alone
    unavailability_pct : (k,) [% of the year], rising

    Log-linear between the percentiles; a margin that holds at the smallest counts as always, one that fails at the
    largest (half the year) as never.
    """
    margin_db = np.maximum.accumulate(margin_db, axis=0)
    log_pct = np.log(unavailability_pct)
    failing = np.sum(margin_db < 0, axis=0)
    right = np.clip(failing, 1, len(log_pct) - 1)
    columns = np.arange(margin_db.shape[1])
    below, above = margin_db[right - 1, columns], margin_db[right, columns]
    rise = np.where(above > below, above - below, 1.0)
    weight = np.clip(-below / rise, 0.0, 1.0)
    crossing_pct = np.exp(log_pct[right - 1] * (1 - weight) + log_pct[right] * weight)
    share = 1 - crossing_pct / 100
    return np.where(failing == 0, 1.0, np.where(failing == len(log_pct), 0.0, share))


def _least_ahead(best, time_s, offsets, window_s: float):
    """Least usable row within `window_s` from each sample on, inside its pass and its usable stretch."""
    least = best.copy()
    last = np.repeat(offsets[1:] - 1, np.diff(offsets))
    index = np.arange(len(best))
    inside = best >= 0
    for ahead in range(1, len(best)):
        target = np.minimum(index + ahead, last)
        inside = inside & (index + ahead <= last) & (time_s[target] - time_s < window_s) & (best[target] >= 0)
        if not inside.any():
            break
        least[inside] = np.minimum(least[inside], best[target][inside])
    return least
