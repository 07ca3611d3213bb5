"""The week without sessions: edges, sunlight, battery temperature, array and loads in every interval between them."""

from dataclasses import dataclass

import numpy as np

from planner.mission.models import Mission, Satellite
from planner.mission.pointing import Law
from planner.power import array
from planner.power.corners import Corner
from planner.power.intervals import Intervals, interval_of, merged_edges_s
from planner.power.loads import steady_draw
from planner.sky import attitude
from planner.sky.clock import Clock
from planner.sky.sun import eclipse_edges_s, sun_position_km, visible_sun_fraction
from planner.sky.track import Track

LONGEST_INTERVAL_S = 60.0


@dataclass(frozen=True)
class Sunshine:
    """Where one satellite and the Sun are over a week, and the sunlight that reaches it.

    The grid `edges_s` (n + 1,) holds eclipse edges and load windows, and at most 60 s lie between two of them.
    """

    clock: Clock
    track: Track
    edges_s: np.ndarray

    @property
    def middle_s(self) -> np.ndarray:
        return 0.5 * (self.edges_s[1:] + self.edges_s[:-1])

    def at(self, time_s):
        """position_km (n, 3), velocity_km_s (n, 3), sun_km (n, 3) and visible fraction of the Sun (n,)."""
        position_km, velocity_km_s = self.track.at(time_s)
        sun_km = sun_position_km(self.clock, time_s)
        return position_km, velocity_km_s, sun_km, visible_sun_fraction(position_km, sun_km)


def windows_s(mission: Mission, satellite: Satellite) -> tuple[tuple[tuple[float, float], ...], ...]:
    """For each load of the satellite its windows as seconds after the mission's start."""
    return tuple(
        tuple(
            ((begin - mission.start).total_seconds(), (end - mission.start).total_seconds())
            for begin, end in load.windows
        )
        for load in satellite.spacecraft.load
    )


def find_sunshine(mission: Mission, clock, track, satellite: Satellite) -> Sunshine:
    """The grid of a satellite's week (at most 60 s between edges), with the Sun on it."""
    regular_s = np.arange(0.0, mission.span_s, LONGEST_INTERVAL_S)
    window_edges_s = [edge for windows in windows_s(mission, satellite) for window in windows for edge in window]
    edges_s = merged_edges_s(regular_s, eclipse_edges_s(track, clock), window_edges_s, span_s=mission.span_s)
    return Sunshine(clock, track, edges_s)


def panels_w(panels, law: Law, position_km, velocity_km_s, sun_km, visible_sun, station_km=None):
    """Power of every new panel at its own terminals (n, panels) under an attitude law."""
    to_sun_km = sun_km - position_km
    distance_km = np.linalg.norm(to_sun_km, axis=1)
    flux_w_m2 = array.solar_flux_w_m2(distance_km) * visible_sun
    axes = attitude.body_axes(law, position_km, velocity_km_s, sun_km, station_km)
    if axes is None:
        return np.stack([array.tumbling_power_w(panel, flux_w_m2) for panel in panels], axis=1)
    direction = to_sun_km / distance_km[:, None]
    cosines = [attitude.cos_incidence(axes, array.panel_normal(panel), direction) for panel in panels]
    return np.stack(
        [array.panel_power_w(panel, cosine, flux_w_m2) for panel, cosine in zip(panels, cosines, strict=True)], axis=1
    )


def battery_temperature_c(battery, colder_k: float, edges_s, visible_sun):
    """Battery temperature at the edges (n + 1,) [degC].

    First-order relaxation towards `sunlit_c` or `eclipse_c` (between them in penumbra), both lower by `colder_k`.
    It starts from its mean over the span. Neglected: heat from the battery's own losses and from the heater, so that
    the temperature is known before any plan is made.
    """
    target_c = battery.eclipse_c + (battery.sunlit_c - battery.eclipse_c) * visible_sun - colder_k
    duration_s = np.diff(edges_s)
    kept = np.exp(-duration_s / (60.0 * battery.thermal_time_constant_min))
    course_c = [float(np.average(target_c, weights=duration_s))]
    for target, keep in zip(target_c.tolist(), kept.tolist(), strict=True):
        course_c.append(target + (course_c[-1] - target) * keep)
    return np.array(course_c)


def thermostat_edges_s(loads, edges_s, edge_c):
    """Times at which the battery temperature crosses the setting of a thermostat, straight between edges."""
    crossings_s = [np.zeros(0)]
    for setting_c in {load.on_below_c for load in loads if load.on_below_c is not None}:
        over_c = edge_c - setting_c
        k = np.flatnonzero(over_c[1:] * over_c[:-1] < 0)
        crossings_s.append(edges_s[k] + over_c[k] / (over_c[k] - over_c[k + 1]) * (edges_s[k + 1] - edges_s[k]))
    return np.concatenate(crossings_s)


def idle_weeks(
    mission: Mission, satellite: Satellite, sunshine: Sunshine, idle_panels_w, corners: list[Corner]
) -> list[Intervals]:
    """The week without a session for each corner, all on one set of edges.

    `idle_panels_w` (n, panels) are the new panels' powers under the idle law on the grid of `sunshine`.
    """
    craft, grid_s = satellite.spacecraft, sunshine.edges_s
    visible_sun = sunshine.at(sunshine.middle_s)[3]
    edge_c = [battery_temperature_c(craft.battery, one.battery_colder_k, grid_s, visible_sun) for one in corners]
    crossings_s = [thermostat_edges_s(craft.load, grid_s, course_c) for course_c in edge_c]
    edges_s = merged_edges_s(grid_s, *crossings_s, span_s=mission.span_s)
    middle_s = 0.5 * (edges_s[1:] + edges_s[:-1])
    index, windows = interval_of(grid_s, middle_s), windows_s(mission, satellite)

    def week(corner: Corner, course_c) -> Intervals:
        battery_c = np.interp(middle_s, grid_s, course_c)
        return Intervals(
            edges_s=edges_s,
            array_w=array.bus_power_w(idle_panels_w[index], corner.panel_factor, craft.array),
            draw=steady_draw(craft.load, middle_s, visible_sun[index], battery_c, windows, corner.load_factor),
            session_w=np.zeros(len(middle_s)),
            battery_c=battery_c,
            visible_sun=visible_sun[index],
            attitude=np.zeros(len(middle_s), dtype=int),
            attitudes=(craft.pointing.idle.law, "slew", *dict.fromkeys(_session_laws(craft))),
        )

    return [week(corner, course_c) for corner, course_c in zip(corners, edge_c, strict=True)]


def _session_laws(craft) -> list[str]:
    return [(transmitter.session_law or craft.pointing.session).law for transmitter in craft.transmitter]
