"""On-board storage through the span: filled by the payload, emptied by sessions, never below empty or above full."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

Rates = tuple[np.ndarray, np.ndarray]  # edges_s (m + 1,), rate_mbps (m,): piecewise constant, 0 outside


@dataclass(frozen=True)
class RecorderSeries:
    """What is stored at `time_s` (n,), and what was produced, delivered and lost up to then; all [Mbit]."""

    time_s: np.ndarray
    stored_mbit: np.ndarray
    produced_mbit: np.ndarray
    delivered_mbit: np.ndarray
    lost_mbit: np.ndarray

    def delivered_between_mbit(self, begin_s: float, end_s: float) -> float:
        before, after = np.interp([begin_s, end_s], self.time_s, self.delivered_mbit)
        return float(after - before)

    def stored_at_mbit(self, time_s: float) -> float:
        return float(np.interp(time_s, self.time_s, self.stored_mbit))


def rate_on(edges_s: np.ndarray, rates: Rates) -> np.ndarray:
    """A piecewise constant rate on a finer set of edges that contains its own."""
    own_s, rate = rates
    middle_s = (edges_s[1:] + edges_s[:-1]) / 2
    at = np.searchsorted(own_s, middle_s, side="right") - 1
    return np.where((at >= 0) & (at < len(rate)), rate[np.clip(at, 0, len(rate) - 1)], 0.0)


def simulate_recorder(
    start_mbit: float, usable_mbit: float, span_s: float, produced: Sequence[Rates], offered: Sequence[Rates]
) -> RecorderSeries:
    """Storage through the span, exact for piecewise constant rates.

    Parameters
    ----------
    start_mbit, usable_mbit : [Mbit] stored at the start, and room (capacity less reserve)
    produced : rates at which payloads fill it
    offered : rates at which sessions could empty it; what is not stored is not delivered

    Returns
    -------
    RecorderSeries with one row per edge, and one more where storage runs empty or full between two edges
    """
    own = [edges_s for edges_s, _ in (*produced, *offered)]
    edges_s = np.unique(np.clip(np.concatenate([[0.0, span_s], *own]), 0.0, span_s))
    filling = sum((rate_on(edges_s, rates) for rates in produced), np.zeros(len(edges_s) - 1))
    emptying = sum((rate_on(edges_s, rates) for rates in offered), np.zeros(len(edges_s) - 1))
    rows = _walk(edges_s.tolist(), filling.tolist(), emptying.tolist(), min(start_mbit, usable_mbit), usable_mbit)
    return RecorderSeries(*np.array(rows).T)


def _walk(edges_s: list, filling: list, emptying: list, stored: float, room: float) -> list[tuple]:
    """The recurrence: in each interval storage changes straight until it is empty or full, then stays there."""
    produced = delivered = lost = 0.0
    rows = [(edges_s[0], stored, produced, delivered, lost)]
    for begin_s, end_s, fill, empty in zip(edges_s, edges_s[1:], filling, emptying, strict=False):
        net, left_s = fill - empty, end_s - begin_s
        bound_s = (room - stored) / net if net > 0 else stored / -net if net < 0 else left_s
        if bound_s < left_s:  # a kink between two edges
            produced, delivered = produced + fill * bound_s, delivered + empty * bound_s
            stored, left_s = (room if net > 0 else 0.0), left_s - bound_s
            rows.append((begin_s + bound_s, stored, produced, delivered, lost))
            produced += fill * left_s
            delivered += (empty if net > 0 else fill) * left_s
            lost += (net if net > 0 else 0.0) * left_s
        else:
            produced, delivered = produced + fill * left_s, delivered + empty * left_s
            stored = min(max(stored + net * left_s, 0.0), room)
        rows.append((end_s, stored, produced, delivered, lost))
    return rows
