"""Where a satellite is: its state on one time grid that all stations share, and between the grid's points."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from planner.mission.elements import ElementSet, Ephemeris
from planner.sky.clock import Clock
from planner.sky.frames import acceleration_km_s2, inertial_velocity_km_s
from planner.sky.propagate import ROUND_ENOUGH, states
from planner.units import DAY_S, EARTH_GM_KM3_S2, EARTH_RATE_RAD_S, dot

# What the interpolant may miss between grid points; the grid's step follows from it.
INTERPOLATION_KM = 2e-4
FARTHEST_BEYOND_S = 2.5 * DAY_S  # the Sun's table and UT1 reach a little farther

__all__ = ["Track", "inertial_velocity_km_s", "track_elements", "track_satellite"]


@dataclass(frozen=True, eq=False)
class Track:
    """A satellite's states in the Earth-fixed frame. The grid reaches beyond the span, by about a revolution each way.

    time_s (n,) [s after start], rising; position_km (n, 3); velocity_km_s (n, 3), relative to the turning Earth.
    """

    satellite: str
    elements: ElementSet | Ephemeris
    time_s: np.ndarray
    position_km: np.ndarray
    velocity_km_s: np.ndarray

    @property
    def period_s(self) -> float:
        """One revolution by the mean motion [s]."""
        return DAY_S / self.elements.mean_motion_rev_day

    @cached_property
    def quintics(self) -> np.ndarray:
        """Polynomials in seconds after each interval's left end, (6, 3, n - 1): powers from 0, components, intervals.

        Hermite's of position, velocity and acceleration; the latter from the states of three neighbouring points.
        Moments stand last here, unlike elsewhere: the arithmetic runs along them.
        """
        position, velocity = (np.ascontiguousarray(part.T) for part in (self.position_km, self.velocity_km_s))
        acceleration = _accelerations(self.time_s, position, velocity)
        h = np.diff(self.time_s)
        c0, c1, c2 = position[:, :-1], velocity[:, :-1], acceleration[:, :-1] / 2
        # what position, velocity and acceleration still lack at the right end
        d0 = position[:, 1:] - ((c2 * h + c1) * h + c0)
        d1 = (velocity[:, 1:] - (2 * c2 * h + c1)) * h
        d2 = (acceleration[:, 1:] - 2 * c2) * h**2
        c3, c4, c5 = (
            (10 * d0 - 4 * d1 + d2 / 2) / h**3,
            (7 * d1 - 15 * d0 - d2) / h**4,
            (6 * d0 - 3 * d1 + d2 / 2) / h**5,
        )
        return np.stack([c0, c1, c2, c3, c4, c5])

    @cached_property
    def bulge_km(self) -> np.ndarray:
        """How far a height over any plane may rise above a straight line beside each grid point, (n,) [km].

        Acceleration times step^2 / 8, and a fifth more because the acceleration changes within a step.
        """
        acceleration = acceleration_km_s2(self.position_km, self.velocity_km_s)
        h = np.diff(self.time_s)
        widest_s = np.maximum(np.append(h, 0), np.append(0, h))
        return 1.2 * np.sqrt(dot(acceleration, acceleration)) * widest_s**2 / 8

    def interval(self, time_s):
        """Index of the grid interval that holds each moment, shape of `time_s`."""
        return np.clip(np.searchsorted(self.time_s, time_s, side="right") - 1, 0, len(self.time_s) - 2)

    def at(self, time_s) -> tuple[np.ndarray, np.ndarray]:
        """State between the grid's points, within a metre of what the elements say there.

        Parameters
        ----------
        time_s : float or array (...) [s after start], within the grid

        Returns
        -------
        position_km, velocity_km_s : arrays (..., 3), Earth-fixed

        Raises
        ------
        ValueError : a moment outside the grid
        """
        time_s = np.asarray(time_s, dtype=float)
        if time_s.size and not (self.time_s[0] <= time_s.min() and time_s.max() <= self.time_s[-1]):
            raise ValueError(
                f"time_s must lie within {self.time_s[0]:.3f} to {self.time_s[-1]:.3f} s,"
                f" got {time_s.min():.3f} to {time_s.max():.3f}"
            )
        position_km, velocity_km_s = evaluate(*self._pieces(time_s))
        return np.moveaxis(position_km, 0, -1), np.moveaxis(velocity_km_s, 0, -1)

    def place_km(self, time_s):
        """The position alone, as `at`."""
        return np.moveaxis(place(*self._pieces(np.asarray(time_s, dtype=float))), 0, -1)

    def _pieces(self, time_s) -> tuple[np.ndarray, np.ndarray]:
        """Polynomials that hold at the moments, and the seconds since each one's beginning."""
        index = self.interval(time_s)
        return self.quintics[..., index], time_s - self.time_s[index]


def evaluate(quintics, seconds) -> tuple[np.ndarray, np.ndarray]:
    """Position and velocity (3, ...) of polynomials (6, 3, ...) at `seconds` (...) after each one's left end."""
    velocity = quintics[5]
    position = quintics[5] * seconds + quintics[4]
    for coefficient in quintics[3::-1]:
        velocity = velocity * seconds + position
        position = position * seconds + coefficient
    return position, velocity


def place(quintics, seconds):
    """The position alone, as `evaluate`."""
    position = quintics[5]
    for coefficient in quintics[4::-1]:
        position = position * seconds + coefficient
    return position


def _accelerations(time_s, position_km, velocity_km_s):
    """Acceleration at each grid point, (3, n) as the states, from those of the point and its neighbours; 3 or more.

    The second derivative of Hermite's quintic through three points, whose basis stands in Davis, Interpolation and
    Approximation (from memory).
    """
    nodes = np.clip(np.arange(len(time_s)), 1, len(time_s) - 2) + np.array([[-1], [0], [1]])
    t = time_s[nodes] - time_s  # (3, n), the point itself at 0
    total = np.zeros_like(position_km)
    for j in range(3):
        own, a, b = t[j], t[(j + 1) % 3], t[(j + 2) % 3]
        scale = (own - a) * (own - b)
        basis, slope, bend = a * b / scale, -(a + b) / scale, 2 / scale  # of Lagrange's basis, at the point
        square_slope, square_bend = 2 * basis * slope, 2 * slope**2 + 2 * basis * bend
        lean = 2 * (1 / (own - a) + 1 / (own - b))
        of_position = (1 + lean * own) * square_bend - 2 * lean * square_slope
        of_velocity = 2 * square_slope - own * square_bend
        total += of_position * position_km[:, nodes[j]] + of_velocity * velocity_km_s[:, nodes[j]]
    return total


def track_satellite(clock: Clock, satellite) -> Track:
    """The track of a mission's satellite over the clock's span and about a revolution beyond it at both ends."""
    return track_elements(clock, satellite.name, satellite.elements)


def track_elements(clock: Clock, name: str, elements: ElementSet | Ephemeris) -> Track:
    """As `track_satellite`, for bare elements. InputError where they cannot be carried through the span."""
    # A pass in progress at an end of the span is seen whole, and with it the others of its revolution.
    beyond_s = min(DAY_S / elements.mean_motion_rev_day * 1.05, FARTHEST_BEYOND_S)
    time_s = grid_s(clock, elements, -beyond_s, clock.span_s + beyond_s)
    position_km, velocity_km_s, known = states(clock, name, elements, time_s)
    if not known.all():  # the track ends with the span on the side where the orbit does
        before_s, after_s = (beyond_s * known[side].all() for side in (time_s < 0, time_s > clock.span_s))
        time_s = grid_s(clock, elements, -before_s, clock.span_s + after_s)
        position_km, velocity_km_s, _ = states(clock, name, elements, time_s)
    return Track(name, elements, time_s, position_km, velocity_km_s)


def step_s(radius_km, eccentricity: float):
    """Step at which the interpolant misses INTERPOLATION_KM between points, shape of `radius_km` [s].

    Its error is h^6 |sixth derivative| (1/46080 + 1/11520), from the quintic and from its accelerations. The derivative
    is taken as that of a circle at the local rate, with the Earth's turning added; the power of 1 + e was fitted to
    orbits up to e = 0.9. About 220 s in low orbit.
    """
    rate_rad_s = np.sqrt(EARTH_GM_KM3_S2 / radius_km**3) * (1 + eccentricity) ** 0.8 + EARTH_RATE_RAD_S
    return (9216 * INTERPOLATION_KM / radius_km) ** (1 / 6) / rate_rad_s


def grid_s(clock: Clock, elements, begin_s: float, end_s: float) -> np.ndarray:
    """Moments from `begin_s` to `end_s`, `step_s` apart, which follows the radius of the Kepler orbit."""
    n_rad_s = elements.mean_motion_rev_day * 2 * np.pi / DAY_S
    axis_km, e = (EARTH_GM_KM3_S2 / n_rad_s**2) ** (1 / 3), min(elements.eccentricity, 0.99)
    if isinstance(elements, Ephemeris):
        begin_s, end_s, time_s, radius_km = _of_states(clock, elements, begin_s, end_s)
    elif e < ROUND_ENOUGH:
        time_s, radius_km = np.array([begin_s, end_s]), np.array([axis_km, axis_km])
    else:
        perigee_s = clock.seconds(elements.epoch) - np.radians(elements.mean_anomaly_deg) / n_rad_s
        first, last = (n_rad_s * (edge_s - perigee_s) for edge_s in (begin_s, end_s))
        anomaly = np.linspace(first - e, last + e, 2 + int((last - first + 2 * e) * 200))
        time_s = perigee_s + (anomaly - e * np.sin(anomaly)) / n_rad_s
        radius_km = axis_km * (1 - e * np.cos(anomaly))
    per_second = 1 / step_s(radius_km, e)
    count = np.concatenate([[0.0], np.cumsum((per_second[1:] + per_second[:-1]) / 2 * np.diff(time_s))])
    from_count, to_count = np.interp([begin_s, end_s], time_s, count)
    grid = np.interp(np.linspace(from_count, to_count, 3 + int(to_count - from_count)), count, time_s)
    grid[0], grid[-1] = begin_s, end_s
    return grid


def _of_states(clock: Clock, ephemeris: Ephemeris, begin_s: float, end_s: float):
    """The part of [begin_s, end_s] that an ephemeris reaches, and its own moments and radii."""
    time_s = np.array([clock.seconds(moment) for segment in ephemeris.segment for moment in segment.moment])
    radius_km = np.array([np.linalg.norm(state[:3]) for segment in ephemeris.segment for state in segment.state])
    time_s, first = np.unique(time_s, return_index=True)
    begin_s = min(max(begin_s, clock.seconds(ephemeris.segment[0].usable_from)), 0.0)
    end_s = max(min(end_s, clock.seconds(ephemeris.segment[-1].usable_to)), clock.span_s)
    return begin_s, end_s, time_s, radius_km[first]
