"""States of a satellite at given moments: SGP4 for element sets, interpolation for ephemerides."""

import numpy as np

from planner.errors import InputError
from planner.mission.elements import ElementSet, Ephemeris
from planner.mission.interpolation import interpolate
from planner.sky.clock import Clock
from planner.sky.frames import fixed_from_teme, fixed_position_km, inertial_velocity_km_s
from planner.units import EARTH_GM_KM3_S2, dot

# Half the time over which a velocity is taken from positions.
VELOCITY_STEP_S = 0.5
ROUND_ENOUGH = 0.003  # eccentricity below which the velocity of SGP4 is within 3 cm/s of the rate of its position
NEAREST_KM, FARTHEST_KM = 6350.0, 1e6  # from the Earth's centre: its poles' ground, and well beyond the Moon


def states(clock: Clock, name: str, elements: ElementSet | Ephemeris, time_s):
    """States at `time_s` (n,) [s after start] in the Earth-fixed frame.

    Returns
    -------
    position_km (n, 3), velocity_km_s (n, 3) relative to the turning Earth, known (n,) bool: False outside the span
    where SGP4 gives up, the ephemeris does not reach, or the state is of no orbit about the Earth

    Raises
    ------
    InputError : the same inside the span; tells satellite, epoch and SGP4's own message, or the state
    """
    if isinstance(elements, Ephemeris):
        position_km, velocity_km_s, known = _interpolated(clock, name, elements, time_s)
    else:
        position_km, velocity_km_s, known = _propagated(clock, elements, time_s)
    radius_km = np.sqrt(dot(position_km, position_km))
    velocity = inertial_velocity_km_s(position_km, velocity_km_s)
    energy = dot(velocity, velocity) / 2 - EARTH_GM_KM3_S2 / radius_km
    sound = known & (radius_km > NEAREST_KM) & (radius_km < FARTHEST_KM) & (energy < 0)
    astray = known & ~sound & (time_s >= 0) & (time_s <= clock.span_s)
    if astray.any():
        k = np.argmax(astray)
        raise InputError(
            f"{name}: the {elements.source} file's orbit must stay about the Earth, got {radius_km[k]:.6g} km from its"
            f" centre at {np.linalg.norm(velocity[k]):.4g} km/s at {clock.iso(time_s[k])}"
        )
    return position_km, velocity_km_s, sound


def _propagated(clock: Clock, elements: ElementSet, time_s):
    """SGP4 turned from TEME by skyfield's GMST 1982.

    In deep space and on eccentric orbits the velocity is the rate of SGP4's position over a second: its own leaves
    out the rates of lunar, solar and long-period terms (up to 1.4 m/s), which would bend the interpolant by metres.
    """
    model = elements.sgp4_model()
    error, position_km, velocity_km_s = model.sgp4_array(*clock.julian(time_s))
    inside = (error != 0) & (time_s >= 0) & (time_s <= clock.span_s)
    if inside.any():
        first = np.argmax(inside)
        raise elements.refused(error[first], f" at {clock.iso(time_s[first])}")
    if model.method == "d" or elements.eccentricity > ROUND_ENOUGH:
        later, earlier = (model.sgp4_array(*clock.julian(time_s + dt))[1] for dt in (VELOCITY_STEP_S, -VELOCITY_STEP_S))
        velocity_km_s = (later - earlier) / (2 * VELOCITY_STEP_S)
    return *fixed_from_teme(clock, time_s, position_km, velocity_km_s), error == 0


def _interpolated(clock: Clock, name: str, ephemeris: Ephemeris, time_s):
    """Positions by the message's own interpolation, turned into the Earth-fixed frame; velocities are their rates."""
    position_km = np.full((len(time_s), 3), np.nan)
    velocity_km_s = np.full((len(time_s), 3), np.nan)
    for segment in reversed(ephemeris.segment):  # where segments overlap the first one holds
        at_s = np.array([clock.seconds(moment) for moment in segment.moment])
        usable = (time_s >= clock.seconds(segment.usable_from)) & (time_s <= clock.seconds(segment.usable_to))
        t, state = time_s[usable], np.array(segment.state)
        before, here, after = (
            fixed_position_km(clock, moment, interpolate(segment, at_s, state, moment), segment.frame)
            for moment in (t - VELOCITY_STEP_S, t, t + VELOCITY_STEP_S)
        )
        position_km[usable], velocity_km_s[usable] = here, (after - before) / (2 * VELOCITY_STEP_S)
    known = ~np.isnan(position_km[:, 0])
    missing = ~known & (time_s >= 0) & (time_s <= clock.span_s)
    if missing.any():
        first, last = ephemeris.segment[0].usable_from, ephemeris.segment[-1].usable_to
        gap = clock.iso(time_s[np.argmax(missing)])
        raise InputError(
            f"{name}: the ephemeris must cover the whole span, {clock.iso(0.0)} to {clock.iso(clock.span_s)}, got"
            f" {first:%Y-%m-%dT%H:%M:%SZ} to {last:%Y-%m-%dT%H:%M:%SZ}, and no state at {gap}"
        )
    return position_km, velocity_km_s, known
