"""When satellites stand above stations' horizons: rises, sets and peaks, all stations of a satellite at once."""

from dataclasses import dataclass

import numpy as np

from planner.sky.roots import refine
from planner.sky.sites import Sites
from planner.sky.track import Track, evaluate, place
from planner.units import dot

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
    """Every stretch of the track above each station's lowest mask, and the highest point inside it.

    A stretch in progress at an end of the track begins or ends there.
    """
    return _stretches(track, sites, _extremes_added(track, sites, _nodes_near_the_horizon(track, sites)))


@dataclass(frozen=True, eq=False)
class _Nodes:
    """Moments at stations, by station, then by time; `linked[k]`: k and k + 1 bound one piece of a grid interval."""

    station_index: np.ndarray
    time_s: np.ndarray
    interval: np.ndarray  # of the track, that begins at the node or holds it
    clearance_km: np.ndarray  # above the cone of the lowest mask
    climb: np.ndarray  # has the sign of the elevation's rate
    linked: np.ndarray


def _clearance_km(away_km, up, sine):
    """Height above the cone of elevations with that sine (m,), of vectors from stations with zeniths `up`, (3, m) both.

    Nearly straight in time where the cone is crossed.
    """
    return _along(away_km, up) - sine * np.sqrt(_along(away_km, away_km))


def _climb(away_km, velocity_km_s, up):
    """The elevation's rate times range^3 over its cosine, (m,): nearly straight in time around the top of a pass."""
    height_km, height_rate_km_s = _along(away_km, up), _along(velocity_km_s, up)
    return height_rate_km_s * _along(away_km, away_km) - height_km * _along(away_km, velocity_km_s)


def _along(a, b):
    return np.einsum("im,im->m", a, b)


def _nodes_near_the_horizon(track: Track, sites: Sites) -> _Nodes:
    """Grid points that bound an interval in which the satellite may be above the horizon plane.

    Whatever stands above the plane between two points stands at most `bulge_km` above the higher of them.
    """
    up = sites.axes[:, 2]
    xyz_km = np.ascontiguousarray(track.position_km.T)
    nodes = []
    for zenith, level_km in zip(up, dot(up, sites.position_km), strict=True):
        # einsum, because a product of this shape would wake the linear algebra library's threads
        near = np.einsum("i,in->n", zenith, xyz_km) + track.bulge_km > level_km
        bounding = near.copy()
        bounding[1:] |= near[:-1]
        bounding[:-1] |= near[1:]
        nodes.append(np.flatnonzero(bounding))
    node = np.concatenate(nodes) if nodes else np.zeros(0, dtype=int)
    k = np.repeat(np.arange(len(nodes)), [len(each) for each in nodes])
    linked = np.zeros(len(node), dtype=bool)
    linked[:-1] = (np.diff(node) == 1) & (np.diff(k) == 0)
    away_km, zenith = (track.position_km[node] - sites.position_km[k]).T, up[k].T
    clearance_km = _clearance_km(away_km, zenith, np.sin(np.radians(sites.floor_deg))[k])
    climb = _climb(away_km, track.velocity_km_s[node].T, zenith)
    return _Nodes(k, track.time_s[node], node, clearance_km, climb, linked)


def _extremes_added(track: Track, sites: Sites, nodes: _Nodes) -> _Nodes:
    """The same with every highest and lowest point between nodes, so that elevation is monotone between nodes."""
    k = np.flatnonzero(nodes.linked[:-1] & ((nodes.climb[:-1] > 0) != (nodes.climb[1:] > 0)))
    quintics, begin_s, up, sine = _seen_from_stations(track, sites, nodes.interval[k], nodes.station_index[k])
    extreme_s = refine(
        lambda time_s, j: _climb(*evaluate(quintics[..., j], time_s - begin_s[j]), up[:, j]),
        nodes.time_s[k],
        nodes.time_s[k + 1],
        nodes.climb[k],
        nodes.climb[k + 1],
    )
    clearance_km = _clearance_km(place(quintics, extreme_s - begin_s), up, sine)
    order = np.argsort(np.concatenate([np.arange(len(nodes.time_s)), k + 0.5]))

    def merged(column, more):
        return np.concatenate([column, more])[order]

    return _Nodes(
        merged(nodes.station_index, nodes.station_index[k]),
        merged(nodes.time_s, extreme_s),
        merged(nodes.interval, nodes.interval[k]),
        merged(nodes.clearance_km, clearance_km),
        merged(nodes.climb, np.zeros(len(k))),
        merged(nodes.linked, np.ones(len(k), dtype=bool)),
    )


def _seen_from_stations(track: Track, sites: Sites, interval, station_index):
    """Polynomials (6, 3, m) away from the stations, their beginnings, zeniths (3, m) and sines of the lowest mask."""
    quintics = track.quintics[..., interval]
    quintics[0] -= sites.position_km[station_index].T
    sine = np.sin(np.radians(sites.floor_deg))[station_index]
    return quintics, track.time_s[interval], sites.axes[station_index, 2].T, sine


def _stretches(track: Track, sites: Sites, nodes: _Nodes) -> Arcs:
    """Arcs above each station's lowest mask."""
    above = nodes.clearance_km > 0
    from_before = np.append(False, nodes.linked[:-1])
    rises = np.flatnonzero(above & ~(np.append(False, above[:-1]) & from_before))
    sets = np.flatnonzero(above & ~(np.append(above[1:], False) & nodes.linked))
    rise_s, set_s = nodes.time_s[rises].copy(), nodes.time_s[sets].copy()
    # a stretch in progress at an end of the track has no crossing there
    rising, setting = from_before[rises], nodes.linked[sets]
    k = np.concatenate([rises[rising] - 1, sets[setting]])
    quintics, begin_s, up, sine = _seen_from_stations(track, sites, nodes.interval[k], nodes.station_index[k])
    crossing_s = refine(
        lambda time_s, j: _clearance_km(place(quintics[..., j], time_s - begin_s[j]), up[:, j], sine[j]),
        nodes.time_s[k],
        nodes.time_s[k + 1],
        nodes.clearance_km[k],
        nodes.clearance_km[k + 1],
    )
    rise_s[rising], set_s[setting] = np.split(crossing_s, [rising.sum()])
    return Arcs(nodes.station_index[rises], rise_s, _peaks(track, sites, nodes, above, rises), set_s)


def _peaks(track: Track, sites: Sites, nodes: _Nodes, above, rises):
    """Time of the highest of the nodes `above` the mask in each stretch that begins at the nodes `rises`."""
    # where the climb ends; a stretch has one such node as a rule, and an end of the track may be higher
    top = np.flatnonzero(above & ((nodes.climb == 0) | ~nodes.linked | ~np.append(False, nodes.linked[:-1])))
    if len(top) == len(rises):
        return nodes.time_s[top]
    station, owner = nodes.station_index[top], np.searchsorted(rises, top, side="right") - 1
    sine = _sine(track.place_km(nodes.time_s[top]), sites.position_km[station], sites.axes[station, 2])
    order = np.lexsort((sine, owner))
    last = np.searchsorted(owner[order], np.arange(len(rises)), side="right") - 1
    return nodes.time_s[top[order[last]]]


def _sine(position_km, site_km, up):
    away_km = position_km - site_km
    return dot(away_km, up) / np.sqrt(dot(away_km, away_km))


def highest_s(track: Track, sites: Sites, station_index, begin_s, end_s):
    """The moment within [begin_s, end_s] at which the satellite stands highest above each station, all (n,)."""
    site_km, up = sites.position_km[station_index], sites.axes[station_index, 2]
    times = np.linspace(begin_s, end_s, SEARCH_POINTS)
    best = np.argmax(_sine(track.place_km(times), site_km, up), axis=0)
    everyone = np.arange(len(begin_s))
    low = times[np.maximum(best - 1, 0), everyone]
    high = times[np.minimum(best + 1, SEARCH_POINTS - 1), everyone]

    def climb(time_s, k):
        position_km, velocity_km_s = track.at(time_s)
        return _climb((position_km - site_km[k]).T, velocity_km_s.T, up[k].T)

    start, end = climb(low, everyone), climb(high, everyone)
    k = np.flatnonzero((start > 0) & (end < 0))
    top_s = times[best, everyone]
    top_s[k] = refine(lambda t, j: climb(t, k[j]), low[k], high[k], start[k], end[k])
    return top_s
