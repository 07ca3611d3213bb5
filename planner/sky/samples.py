"""Every pass on a fine grid of its own: what link, pointing tables and charts are computed on."""

from dataclasses import dataclass

import numpy as np

from planner.sky.clock import Clock
from planner.sky.frames import acceleration_km_s2
from planner.sky.mount import lost_window_s
from planner.sky.passes import Passes
from planner.sky.sites import Sites, look_from, rates_deg_s
from planner.sky.sun import sun_position_km
from planner.units import C_M_S, dot, unit_vector


@dataclass(frozen=True, eq=False)
class Samples:
    """Flat arrays over moments (m,); pass k owns `offsets[k]:offsets[k + 1]`, from its AOS through its TCA to its LOS.

    position_km, velocity_km_s (m, 3) are Earth-fixed. `sun_separation_deg` is the Sun's angle from the ground antenna's
    axis. `trackable` is False while the mount is too slow: from `lost_from_s` to `lost_to_s` of the pass, (n,) each and
    both at TCA where it never is. Angles are geometric.
    """

    offsets: np.ndarray
    pass_index: np.ndarray
    time_s: np.ndarray
    position_km: np.ndarray
    velocity_km_s: np.ndarray
    azimuth_deg: np.ndarray
    elevation_deg: np.ndarray
    range_km: np.ndarray
    range_rate_km_s: np.ndarray
    range_acceleration_km_s2: np.ndarray
    azimuth_rate_deg_s: np.ndarray
    elevation_rate_deg_s: np.ndarray
    sun_separation_deg: np.ndarray
    trackable: np.ndarray
    lost_from_s: np.ndarray
    lost_to_s: np.ndarray

    def __len__(self) -> int:
        return len(self.time_s)

    @property
    def lost_s(self) -> np.ndarray:
        """Seconds of each pass lost because the mount is too slow, (n,)."""
        return self.lost_to_s - self.lost_from_s

    def of(self, pass_index: int) -> slice:
        """The samples of one pass."""
        return slice(int(self.offsets[pass_index]), int(self.offsets[pass_index + 1]))


def doppler_hz(range_rate_km_s, frequency_mhz):
    """Shift of the received frequency, first order in v/c (1e-5 of it neglected): positive on approach."""
    return -np.asarray(range_rate_km_s) * 1e3 / C_M_S * frequency_mhz * 1e6


def doppler_rate_hz_s(range_acceleration_km_s2, frequency_mhz):
    """Rate of the shift; the acceleration behind it neglects the Earth's flattening (1e-3 of it)."""
    return doppler_hz(range_acceleration_km_s2, frequency_mhz)


def sample_passes(clock: Clock, tracks, stations, passes: Passes, step_s: float = 10.0) -> Samples:
    """Every pass sampled at most `step_s` apart, with AOS, TCA and LOS among the samples."""
    pass_index, time_s, offsets = _moments(passes, step_s)
    position_km, velocity_km_s = np.empty((len(time_s), 3)), np.empty((len(time_s), 3))
    lost_from_s, lost_to_s = passes.tca_s.copy(), passes.tca_s.copy()
    sites = Sites.of(stations)
    for index, track in enumerate(tracks):
        mine = np.flatnonzero(passes.satellite_index[pass_index] == index)
        position_km[mine], velocity_km_s[mine] = track.at(time_s[mine])
        k = np.flatnonzero(passes.satellite_index == index)
        events_s = passes.aos_s[k], passes.tca_s[k], passes.los_s[k]
        lost_from_s[k], lost_to_s[k] = lost_window_s(track, sites, passes.station_index[k], *events_s)
    station = passes.station_index[pass_index]
    site_km, axes = sites.position_km[station], sites.axes[station]
    view = look_from(position_km, velocity_km_s, site_km, axes)
    azimuth_rate, elevation_rate = rates_deg_s(position_km, velocity_km_s, site_km, axes)
    away_km = position_km - site_km
    speed2 = dot(velocity_km_s, velocity_km_s)
    pull = dot(away_km, acceleration_km_s2(position_km, velocity_km_s))
    return Samples(
        offsets=offsets,
        pass_index=pass_index,
        time_s=time_s,
        position_km=position_km,
        velocity_km_s=velocity_km_s,
        azimuth_deg=view.azimuth_deg,
        elevation_deg=view.elevation_deg,
        range_km=view.range_km,
        range_rate_km_s=view.range_rate_km_s,
        range_acceleration_km_s2=(speed2 + pull - view.range_rate_km_s**2) / view.range_km,
        azimuth_rate_deg_s=azimuth_rate,
        elevation_rate_deg_s=elevation_rate,
        sun_separation_deg=_separation_deg(away_km, sun_position_km(clock, time_s) - site_km),
        trackable=(time_s < lost_from_s[pass_index]) | (time_s >= lost_to_s[pass_index]),
        lost_from_s=lost_from_s,
        lost_to_s=lost_to_s,
    )


def _moments(passes: Passes, step_s: float):
    """Even steps from AOS to TCA and from TCA to LOS: pass index and time, both (m,), and offsets (n + 1,)."""
    before, after = passes.tca_s - passes.aos_s, passes.los_s - passes.tca_s
    steps_before = np.ceil(before / step_s - 1e-9).astype(int)
    steps_after = np.ceil(after / step_s - 1e-9).astype(int)
    count = steps_before + steps_after + 1
    offsets = np.concatenate([[0], np.cumsum(count)])
    k = np.repeat(np.arange(len(count)), count)
    step = np.arange(len(k)) - offsets[k] - steps_before[k]  # 0 at TCA
    share = np.where(step < 0, step / np.maximum(steps_before[k], 1), step / np.maximum(steps_after[k], 1))
    return k, passes.tca_s[k] + share * np.where(step < 0, before[k], after[k]), offsets


def _separation_deg(a, b):
    """Angle between vectors (..., 3), exact for small angles too."""
    a, b = unit_vector(a), unit_vector(b)
    half = np.sqrt(dot(a - b, a - b)) / 2
    return 2 * np.degrees(np.arcsin(np.minimum(half, 1.0)))
