"""Where a ground antenna's mount is too slow: near the zenith azimuth turns faster than it can."""

import numpy as np

from planner.sky.sites import Sites, look_from

FINE_STEP_S = 0.25
LONGEST_LAG_S = 180.0  # the slowest mount worth the name turns half a circle in this


def lost_window_s(tracks, sites: Sites, passes):
    """When the mount lags behind: begin and end, each (n,) [s after start], both at TCA if it never does.

    The mount follows until its limit, turns at full rate, and is back on the satellite when it has caught up. It does
    not turn ahead of time; cable limits are not considered.
    """
    begin_s, end_s = passes.tca_s.copy(), passes.tca_s.copy()
    for k in np.flatnonzero(passes.max_elevation_deg > _steep_deg(sites)[passes.station_index]):
        track, s = tracks[passes.satellite_index[k]], passes.station_index[k]
        low, high = max(passes.aos_s[k], passes.tca_s[k] - LONGEST_LAG_S), passes.los_s[k]
        high = min(high, passes.tca_s[k] + LONGEST_LAG_S)
        time_s = np.linspace(low, high, 2 + int((high - low) / FINE_STEP_S))
        view = look_from(*track.at(time_s), sites.position_km[s], sites.axes[s])
        antenna = sites.stations[s].antenna
        lost = _lagging(time_s, np.unwrap(view.azimuth_deg, period=360.0), antenna.max_azimuth_rate_deg_s)
        lost |= _lagging(time_s, view.elevation_deg, antenna.max_elevation_rate_deg_s)
        if lost.any():
            begin_s[k], end_s[k] = time_s[lost][0], time_s[lost][-1] + FINE_STEP_S
    return begin_s, np.minimum(end_s, passes.los_s)


def _steep_deg(sites: Sites):
    """Below this elevation a satellite at 2 deg/s (lower than any stays up) cannot outrun the mount."""
    azimuth = np.array([station.antenna.max_azimuth_rate_deg_s for station in sites.stations])
    elevation = np.array([station.antenna.max_elevation_rate_deg_s for station in sites.stations])
    steep = np.degrees(np.arccos(np.minimum(2.0 / azimuth, 1.0)))
    return np.where(elevation < 2.0, 0.0, steep)


def _lagging(time_s, angle_deg, rate_deg_s):
    """Where a follower that turns at most `rate_deg_s` is behind `angle_deg` (n,)."""
    run = rate_deg_s * (time_s - time_s[0])
    behind = angle_deg - (np.minimum.accumulate(angle_deg - run) + run)
    ahead = (np.maximum.accumulate(angle_deg + run) - run) - angle_deg
    return np.maximum(behind, ahead) > 1e-6
