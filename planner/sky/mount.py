"""Where a ground antenna's mount is too slow: near the zenith azimuth turns faster than it can."""

import numpy as np

from planner.sky.sites import Sites, look_from, rates_deg_s
from planner.sky.track import Track

POINTS = 801  # around the top of each pass in question
AROUND_S = 60.0  # and half a turn at the mount's rate, the most it can fall behind
# Azimuth turns fastest at the top of a pass; a tenth is left for the little that the two fall apart.
WORTH_A_LOOK = 0.9


def lost_window_s(track: Track, sites: Sites, station_index, aos_s, tca_s, los_s):
    """When the mount lags behind one satellite's passes (n,): begin and end, both (n,), both at TCA if it never does.

    The mount follows until its limit, turns at full rate, and is back on the satellite when it has caught up. It does
    not turn ahead of time; the limits of its cables are not considered.
    """
    begin_s, end_s = tca_s.copy(), tca_s.copy()
    antennas = [station.antenna for station in sites.stations]
    limits = np.array([(a.max_azimuth_rate_deg_s, a.max_elevation_rate_deg_s) for a in antennas]).reshape(-1, 2)
    k = np.flatnonzero(_may_be_too_fast(track, sites, station_index, tca_s, limits[station_index]))
    if not k.size:
        return begin_s, end_s
    place, limit = station_index[k], limits[station_index[k]]
    reach_s = AROUND_S + 180.0 / limit.min(axis=1)
    time_s = np.linspace(np.maximum(aos_s[k], tca_s[k] - reach_s), np.minimum(los_s[k], tca_s[k] + reach_s), POINTS)
    view = look_from(*track.at(time_s), sites.position_km[place], sites.axes[place])
    lost = _lagging(time_s, np.unwrap(view.azimuth_deg, period=360.0, axis=0), limit[:, 0])
    lost |= _lagging(time_s, view.elevation_deg, limit[:, 1])
    behind = np.flatnonzero(lost.any(axis=0))
    # the mount leaves the satellite one point before it is first behind
    first, last = np.argmax(lost, axis=0) - 1, POINTS - 1 - np.argmax(lost[::-1], axis=0)
    begin_s[k[behind]], end_s[k[behind]] = time_s[first[behind], behind], time_s[last[behind], behind]
    return begin_s, end_s


def _may_be_too_fast(track: Track, sites: Sites, station_index, tca_s, limits):
    """Passes whose rates at TCA come near a limit, (n,) bool; elevation cannot outrun the line of sight itself."""
    position_km, velocity_km_s = track.at(tca_s)
    site_km, axes = sites.position_km[station_index], sites.axes[station_index]
    azimuth_rate, _ = rates_deg_s(position_km, velocity_km_s, site_km, axes)
    distance_km, speed_km_s = np.linalg.norm(position_km - site_km, axis=-1), np.linalg.norm(velocity_km_s, axis=-1)
    sight_rate = np.degrees(speed_km_s / distance_km)
    azimuth_limit, elevation_limit = limits.T
    return (np.abs(azimuth_rate) > WORTH_A_LOOK * azimuth_limit) | (sight_rate > elevation_limit)


def _lagging(time_s, angle_deg, rate_deg_s):
    """Where a follower that turns at most `rate_deg_s` (n,) is behind `angle_deg` (m, n), moments first."""
    run = rate_deg_s * (time_s - time_s[0])
    behind = angle_deg - (np.minimum.accumulate(angle_deg - run, axis=0) + run)
    ahead = (np.maximum.accumulate(angle_deg + run, axis=0) - run) - angle_deg
    return np.maximum(behind, ahead) > 1e-6
