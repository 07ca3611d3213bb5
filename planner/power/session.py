"""What a session does to the power system: its phases, the panels while it points at a station, and its own loads."""

from dataclasses import dataclass

import numpy as np

from planner.mission.contacts import Session
from planner.mission.models import Mission, Satellite
from planner.mission.pointing import Law
from planner.power.intervals import merged_edges_s
from planner.power.profile import Sunshine, panels_w
from planner.sky import attitude
from planner.sky.sites import station_position_km
from planner.units import JOULE_PER_WH

LONGEST_SESSION_INTERVAL_S = 20.0  # the satellite turns up to a degree a second as it follows a station


@dataclass(frozen=True)
class SessionCourse:
    """One session in n intervals from the first slew to the last; the same for every corner. Arrays (n,).

    The satellite turns from its idle law to the session's so that it is there at tx_on, and back from tx_off.
    `turned_share` is how far it has turned (0 idle law, 1 session's law); panel power in between is the blend.
    It stays 0 where both laws are one.
    """

    session: Session
    law: str
    edges_s: np.ndarray
    warming: np.ndarray
    transmitting: np.ndarray
    cooling: np.ndarray
    slewing: np.ndarray
    turned_share: np.ndarray
    panels_w: np.ndarray  # (n, panels) under the session's law

    @property
    def middle_s(self) -> np.ndarray:
        return 0.5 * (self.edges_s[1:] + self.edges_s[:-1])

    @property
    def phase(self) -> np.ndarray:
        """Name of each interval's phase; where turning and warm-up (cool-down) coincide, the transmitter's phase."""
        conditions = [self.transmitting, self.warming, self.cooling, self.slewing]
        return np.select(conditions, ["transmission", "warm-up", "cool-down", "slew"], "idle")


@dataclass(frozen=True)
class SessionDraw:
    """Battery terminal power with and without one session, constant in each of n intervals.

    `edges_s` (n + 1,), the rest (n,). `terminal_w` and `idle_terminal_w` are load less array power, positive out of the
    battery and negative where the array has a surplus (whether the battery takes it is not asked here). `own_w` is what
    the session's own loads draw at the terminals; panel power lost by pointing is in `terminal_w` only.
    """

    edges_s: np.ndarray
    phase: np.ndarray
    terminal_w: np.ndarray
    idle_terminal_w: np.ndarray
    own_w: np.ndarray

    @property
    def own_wh(self) -> float:
        """Energy the session's own loads draw at the battery terminals [Wh]."""
        return float(self.own_w @ np.diff(self.edges_s) / JOULE_PER_WH)

    @property
    def added_wh(self) -> float:
        """Energy the session costs at the terminals, panel power lost (or won) by pointing included [Wh]."""
        return float((self.terminal_w - self.idle_terminal_w) @ np.diff(self.edges_s) / JOULE_PER_WH)


def trace_sessions(
    mission: Mission, satellite: Satellite, sunshine: Sunshine, sessions: list[Session]
) -> list[SessionCourse]:
    """The courses of many sessions of one satellite, all evaluated together, in their order."""
    craft = satellite.spacecraft
    transmitters = [craft.mode(session.mode) for session in sessions]
    laws = [transmitter.session_law or craft.pointing.session for transmitter in transmitters]
    stations_km = np.array([station_position_km(mission.station(session.station)) for session in sessions])
    at_on_s, at_off_s = (
        _slew_times_s(craft.pointing, laws, stations_km, sunshine, np.array([getattr(s, key) for s in sessions]))
        for key in ("tx_on_s", "tx_off_s")
    )
    edges = [
        _edges_s(session, transmitter, before_s, after_s, sunshine.edges_s)
        for session, transmitter, before_s, after_s in zip(sessions, transmitters, at_on_s, at_off_s, strict=True)
    ]
    counts = [len(one) - 1 for one in edges]
    owner = np.repeat(np.arange(len(sessions)), counts)
    middle_s = np.concatenate([0.5 * (one[1:] + one[:-1]) for one in edges])
    tracking_w = _panels_by_law(craft.panel, [laws[k] for k in owner], stations_km[owner], sunshine, middle_s)
    rows = np.split(np.arange(len(owner)), np.cumsum(counts)[:-1])
    return [
        SessionCourse(
            session=session,
            law=law.law,
            edges_s=one_edges_s,
            panels_w=tracking_w[row],
            turned_share=_turned_share(session, middle_s[row], before_s, after_s) * (law != craft.pointing.idle),
            **_phases(session, transmitter, middle_s[row], before_s, after_s),
        )
        for session, transmitter, law, one_edges_s, row, before_s, after_s in zip(
            sessions, transmitters, laws, edges, rows, at_on_s, at_off_s, strict=True
        )
    ]


def _by_law(laws: list[Law]):
    """Each distinct law with the rows that follow it."""
    return [(law, np.array([k for k, other in enumerate(laws) if other == law])) for law in dict.fromkeys(laws)]


def _slew_times_s(pointing, laws, stations_km, sunshine, time_s):
    """Time to turn between the idle law and each session's law, both as they stand at `time_s` (n,)."""
    position_km, velocity_km_s, sun_km, _ = sunshine.at(time_s)
    idle_axes = attitude.body_axes(pointing.idle, position_km, velocity_km_s, sun_km)
    slew_s = np.empty(len(time_s))
    for law, rows in _by_law(laws):
        axes = attitude.body_axes(law, position_km[rows], velocity_km_s[rows], sun_km[rows], stations_km[rows])
        idle_rows = None if idle_axes is None else idle_axes[rows]
        slew_s[rows] = attitude.slew_time_s(pointing, idle_rows, axes)
    return slew_s


def _panels_by_law(panels, laws, stations_km, sunshine, middle_s):
    position_km, velocity_km_s, sun_km, visible_sun = sunshine.at(middle_s)
    power_w = np.empty((len(middle_s), len(panels)))
    for law, rows in _by_law(laws):
        power_w[rows] = panels_w(
            panels, law, position_km[rows], velocity_km_s[rows], sun_km[rows], visible_sun[rows], stations_km[rows]
        )
    return power_w


def _edges_s(session, transmitter, before_s, after_s, grid_s):
    """Phase edges with regular ones and the idle grid's between them, cut to the span."""
    marks_s = [
        session.tx_on_s - before_s,
        session.tx_on_s - transmitter.warmup_s,
        session.tx_on_s,
        session.tx_off_s,
        session.tx_off_s + transmitter.cooldown_s,
        session.tx_off_s + after_s,
    ]
    begin_s, end_s = np.clip([min(marks_s), max(marks_s)], 0.0, grid_s[-1])
    regular_s = np.arange(
        np.ceil(begin_s / LONGEST_SESSION_INTERVAL_S) * LONGEST_SESSION_INTERVAL_S, end_s, LONGEST_SESSION_INTERVAL_S
    )
    first, last = np.searchsorted(grid_s, [begin_s, end_s])
    edges_s = merged_edges_s(marks_s, regular_s, grid_s[first:last], span_s=grid_s[-1])
    return edges_s[(edges_s >= begin_s) & (edges_s <= end_s)]


def _turned_share(session, middle_s, before_s, after_s):
    to_go_s, gone_s = session.tx_on_s - middle_s, middle_s - session.tx_off_s
    still_away = np.maximum(to_go_s, 0.0) / max(before_s, 1e-9) + np.maximum(gone_s, 0.0) / max(after_s, 1e-9)
    return np.clip(1.0 - still_away, 0.0, 1.0)


def _phases(session, transmitter, middle_s, before_s, after_s) -> dict[str, np.ndarray]:
    to_go_s, gone_s = session.tx_on_s - middle_s, middle_s - session.tx_off_s
    before, after = to_go_s > 0, gone_s > 0
    return {
        "warming": before & (to_go_s < transmitter.warmup_s),
        "transmitting": ~before & ~after,
        "cooling": after & (gone_s < transmitter.cooldown_s),
        "slewing": (before & (to_go_s < before_s)) | (after & (gone_s < after_s)),
    }
