"""Candidates: every mode on every pass, with the window in which it may transmit and what it is worth and costs."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from planner.data.volume import Profile
from planner.mission.contacts import Session
from planner.mission.transmitter import Transmitter
from planner.schedule.pieces import Lines, best_volume_by_duration, lines_above


@dataclass(frozen=True, eq=False)
class EnergyCost:
    """What a session takes from the stored energy: a part for every session, and one for each second on air.

    edges_s (k + 1,), per_s_wh (k,) : the second's price through the window, which sunlight and attitude change
    """

    fixed_wh: float
    edges_s: np.ndarray
    per_s_wh: np.ndarray

    def on_air_wh(self, begin_s: float, end_s: float) -> float:
        """Price of being on air from `begin_s` to `end_s`."""
        sum_wh = np.concatenate([[0.0], np.cumsum(self.per_s_wh * np.diff(self.edges_s))])
        begin_wh, end_wh = np.interp([begin_s, end_s], self.edges_s, sum_wh)
        return float(end_wh - begin_wh)

    def at_wh(self, time_s: float) -> float:
        """Price of the second at a moment."""
        at = np.searchsorted(self.edges_s, time_s, side="right") - 1
        return float(self.per_s_wh[np.clip(at, 0, len(self.per_s_wh) - 1)])

    def mean_per_s_wh(self, begin_s: float, end_s: float) -> float:
        if end_s - begin_s < 1e-6:
            return float(self.per_s_wh.mean())
        return self.on_air_wh(begin_s, end_s) / (end_s - begin_s)

    @cached_property
    def cheapest_by_duration(self) -> Lines:
        """A lower bound on the whole price, as lines in tx_off - tx_on: the cheapest seconds of the window."""
        duration_s, saved = best_volume_by_duration(np.diff(self.edges_s), -self.per_s_wh)
        return [(-slope, self.fixed_wh - offset) for slope, offset in lines_above(duration_s, saved)]


NO_COST = EnergyCost(0.0, np.array([0.0, 1.0]), np.array([0.0]))


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
    likely: EnergyCost = NO_COST
    least: EnergyCost = NO_COST
    stays: bool = False  # it was flown in a previous plan that should change little
    near_s: tuple[float, float] | None = None  # a start and stop at which the likely cost is to be exact

    @property
    def mode(self) -> str:
        return self.transmitter.mode

    @property
    def window_s(self) -> float:
        return self.closes_s - self.opens_s

    @cached_property
    def cost_wh(self) -> tuple[float, float, float]:
        """Likely price as (flown, per second of start, per second of length), linear in them.

        Exact, with its slopes, at `near_s`; without it exact over the whole window and for none around the peak.
        """
        cost = self.likely
        if self.near_s is None:
            reach_s = self.peak_s - self.opens_s
            before, after = (
                cost.mean_per_s_wh(self.opens_s, self.peak_s),
                cost.mean_per_s_wh(self.peak_s, self.closes_s),
            )
            return cost.fixed_wh + (before - after) * reach_s, after - before, after
        on_s, off_s = self.near_s
        at_on, at_off = cost.at_wh(on_s), cost.at_wh(off_s)
        start_s, length_s = on_s - self.opens_s, off_s - on_s
        exact_wh = cost.fixed_wh + cost.on_air_wh(on_s, off_s)
        return exact_wh - (at_off - at_on) * start_s - at_off * length_s, at_off - at_on, at_off

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
    def up_to_stop(self) -> Lines:
        """An upper bound on the volume from the window's opening to tx_off, as lines in tx_off - opens_s."""
        knots_s, volume = self._inside
        return lines_above(knots_s - self.opens_s, volume - volume[0])

    @cached_property
    def lost_to_start(self) -> Lines:
        """Less than what is lost by starting late, negative, as lines in tx_on - opens_s; acquisition charged."""
        knots_s, volume = self._inside
        lines = lines_above(knots_s - self.opens_s, volume[0] - volume)
        return [(slope, offset + slope * self.profile.acquisition_s) for slope, offset in lines]

    @cached_property
    def by_duration(self) -> Lines:
        """An upper bound on volume, as lines in tx_off - tx_on."""
        knots_s, volume = self._inside
        step_s = np.diff(knots_s)
        duration_s, most_mbit = best_volume_by_duration(step_s, np.diff(volume) / step_s)
        return lines_above(duration_s + self.profile.acquisition_s, most_mbit)
