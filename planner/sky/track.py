"""Where a satellite is: its state on one time grid that all stations share, and between the grid's points."""

from dataclasses import dataclass
from datetime import timedelta
from functools import cached_property

import numpy as np

from planner.errors import InputError
from planner.mission.elements import ElementSet
from planner.sky.clock import Clock
from planner.units import DAY_S, EARTH_GM_KM3_S2, EARTH_RATE_RAD_S, dot

# What a cubic Hermite may miss between grid points; the grid's step follows from it.
HALF_A_METRE_KM = 5e-4
# Between these moments and a grid point's, SGP4's positions give its velocity (see `propagate`).
VELOCITY_STEP_S = 0.5


@dataclass(frozen=True, eq=False)
class Track:
    """A satellite's states in the Earth-fixed frame. The grid reaches beyond the span, by about a revolution each way.

    time_s (n,) [s after start], rising; position_km (n, 3); velocity_km_s (n, 3), relative to the turning Earth.
    """

    satellite: str
    elements: ElementSet
    time_s: np.ndarray
    position_km: np.ndarray
    velocity_km_s: np.ndarray

    @cached_property
    def cubics(self) -> np.ndarray:
        """Hermite polynomial of each interval in seconds after its left end, (n - 1, 4, 3), constant term first."""
        h = np.diff(self.time_s)[:, None]
        chord = np.diff(self.position_km, axis=0) / h
        v0, v1 = self.velocity_km_s[:-1], self.velocity_km_s[1:]
        return np.stack(
            [self.position_km[:-1], v0, (3 * chord - 2 * v0 - v1) / h, (v0 + v1 - 2 * chord) / h**2], axis=1
        )

    @property
    def period_s(self) -> float:
        """One revolution by the mean motion [s]."""
        return DAY_S / self.elements.mean_motion_rev_day

    @property
    def inclination_deg(self) -> float:
        return self.elements.inclination_deg

    def interval(self, time_s):
        """Index of the grid interval that holds each moment, shape of `time_s`."""
        return np.clip(np.searchsorted(self.time_s, time_s, side="right") - 1, 0, len(self.time_s) - 2)

    def at(self, time_s):
        """State between the grid's points by a cubic Hermite of position and velocity.

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
        if time_s.size and (time_s.min() < self.time_s[0] or time_s.max() > self.time_s[-1]):
            raise ValueError(
                f"time_s must lie within {self.time_s[0]:.3f} to {self.time_s[-1]:.3f} s,"
                f" got {time_s.min():.3f} to {time_s.max():.3f}"
            )
        index = self.interval(time_s)
        return evaluate(self.cubics[index], time_s - self.time_s[index])


def evaluate(cubics, seconds):
    """Position and velocity of Hermite cubics (..., 4, 3) at `seconds` (...) after each one's left end."""
    x = seconds[..., None]
    c0, c1, c2, c3 = (cubics[..., k, :] for k in range(4))
    return ((c3 * x + c2) * x + c1) * x + c0, (3 * c3 * x + 2 * c2) * x + c1


def track_satellite(clock: Clock, satellite) -> Track:
    """The track of a mission's satellite over the clock's span and about a revolution beyond it at both ends."""
    return track_elements(clock, satellite.name, satellite.elements)


def track_elements(clock: Clock, name: str, elements: ElementSet) -> Track:
    """As `track_satellite`, for a bare element set.

    Raises
    ------
    InputError : SGP4 rejects the set or cannot carry it through the span; tells satellite, epoch and SGP4's own message
    """
    beyond_s = min(DAY_S / elements.mean_motion_rev_day * 1.05, DAY_S)
    time_s = grid_s(clock, elements, -beyond_s, clock.span_s + beyond_s)
    position_km, velocity_km_s, good = propagate(clock, name, elements, time_s)
    return Track(name, elements, time_s[good], position_km[good], velocity_km_s[good])


def step_s(radius_km, eccentricity: float):
    """Time in which a cubic Hermite in the Earth-fixed frame misses half a metre, shape of `radius_km` [s].

    Its error is h^4 |r''''| / 384. The fourth derivative is taken as that of a circle at the local rate, with the
    Earth's turning added; the power of 1 + e was fitted to orbits up to e = 0.9. About 60 s in low orbit.
    """
    rate_rad_s = np.sqrt(EARTH_GM_KM3_S2 / radius_km**3) * (1 + eccentricity) ** 0.8 + EARTH_RATE_RAD_S
    return (384 * HALF_A_METRE_KM / radius_km) ** 0.25 / rate_rad_s


def grid_s(clock: Clock, elements: ElementSet, begin_s: float, end_s: float, steps: float = 1.0) -> np.ndarray:
    """Moments from `begin_s` to `end_s`, so many `step_s` apart, which follows the radius of the Kepler orbit."""
    n_rad_s = elements.mean_motion_rev_day * 2 * np.pi / DAY_S
    axis_km, e = (EARTH_GM_KM3_S2 / n_rad_s**2) ** (1 / 3), elements.eccentricity
    if e < 0.01:
        return np.linspace(begin_s, end_s, 1 + int(np.ceil((end_s - begin_s) / (steps * step_s(axis_km, e)))))
    anomaly = np.linspace(0, 2 * np.pi, 1441)
    after_perigee_s = (anomaly - e * np.sin(anomaly)) / n_rad_s
    shrink = 1 - e * np.cos(anomaly)
    per_radian = shrink / n_rad_s / (steps * step_s(axis_km * shrink, e))
    count = np.concatenate([[0], np.cumsum((per_radian[1:] + per_radian[:-1]) / 2 * np.diff(anomaly))])
    one_turn_s = np.interp(np.linspace(0, count[-1], 1 + int(np.ceil(count[-1]))), count, after_perigee_s)[:-1]
    period_s = 2 * np.pi / n_rad_s
    perigee_s = clock.seconds(elements.epoch) - np.radians(elements.mean_anomaly_deg) / n_rad_s
    turns = np.arange(np.floor((begin_s - perigee_s) / period_s), np.ceil((end_s - perigee_s) / period_s))
    inner = (perigee_s + turns[:, None] * period_s + one_turn_s).ravel()
    return np.concatenate([[begin_s], inner[(inner > begin_s + 1) & (inner < end_s - 1)], [end_s]])


def propagate(clock: Clock, name: str, elements: ElementSet, time_s):
    """SGP4 at `time_s` (n,), turned from TEME into the Earth-fixed frame.

    Returns position_km (n, 3), velocity_km_s (n, 3) and good (n,) bool, False where SGP4 gave up outside the span.
    InputError when it gives up inside the span.

    In deep space and on eccentric orbits the velocity is the rate of SGP4's position over a second: its own leaves
    out the rates of lunar, solar and long-period terms (up to 1.4 m/s), which would bend the interpolant by metres.
    """
    model = sgp4_model(name, elements)
    error, position_km, velocity_km_s = model.sgp4_array(*clock.julian(time_s))
    inside = (error != 0) & (time_s >= 0) & (time_s <= clock.span_s)
    if inside.any():
        first = np.argmax(inside)
        raise _refused(name, elements, error[first], f" at {clock.iso(time_s[first])}")
    if model.method == "d" or elements.eccentricity > 0.01:
        later, earlier = (model.sgp4_array(*clock.julian(time_s + dt))[1] for dt in (VELOCITY_STEP_S, -VELOCITY_STEP_S))
        velocity_km_s = (later - earlier) / (2 * VELOCITY_STEP_S)
    return *earth_fixed(clock, time_s, position_km, velocity_km_s), error == 0


def earth_fixed(clock: Clock, time_s, position_km, velocity_km_s):
    """TEME position and velocity (n, 3) turned into the Earth-fixed frame, velocity relative to the turning Earth."""
    angle_rad, rate_rad_s = clock.earth_angle_rad(time_s)
    position_km = turn(position_km, angle_rad)
    velocity_km_s = turn(velocity_km_s, angle_rad)
    velocity_km_s[..., 0] += rate_rad_s * position_km[..., 1]
    velocity_km_s[..., 1] -= rate_rad_s * position_km[..., 0]
    return position_km, velocity_km_s


def turn(vector, angle_rad):
    """`vector` (..., 3) seen from axes that are turned about z by `angle_rad` (...)."""
    c, s = np.cos(angle_rad), np.sin(angle_rad)
    x, y, z = vector[..., 0], vector[..., 1], vector[..., 2]
    return np.stack([c * x + s * y, c * y - s * x, z], axis=-1)


def inertial_velocity_km_s(position_km, velocity_km_s):
    """The velocity seen from space, in Earth-fixed axes (..., 3): the Earth's turning is added."""
    x, y = position_km[..., 0], position_km[..., 1]
    carried = np.stack([-EARTH_RATE_RAD_S * y, EARTH_RATE_RAD_S * x, np.zeros_like(x)], axis=-1)
    return velocity_km_s + carried


def acceleration_km_s2(position_km, velocity_km_s):
    """Acceleration relative to the turning Earth (..., 3): central gravity, Coriolis and centrifugal terms.

    The Earth's flattening is neglected: 1e-3 of the central term in low orbit.
    """
    w = EARTH_RATE_RAD_S
    radius_km = np.sqrt(dot(position_km, position_km))[..., None]
    x, y, vx, vy = position_km[..., 0], position_km[..., 1], velocity_km_s[..., 0], velocity_km_s[..., 1]
    turning = np.stack([2 * w * vy + w * w * x, w * w * y - 2 * w * vx, np.zeros_like(x)], axis=-1)
    return turning - EARTH_GM_KM3_S2 * position_km / radius_km**3


def sgp4_model(name: str, elements: ElementSet):
    """The `sgp4` package's model of an element set (WGS 72, as element sets are made); InputError when it refuses."""
    from sgp4.api import WGS72, Satrec

    model = Satrec()
    days_1949 = (elements.epoch - _epoch_of_sgp4()) / timedelta(days=1)
    to_rad = np.pi / 180
    model.sgp4init(
        WGS72,
        "i",
        0,
        days_1949,
        elements.bstar,
        0.0,
        0.0,
        elements.eccentricity,
        elements.arg_of_pericenter_deg * to_rad,
        elements.inclination_deg * to_rad,
        elements.mean_anomaly_deg * to_rad,
        elements.mean_motion_rev_day * 2 * np.pi / 1440,
        elements.ra_of_asc_node_deg * to_rad,
    )
    if model.error:
        raise _refused(name, elements, model.error, "")
    return model


def _epoch_of_sgp4():
    from datetime import UTC, datetime

    return datetime(1949, 12, 31, tzinfo=UTC)


def _refused(name: str, elements: ElementSet, error: int, where: str) -> InputError:
    from sgp4.api import SGP4_ERRORS

    epoch = elements.epoch.isoformat()
    return InputError(f"{name}: SGP4 cannot use the element set of epoch {epoch}{where}: {SGP4_ERRORS[int(error)]}")
