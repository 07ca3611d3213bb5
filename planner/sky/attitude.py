"""Body axes by pointing law: the hinge that link (angle off the boresight) and power (Sun on each panel) share."""

import numpy as np

from planner.mission.pointing import Law, Pointing
from planner.sky.frames import inertial_velocity_km_s
from planner.units import dot, unit_vector


def body_axes(law: Law, position_km, velocity_km_s, sun_km, station_km=None):
    """Body axes under a pointing law.

    Parameters
    ----------
    law : Law
    position_km, velocity_km_s : arrays (n, 3) or (3,), Earth-fixed, velocity relative to the turning Earth
    sun_km : array of the same shape, geocentric
    station_km : array (3,) or (n, 3), needed by the law "station"

    Returns
    -------
    array (n, 3, 3) or (3, 3): rows are body x, y, z in Earth-fixed axes; None when the satellite tumbles

    Raises
    ------
    ValueError : the law is "station" and no station is given

    The two-vector (TRIAD) construction, after Black, AIAA Journal 2 (1964), from memory: `axis` is exact, `second_axis`
    as near to `second_target` as it gets. Where both targets fall in one line the second is the orbit's normal.
    """
    if law.law == "tumbling":
        return None
    states = position_km, velocity_km_s, sun_km, station_km
    first, second = _direction(law.law, *states), _direction(law.second_target, *states)
    aside = np.cross(first, second)
    in_line = np.sqrt(dot(aside, aside))[..., None] < 1e-6
    aside = np.where(in_line, np.cross(first, _off_line(first, *states)), aside)
    return np.einsum(
        "ji,...jk->...ik", _frame(np.array(law.axis), np.cross(law.axis, law.second_axis)), _frame(first, aside)
    )


def _frame(first, aside):
    """Orthonormal rows: along `first`, along `aside` (perpendicular to it), and their cross product."""
    first, aside = unit_vector(first), unit_vector(aside)
    return np.stack([first, aside, np.cross(first, aside)], axis=-2)


def _off_line(first, *states):
    """The orbit's normal, or the velocity where `first` is that normal."""
    normal, along = _direction("orbit normal", *states), _direction("velocity", *states)
    return np.where(np.abs(dot(first, normal))[..., None] < 0.99, normal, along)


def _direction(target: str, position_km, velocity_km_s, sun_km, station_km):
    """Unit vector from the satellite to a target, Earth-fixed axes."""
    if target == "nadir":
        return -unit_vector(position_km)
    if target == "sun":
        return unit_vector(sun_km - position_km)
    if target == "station":
        if station_km is None:
            raise ValueError('station_km must be given for the law "station", got None')
        return unit_vector(station_km - position_km)
    along = inertial_velocity_km_s(position_km, velocity_km_s)
    return unit_vector(along) if target == "velocity" else unit_vector(np.cross(position_km, along))


def off_axis_deg(axes, body_vector, direction):
    """Angle between a body vector and a direction (n, 3) in Earth-fixed axes, (n,) [deg].

    Without axes (tumbling) 90 deg, the sphere's mean.
    """
    direction = unit_vector(direction)
    if axes is None:
        return np.full(direction.shape[:-1], 90.0)
    gap = _in_fixed_axes(axes, body_vector) - direction
    return 2 * np.degrees(np.arcsin(np.clip(np.sqrt(dot(gap, gap)) / 2, 0, 1)))


def cos_incidence(axes, body_vector, sun_direction):
    """Cosine of the Sun's angle from a panel's normal, not below 0, (n,).

    Without axes (tumbling) its mean over all attitudes, 1/4: a sphere shows a quarter of its surface.
    """
    sun_direction = unit_vector(sun_direction)
    if axes is None:
        return np.full(sun_direction.shape[:-1], 0.25)
    return np.maximum(dot(_in_fixed_axes(axes, body_vector), sun_direction), 0.0)


def _in_fixed_axes(axes, body_vector):
    return np.einsum("...ij,i->...j", axes, unit_vector(body_vector))


def slew_time_s(pointing: Pointing, axes_from, axes_to):
    """Time to turn from one attitude to another about one axis at `slew_rate_deg_s`, and to settle, (n,) [s].

    No turn takes no time. Without axes on either side (tumbling) the turn is half a circle, the longest there is.
    """
    if axes_from is None and axes_to is None:
        return np.zeros(())
    if axes_from is None or axes_to is None:
        known = axes_to if axes_from is None else axes_from
        turn_deg = np.full(known.shape[:-2], 180.0)
    else:
        # |A - B| of rotation matrices is 2 sqrt(2) sin(angle / 2): exact for small angles too
        gap = np.sqrt(np.sum((axes_from - axes_to) ** 2, axis=(-2, -1)))
        turn_deg = 2 * np.degrees(np.arcsin(np.clip(gap / np.sqrt(8), 0, 1)))
    return np.where(turn_deg < 1e-6, 0.0, turn_deg / pointing.slew_rate_deg_s + pointing.settle_s)
