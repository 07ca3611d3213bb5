"""When satellites stand above stations' horizons: rises, sets and peaks, all stations of a satellite at once."""

from dataclasses import dataclass

import numpy as np

from planner.sky.roots import refine
from planner.sky.sites import Sites
from planner.sky.track import Track, evaluate
from planner.units import EARTH_GM_KM3_S2, EARTH_RATE_RAD_S, dot

SEARCH_POINTS = 65


@dataclass(frozen=True, eq=False)
class Arcs:
    """Stretches above the mask: station_index, rise_s, peak_s, set_s, each (n,), by station, then by time."""

    station_index: np.ndarray
    rise_s: np.ndarray
    peak_s: np.ndarray
    set_s: np.ndarray

    @property
    def columns(self):
        return self.station_index, self.rise_s, self.peak_s, self.set_s


def arcs_above(track: Track, sites: Sites) -> Arcs:
    """Every stretch of the track above each station's mask, and the highest point inside it.

    A stretch in progress at an end of the track begins or ends there.
    """
    nodes = _extremes_added(track, sites, _nodes_near_the_horizon(track, sites))
    arcs = _stretches(track, sites, nodes)
    with_line = np.array([bool(station.horizon) for station in sites.stations], dtype=bool)[arcs.station_index]
    if with_line.any():
        from planner.sky.horizon_line import cut_by_the_line

        arcs = cut_by_the_line(track, sites, arcs, with_line)
    return arcs


@dataclass(frozen=True, eq=False)
class _Nodes:
    """Moments at stations, by station, then by time; `linked[k]`: k and k + 1 bound one piece of a grid interval."""

    station_index: np.ndarray
    time_s: np.ndarray
    interval: np.ndarray  # of the track, that begins at the node or holds it
    sine: np.ndarray  # of elevation
    slope: np.ndarray  # its rate [1/s]
    linked: np.ndarray


def _sine_and_slope(position_km, velocity_km_s, site_km, up):
    """Sine of elevation above the ellipsoid's horizon, and its rate [1/s]."""
    away_km = position_km - site_km
    range_km = np.sqrt(dot(away_km, away_km))
    sine = dot(away_km, up) / range_km
    rate = dot(velocity_km_s, up) / range_km - sine * dot(away_km, velocity_km_s) / range_km**2
    return sine, rate


def _bulge_km(track: Track):
    """How far any height may rise above a straight line beside each grid point, (n,)."""
    h = np.diff(track.time_s)
    radius_km = np.sqrt(dot(track.position_km, track.position_km))
    speed_km_s = np.sqrt(dot(track.velocity_km_s, track.velocity_km_s))
    pull = EARTH_GM_KM3_S2 / radius_km**2 + 2 * EARTH_RATE_RAD_S * speed_km_s + EARTH_RATE_RAD_S**2 * radius_km
    widest = np.maximum(np.append(h, 0), np.append(0, h))
    return 1.2 * pull * widest**2 / 8  # a fifth more, because the pull itself changes within a step


def _nodes_near_the_horizon(track: Track, sites: Sites) -> _Nodes:
    """Grid points that bound an interval in which the satellite may be above the horizon plane.

    Between two points the height above the plane rises above both by at most acceleration x step^2 / 8.
    """
    up = sites.axes[:, 2]
    level_km = dot(up, sites.position_km)[:, None] - _bulge_km(track)
    xyz_km = np.ascontiguousarray(track.position_km.T)
    nodes = []
    for zenith, level in zip(up, level_km, strict=True):
        # einsum, because a product of this shape would wake the linear algebra library's threads
        near = np.einsum("i,in->n", zenith, xyz_km) > level
        bounding = near.copy()
        bounding[1:] |= near[:-1]
        bounding[:-1] |= near[1:]
        nodes.append(np.flatnonzero(bounding))
    node = np.concatenate(nodes) if nodes else np.zeros(0, dtype=int)
    station_index = np.repeat(np.arange(len(nodes)), [len(each) for each in nodes])
    linked = np.zeros(len(node), dtype=bool)
    linked[:-1] = (np.diff(node) == 1) & (np.diff(station_index) == 0)
    sine, slope = _sine_and_slope(
        track.position_km[node], track.velocity_km_s[node], sites.position_km[station_index], up[station_index]
    )
    return _Nodes(station_index, track.time_s[node], node, sine, slope, linked)


def _extremes_added(track: Track, sites: Sites, nodes: _Nodes) -> _Nodes:
    """The same with every highest and lowest point between nodes, so that elevation is monotone between nodes."""
    k = np.flatnonzero(nodes.linked[:-1] & ((nodes.slope[:-1] > 0) != (nodes.slope[1:] > 0)))
    state = _states(track, sites, nodes, k)
    extreme_s = refine(
        lambda time_s, j: state(time_s, j)[1], nodes.time_s[k], nodes.time_s[k + 1], nodes.slope[k], nodes.slope[k + 1]
    )
    sine, _ = state(extreme_s, slice(None))
    place = k + 1
    return _Nodes(
        np.insert(nodes.station_index, place, nodes.station_index[k]),
        np.insert(nodes.time_s, place, extreme_s),
        np.insert(nodes.interval, place, nodes.interval[k]),
        np.insert(nodes.sine, place, sine),
        np.insert(nodes.slope, place, 0.0),
        np.insert(nodes.linked, place, True),
    )


def _states(track: Track, sites: Sites, nodes: _Nodes, k):
    """A function (time_s, j) -> sine, slope on the grid intervals of the nodes `k[j]`, gathered once."""
    interval, station = nodes.interval[k], nodes.station_index[k]
    cubics, begin_s = track.cubics[interval], track.time_s[interval]
    site_km, up = sites.position_km[station], sites.axes[station, 2]

    def state(time_s, j):
        return _sine_and_slope(*evaluate(cubics[j], time_s - begin_s[j]), site_km[j], up[j])

    return state


def _stretches(track: Track, sites: Sites, nodes: _Nodes) -> Arcs:
    """Arcs above each station's lowest mask."""
    bound = np.sin(np.radians(sites.floor_deg))[nodes.station_index]
    above = nodes.sine > bound
    before = np.append(False, nodes.linked[:-1])
    was_above = np.append(False, above[:-1]) & before
    is_above_next = np.append(above[1:], False) & nodes.linked
    rises, sets = np.flatnonzero(above & ~was_above), np.flatnonzero(above & ~is_above_next)
    # a stretch in progress at an end of the track has no crossing there
    rise_s, set_s = nodes.time_s[rises].copy(), nodes.time_s[sets].copy()
    for moment_s, left, has in ((rise_s, rises - 1, before[rises]), (set_s, sets, nodes.linked[sets])):
        k = left[has]
        state = _states(track, sites, nodes, k)
        level = bound[k]
        moment_s[has] = refine(
            lambda time_s, j, state=state, level=level: state(time_s, j)[0] - level[j],
            nodes.time_s[k],
            nodes.time_s[k + 1],
            nodes.sine[k] - level,
            nodes.sine[k + 1] - level,
        )
    return Arcs(nodes.station_index[rises], rise_s, _peaks(nodes, rises, sets), set_s)


def highest_s(track: Track, site_km, up, begin_s, end_s):
    """The moment within [begin_s, end_s], (n,), of greatest elevation above places (n, 3) with zeniths `up` (n, 3)."""
    times = np.linspace(begin_s, end_s, SEARCH_POINTS)
    best = np.argmax(_sine_and_slope(*track.at(times), site_km, up)[0], axis=0)
    everyone = np.arange(len(begin_s))
    low = times[np.maximum(best - 1, 0), everyone]
    high = times[np.minimum(best + 1, SEARCH_POINTS - 1), everyone]

    def slope(time_s, k):
        return _sine_and_slope(*track.at(time_s), site_km[k], up[k])[1]

    start, end = slope(low, everyone), slope(high, everyone)
    k = np.flatnonzero((start > 0) & (end < 0))
    top_s = times[best, everyone]
    top_s[k] = refine(lambda t, j: slope(t, k[j]), low[k], high[k], start[k], end[k])
    return top_s


def _peaks(nodes: _Nodes, rises, sets):
    """Time of the highest node of each run rises[k]..sets[k]."""
    if not rises.size:
        return np.zeros(0)
    length = sets - rises + 1
    run = np.repeat(np.arange(len(rises)), length)
    node = np.arange(length.sum()) - np.repeat(np.cumsum(length) - length, length) + np.repeat(rises, length)
    order = np.lexsort((nodes.sine[node], run))
    return nodes.time_s[node[order[np.cumsum(length) - 1]]]
