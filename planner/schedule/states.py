"""What the programme knows about one satellite: stored energy and stored data without sessions, event by event."""

from dataclasses import dataclass
from itertools import accumulate

import numpy as np


@dataclass(frozen=True)
class EnergyStates:
    """Stored energy (the integral of open-circuit voltage over charge) at the corner that limits are held to.

    floor_wh (n + 1,) : the least asked at each event, at the last one for the end of the span
    gain_wh (n,) : what each interval between events adds without sessions, losses taken off, nothing spilled
    risk_wh : where the policy asks for a probability, how much above (or below) the floors this week is to stay
    """

    start_wh: float
    full_wh: float
    floor_wh: np.ndarray
    gain_wh: np.ndarray
    risk_wh: float | None = None

    @property
    def asked_wh(self) -> np.ndarray:
        """The floors (n + 1,) with the risk in them, but never above what there is without sessions."""
        if self.risk_wh is None:
            return self.floor_wh
        idle_wh = list(accumulate(self.gain_wh, lambda stored, gain: min(stored + gain, self.full_wh),
                                  initial=self.start_wh))  # fmt: skip
        return np.clip(self.floor_wh + self.risk_wh, 0.0, np.maximum(idle_wh, 0.0))


@dataclass(frozen=True)
class SatelliteStates:
    """Events (n + 1,), rising from 0 to the span's end, and what happens between them.

    Data classes run from the heaviest to the lightest. produced_mbit (classes, n), stored_mbit (classes,), weights and
    fading_per_h (classes,): of each class alone.

    `likely` has the losses that the battery will have; `least` the smallest that physics allows, for the bound.
    """

    satellite: str
    events_s: np.ndarray
    likely: EnergyStates
    least: EnergyStates
    produced_mbit: np.ndarray
    stored_mbit: np.ndarray
    room_mbit: float
    weights: np.ndarray
    fading_per_h: np.ndarray

    def shares(self, opens_s: float, closes_s: float) -> list[tuple[int, float]]:
        """(interval, share) of a window: where a session's cost and yield fall."""
        first, last = self.around(opens_s, closes_s)
        edges_s = np.clip(self.events_s[first : last + 1], opens_s, closes_s)
        lengths_s = np.diff(edges_s)
        return [(first + i, float(length / lengths_s.sum())) for i, length in enumerate(lengths_s) if length > 0]

    def around(self, opens_s: float, closes_s: float) -> tuple[int, int]:
        """The last event at or before a window opens, and the first at or after it closes."""
        first = int(np.searchsorted(self.events_s, opens_s, side="right")) - 1
        return first, int(np.searchsorted(self.events_s, closes_s, side="left"))
