"""The Sun in a ground antenna's beam."""

import numpy as np

from planner.sky.clock import Clock
from planner.sky.passes import Passes
from planner.sky.samples import Samples
from planner.sky.sites import Sites
from planner.sky.sun import sun_position_km
from planner.units import dot, unit_vector

FINE_STEPS = 100  # of each interval between samples in which the Sun may come into the beam


def least_sun_separation_deg(passes: Passes, samples: Samples) -> np.ndarray:
    """The Sun's smallest angle from the antenna's axis among each pass's samples, (n,) [deg]."""
    return np.minimum.reduceat(samples.sun_separation_deg, samples.offsets[:-1]) if len(passes) else np.zeros(0)


def sun_in_beam_s(clock: Clock, tracks, stations, passes: Passes, samples: Samples, half_width_deg) -> np.ndarray:
    """Seconds of each pass for which the Sun's centre stands within `half_width_deg` of the antenna's axis, (n,).

    `half_width_deg` is a number or an array (n,) [deg]: half the half-power beam, or that and the Sun's own half-width
    of 0.27 deg for first contact. Followed a hundred times finer than the samples where it comes near.
    """
    half_deg = np.broadcast_to(np.asarray(half_width_deg, dtype=float), len(passes))
    k = np.flatnonzero(_may_hold_the_sun(samples, half_deg))
    owner = samples.pass_index[k]
    begin_s, end_s = samples.time_s[k], samples.time_s[k + 1]
    time_s = begin_s + (end_s - begin_s) * ((np.arange(FINE_STEPS) + 0.5) / FINE_STEPS)[:, None]
    site_km = Sites.of(stations).position_km[passes.station_index[owner]]
    to_sun = unit_vector(sun_position_km(clock, time_s) - site_km)
    inside = np.zeros(time_s.shape)
    for index, track in enumerate(tracks):
        mine = passes.satellite_index[owner] == index
        axis = unit_vector(track.at(time_s[:, mine])[0] - site_km[mine])
        inside[:, mine] = dot(axis, to_sun[:, mine]) > np.cos(np.radians(half_deg[owner[mine]]))
    return np.bincount(owner, weights=inside.mean(axis=0) * (end_s - begin_s), minlength=len(passes))


def _may_hold_the_sun(samples: Samples, half_deg):
    """Intervals from one sample to the next in which the axis could reach the Sun, (m - 1,) bool."""
    separation = samples.sun_separation_deg
    nearer = np.minimum(separation[:-1], separation[1:])
    rate = np.abs(samples.elevation_rate_deg_s) + np.abs(samples.azimuth_rate_deg_s) * np.cos(
        np.radians(samples.elevation_deg)
    )
    moved = 2 * np.maximum(rate[:-1], rate[1:]) * np.diff(samples.time_s)
    same = np.diff(samples.pass_index) == 0
    return same & (nearer - moved < half_deg[samples.pass_index[:-1]])
