"""One satellite's power through the week: profiles built once, sessions laid over them, the battery walked."""

from functools import cached_property

import numpy as np

from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.power.array import bus_power_w
from planner.power.batch import Batch, perturb, run_batch
from planner.power.corners import Corner, CornerName, corner_of
from planner.power.intervals import Intervals, Overlay, interval_of, lay_over
from planner.power.loads import session_draw
from planner.power.profile import find_sunshine, idle_weeks, panels_w
from planner.power.series import BatterySeries, run_battery
from planner.power.session import SessionCourse, SessionDraw, trace_sessions
from planner.units import JOULE_PER_WH

CORNERS: tuple[CornerName, ...] = ("nominal", "pessimistic")
MOST_COURSES_KEPT = 5000


class SatellitePower:
    """What a satellite's panels give, its loads take and its battery carries, for any set of sessions.

    Parameters
    ----------
    mission : the whole mission
    sky : needs `.clock` and `.tracks`
    satellite_name : whose power; KeyError when the mission has no such satellite
    """

    def __init__(self, mission: Mission, sky, satellite_name: str):
        self.mission = mission
        self.satellite = mission.satellite(satellite_name)
        track = next(track for track in sky.tracks if track.satellite == satellite_name)
        self._sunshine = find_sunshine(mission, sky.clock, track, self.satellite)
        self._corners = {name: corner_of(self.satellite, name) for name in CORNERS}
        self._courses: dict[Session, SessionCourse] = {}

    def corner(self, corner: CornerName = "pessimistic") -> Corner:
        """The corner's cell, start charge and factors."""
        return self._corners[corner]

    def capacity_wh(self, corner: CornerName = "pessimistic") -> float:
        """Energy stored in the full pack at that corner."""
        return self.stored_wh(100.0, corner)

    def stored_wh(self, soc_pct, corner: CornerName = "pessimistic"):
        """Energy stored in the pack at a state of charge, scalar or array."""
        cell = self.corner(corner).cell
        battery = self.satellite.spacecraft.battery
        stored_j = cell.stored_energy_j(cell.charge_at_c(soc_pct))
        return stored_j * battery.cells_series * battery.cells_parallel / JOULE_PER_WH

    def pack_open_circuit_v(self, soc_pct, corner: CornerName = "pessimistic"):
        """Open-circuit voltage of the pack at a state of charge, scalar or array."""
        cell = self.corner(corner).cell
        return self.satellite.spacecraft.battery.cells_series * cell.open_circuit_v(cell.charge_at_c(soc_pct))

    def pack_resistance_ohm(self, soc_pct, battery_c, corner: CornerName = "pessimistic"):
        """Resistance of the pack at a state of charge and a battery temperature, scalar or array."""
        cell, battery = self.corner(corner).cell, self.satellite.spacecraft.battery
        share = battery.cells_series / battery.cells_parallel
        return share * cell.resistance_ohm(cell.charge_at_c(soc_pct), battery_c)

    def idle(self, corner: CornerName = "pessimistic") -> Intervals:
        """The week without a session: `edges_s` (n + 1,), `array_w`, `load_w`, `battery_c`, `visible_sun` (n,)."""
        return self._idle[corner]

    def simulate(self, sessions, corner: CornerName = "pessimistic") -> BatterySeries:
        """The battery through the span with these sessions, in any order.

        Where two sessions overlap their loads add, and the attitude is that of the first that turns the satellite.

        Raises
        ------
        ValueError : a session of another satellite
        """
        sessions = tuple(sorted(sessions))
        return run_battery(self.corner(corner), self.satellite.spacecraft, self.intervals(sessions, corner), sessions)

    def intervals(self, sessions, corner: CornerName = "pessimistic") -> Intervals:
        """The week with these sessions, before the battery is asked."""
        courses = self._traced(sorted(sessions))
        return lay_over(self.idle(corner), [self._overlay(course, corner) for course in courses])

    def perturbed(self, sessions, corner: CornerName = "nominal") -> Batch:
        """Weeks spread around a corner as the mission states; `.broken(floor)` is the risk with its interval."""
        assumed = self.corner(corner)
        return run_batch(self.satellite, assumed, self.intervals(sessions, corner), perturb(self.satellite, assumed))

    def session_draw(self, session: Session, corner: CornerName = "pessimistic") -> SessionDraw:
        """Battery terminal power with and without one session, from the first slew to the last."""
        return self.session_draws([session], corner)[0]

    def session_draws(self, sessions, corner: CornerName = "pessimistic") -> list[SessionDraw]:
        """`session_draw` of many sessions together, which is many times faster than one by one."""
        return [self._draw(course, corner) for course in self._traced(sessions)]

    def _draw(self, course: SessionCourse, corner: CornerName) -> SessionDraw:
        idle, over = self.idle(corner), self._overlay(course, corner)
        rows = interval_of(idle.edges_s, course.middle_s)
        return SessionDraw(
            edges_s=course.edges_s,
            phase=course.phase,
            terminal_w=idle.load_w[rows] + over.draw.bus_w - over.array_w,
            idle_terminal_w=idle.load_w[rows] - idle.array_w[rows],
            own_w=over.draw.bus_w,
        )

    def _traced(self, sessions) -> list[SessionCourse]:
        """The courses of these sessions, each traced once and kept."""
        foreign = {session.satellite for session in sessions} - {self.satellite.name}
        if foreign:
            raise ValueError(f"sessions must be of {self.satellite.name}, got {', '.join(sorted(foreign))}")
        kept = self._courses
        new = [session for session in dict.fromkeys(sessions) if session not in kept]
        if len(kept) + len(new) > MOST_COURSES_KEPT:
            kept = self._courses = {}  # not cleared: another thread may be reading the old one
            new = list(dict.fromkeys(sessions))
        if new:
            traced = trace_sessions(self.mission, self.satellite, self._sunshine, new)
            kept.update(zip(new, traced, strict=True))
        return [kept[session] for session in sessions]

    def _overlay(self, course: SessionCourse, corner: CornerName) -> Overlay:
        craft, assumed = self.satellite.spacecraft, self.corner(corner)
        idle_w = self._idle_panels_w[interval_of(self._sunshine.edges_s, course.middle_s)]
        turned = course.turned_share[:, None]
        law = self.idle(corner).attitudes.index(course.law)
        transmitter = craft.mode(course.session.mode)
        return Overlay(
            edges_s=course.edges_s,
            draw=session_draw(craft, transmitter, course, assumed.load_factor, assumed.transmitter_factor),
            array_w=bus_power_w((1 - turned) * idle_w + turned * course.panels_w, assumed.panel_factor, craft.array),
            attitude=np.select([course.slewing, course.turned_share > 0], [1, law], 0),
        )

    @cached_property
    def _idle_panels_w(self) -> np.ndarray:
        sun = self._sunshine
        craft = self.satellite.spacecraft
        return panels_w(craft.panel, craft.pointing.idle, *sun.at(sun.middle_s))

    @cached_property
    def _idle(self) -> dict[str, Intervals]:
        corners = list(self._corners.values())
        weeks = idle_weeks(self.mission, self.satellite, self._sunshine, self._idle_panels_w, corners)
        return dict(zip(self._corners, weeks, strict=True))
