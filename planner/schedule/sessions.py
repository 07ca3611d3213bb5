"""Candidates: every mode on every pass, with the window in which it may transmit and what it is worth and costs."""

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from planner.data.volume import Profile
from planner.mission.contacts import Session
from planner.mission.transmitter import Transmitter
from planner.schedule.pieces import Lines, best_volume_by_duration, lines_above


@dataclass(frozen=True)
class EnergyCost:
    """What a session takes from the stored energy: a part for every session and a part for every second on air.

    `per_s_low_wh` and `per_s_high_wh` are the cheapest and dearest second of the window: between them lies every choice
    of start and stop.
    """

    fixed_wh: float
    per_s_wh: float
    per_s_low_wh: float
    per_s_high_wh: float


@dataclass(frozen=True)
class Candidate:
    """One mode on one pass, coded one way, with the window in which it may be on air."""

    row: int  # of the pass in sky.passes
    pass_id: str
    satellite: str
    station: str
    transmitter: Transmitter
    profile: Profile
    opens_s: float
    closes_s: float
    shortest_s: float
    lead_s: float  # the satellite is busy this long before transmission …
    tail_s: float  # … and this long after
    carries_commands: bool
    likely: EnergyCost = field(default=EnergyCost(0.0, 0.0, 0.0, 0.0))
    least: EnergyCost = field(default=EnergyCost(0.0, 0.0, 0.0, 0.0))

    @property
    def mode(self) -> str:
        return self.transmitter.mode

    @property
    def window_s(self) -> float:
        return self.closes_s - self.opens_s

    @property
    def longest_s(self) -> float:
        return min(self.window_s, self.transmitter.longest_on_s or np.inf)

    def session(self, tx_on_s: float, tx_off_s: float) -> Session:
        return Session(tx_on_s, tx_off_s, self.satellite, self.station, self.mode, self.pass_id)

    @cached_property
    def _inside(self) -> tuple[np.ndarray, np.ndarray]:
        """Sample times within the window, its ends included, and the volume up to each."""
        time_s = self.profile.time_s
        inside = (time_s > self.opens_s) & (time_s < self.closes_s)
        knots_s = np.concatenate([[self.opens_s], time_s[inside], [self.closes_s]])
        return knots_s, np.interp(knots_s, time_s, self.profile.cumulative_mbit)

    @cached_property
    def most_mbit(self) -> float:
        """More than any transmission in the window can deliver."""
        return min(offset + slope * self.longest_s for slope, offset in self.by_duration)

    @cached_property
    def _fastest(self) -> tuple[float, float]:
        """Middle of the fastest stretch [s] and its rate [Mbit/s]: sessions grow outwards from here."""
        knots_s, volume = self._inside
        rate = np.diff(volume) / np.diff(knots_s)
        fastest = np.flatnonzero(rate >= rate.max() * (1 - 1e-9))
        return float((knots_s[fastest[0]] + knots_s[fastest[-1] + 1]) / 2), float(rate.max())

    @property
    def peak_s(self) -> float:
        return self._fastest[0]

    def _volume_from_peak(self) -> tuple[np.ndarray, np.ndarray]:
        """Knots, the peak among them, and the volume between the peak and each (negative before it)."""
        knots_s, volume = self._inside
        peak_s, _ = self._fastest
        at_s = np.union1d(knots_s, [peak_s])
        return at_s, np.interp(at_s, knots_s, volume) - np.interp(peak_s, knots_s, volume)

    @cached_property
    def before_peak(self) -> Lines:
        """Volume from tx_on to the peak, as lines in tx_on - opens_s; acquisition charged.

        A start after the peak is charged at the fastest rate: never more volume than there is.
        """
        at_s, volume = self._volume_from_peak()
        peak_s, fastest = self._fastest
        worth = np.where(at_s <= peak_s, -volume, -fastest * (at_s - peak_s))
        return lines_above(at_s - self.opens_s - self.profile.acquisition_s, worth)

    @cached_property
    def after_peak(self) -> Lines:
        """Volume from the peak to tx_off, as lines in tx_off - opens_s; a stop before the peak as in `before_peak`."""
        at_s, volume = self._volume_from_peak()
        peak_s, fastest = self._fastest
        return lines_above(at_s - self.opens_s, np.where(at_s >= peak_s, volume, -fastest * (peak_s - at_s)))

    @cached_property
    def by_duration(self) -> Lines:
        """An upper bound on volume, as lines in tx_off - tx_on."""
        knots_s, volume = self._inside
        step_s = np.diff(knots_s)
        duration_s, most_mbit = best_volume_by_duration(step_s, np.diff(volume) / step_s)
        return lines_above(duration_s + self.profile.acquisition_s, most_mbit)
