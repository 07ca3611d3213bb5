"""What a session delivers: the user information rate added up from acquisition to the end of transmission."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np


@dataclass(frozen=True)
class Profile:
    """One way of coding one mode on one pass, over the samples of that pass.

    Rates hold between two samples: an interval is worth its poorer end, and nothing unless both ends are usable, so a
    volume is never stated above what the link gives at the samples.

    Parameters
    ----------
    time_s : (k,) [s after the mission's start], rising
    usable : (k,) bool, margin (and mount, and flux limit where enforced) allow transmission
    rate_mbps, expected_rate_mbps : (k,) [Mbit/s] user information, held at the availability and averaged over fading
    margin_db : (k,) [dB] of the active MODCOD
    modcod : (k,) index into `names`, -1 where none
    acquisition_s : [s] after the transmitter comes on during which nothing is delivered
    change_s : [s] lost after each change of MODCOD
    """

    label: str
    names: tuple[str, ...]
    time_s: np.ndarray
    usable: np.ndarray
    rate_mbps: np.ndarray
    expected_rate_mbps: np.ndarray
    margin_db: np.ndarray
    modcod: np.ndarray
    acquisition_s: float
    change_s: float = 0.0

    def _interval_rate(self, rate_mbps: np.ndarray) -> np.ndarray:
        step_s = np.diff(self.time_s)
        changed = (np.diff(self.modcod) != 0) & (self.modcod[1:] >= 0) & (self.modcod[:-1] >= 0)
        lost = np.where(changed, np.minimum(1.0, self.change_s / np.maximum(step_s, 1e-9)), 0.0)
        both = self.usable[1:] & self.usable[:-1]
        return np.where(both, np.minimum(rate_mbps[1:], rate_mbps[:-1]) * (1 - lost), 0.0)

    @cached_property
    def interval_rate_mbps(self) -> np.ndarray:
        """(k - 1,) rate between samples."""
        return self._interval_rate(self.rate_mbps)

    @cached_property
    def cumulative_mbit(self) -> np.ndarray:
        """(k,) Mbit from the first sample on, acquisition not charged."""
        return _cumulative(self.time_s, self.interval_rate_mbps)

    @cached_property
    def expected_cumulative_mbit(self) -> np.ndarray:
        return _cumulative(self.time_s, self._interval_rate(self.expected_rate_mbps))

    def volume_mbit(self, tx_on_s: float, tx_off_s: float) -> float:
        """Mbit of a transmission from `tx_on_s` to `tx_off_s`, acquisition charged at its start."""
        return self._between(self.cumulative_mbit, tx_on_s, tx_off_s)

    def expected_volume_mbit(self, tx_on_s: float, tx_off_s: float) -> float:
        return self._between(self.expected_cumulative_mbit, tx_on_s, tx_off_s)

    def _between(self, cumulative_mbit: np.ndarray, tx_on_s: float, tx_off_s: float) -> float:
        begin_s = min(tx_on_s + self.acquisition_s, tx_off_s)
        begin_mbit, end_mbit = np.interp([begin_s, tx_off_s], self.time_s, cumulative_mbit)
        return float(end_mbit - begin_mbit)

    def delivery(self, tx_on_s: float, tx_off_s: float) -> tuple[np.ndarray, np.ndarray]:
        """(edges_s (m + 1,), rate_mbps (m,)) of a transmission, for the recorder."""
        begin_s = min(tx_on_s + self.acquisition_s, tx_off_s)
        inside = (self.time_s > begin_s) & (self.time_s < tx_off_s)
        edges_s = np.concatenate([[begin_s], self.time_s[inside], [tx_off_s]])
        middle = np.searchsorted(self.time_s, (edges_s[:-1] + edges_s[1:]) / 2) - 1
        known = (middle >= 0) & (middle < len(self.interval_rate_mbps))
        return edges_s, np.where(known, self.interval_rate_mbps[np.clip(middle, 0, len(self.time_s) - 2)], 0.0)

    def windows_s(self) -> list[tuple[float, float]]:
        """Unbroken stretches in which every interval is usable."""
        both = np.concatenate([[False], self.usable[1:] & self.usable[:-1], [False]])
        edges = np.flatnonzero(np.diff(both.astype(int)))
        return [(float(self.time_s[a]), float(self.time_s[b])) for a, b in edges.reshape(-1, 2)]

    def lowest_margin_db(self, tx_on_s: float, tx_off_s: float) -> float:
        """Lowest margin over a transmission, its ends interpolated; NaN where no MODCOD was active."""
        inside = (self.time_s > tx_on_s) & (self.time_s < tx_off_s)
        ends_db = np.interp([tx_on_s, tx_off_s], self.time_s, self.margin_db)
        return float(np.min(np.concatenate([ends_db, self.margin_db[inside]])))

    def segments(self, tx_on_s: float, tx_off_s: float) -> list[tuple[str, float]]:
        """(MODCOD, since when [s]) through a transmission: the coding commands that it needs."""
        inside = (self.time_s > tx_on_s) & (self.time_s < tx_off_s)
        times_s = np.concatenate([[tx_on_s], self.time_s[inside]])
        at = np.clip(np.searchsorted(self.time_s, times_s, side="right") - 1, 0, len(self.time_s) - 1)
        active = self.modcod[at]
        starts = np.flatnonzero(np.concatenate([[True], np.diff(active) != 0]) & (active >= 0))
        return [(self.names[active[i]], float(times_s[i])) for i in starts]


def _cumulative(time_s: np.ndarray, interval_rate: np.ndarray) -> np.ndarray:
    return np.concatenate([[0.0], np.cumsum(interval_rate * np.diff(time_s))])
