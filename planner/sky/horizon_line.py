"""Arcs cut by a station's own horizon: a line of elevation against azimuth, straight between its corners."""

import numpy as np

from planner.sky.horizon import Arcs, highest_s
from planner.sky.roots import crossings, refine
from planner.sky.sites import Sites, look_from, mask_deg
from planner.sky.track import Track

FOLLOW_STEP_S = 10.0  # between corners; the line and the satellite's path then cross at most twice in a step
SHORTEST_S = 1e-3  # pieces shorter than the refinement's own error are no passes


def cut_by_the_line(track: Track, sites: Sites, arcs: Arcs) -> Arcs:
    """`arcs` with those of stations that have a horizon line cut by it; order kept."""
    with_line = np.array([bool(station.horizon) for station in sites.stations], dtype=bool)[arcs.station_index]
    if not with_line.any():
        return arcs
    parts = [tuple(column[~with_line] for column in arcs.columns)]
    for index in np.unique(arcs.station_index[with_line]):
        mine = arcs.station_index == index
        parts.append(_pieces(track, sites, int(index), *(column[mine] for column in arcs.columns[1:])))
    columns = [np.concatenate(column) for column in zip(*parts, strict=True)]
    order = np.lexsort((columns[1], columns[0]))
    return Arcs(*(column[order] for column in columns))


def _pieces(track: Track, sites: Sites, index: int, rise_s, peak_s, set_s):
    """Station index, rise, peak and set of every piece above the line of one station."""
    station, site_km, axes = sites.stations[index], sites.position_km[index], sites.axes[index]

    def clearance_deg(time_s, _=None):
        view = look_from(*track.at(time_s), site_km, axes)
        return view.elevation_deg - mask_deg(station, view.azimuth_deg)

    arc, time_s = _followed(rise_s, set_s)
    k, corner_s = _corner_crossings(track, station, site_km, axes, arc, time_s)
    arc, time_s = _merged(arc, time_s, arc[k], corner_s)
    left = np.flatnonzero(np.diff(arc) == 0)
    k, crossing_s = crossings(clearance_deg, time_s[left], time_s[left + 1])
    # between neighbouring crossings of one arc the clearance keeps its sign
    everyone = np.arange(len(rise_s))
    arc, edge_s = _merged(np.tile(everyone, 2), np.concatenate([rise_s, set_s]), arc[left[k]], crossing_s)
    left = np.flatnonzero((np.diff(arc) == 0) & (np.diff(edge_s) > SHORTEST_S))
    left = left[clearance_deg((edge_s[left] + edge_s[left + 1]) / 2) > 0]
    arc, begin_s, end_s = arc[left], edge_s[left], edge_s[left + 1]
    top_s = peak_s[arc]
    beside = np.flatnonzero((top_s < begin_s) | (top_s > end_s))
    top_s[beside] = highest_s(track, sites, np.full(len(beside), index), begin_s[beside], end_s[beside])
    return np.full(len(arc), index), begin_s, top_s, end_s


def _followed(rise_s, set_s):
    """Arc and moments from each rise to its set, at most FOLLOW_STEP_S apart."""
    steps = np.ceil((set_s - rise_s) / FOLLOW_STEP_S).astype(int)
    arc = np.repeat(np.arange(len(steps)), steps + 1)
    step = np.arange(len(arc)) - np.repeat(np.cumsum(steps + 1) - steps - 1, steps + 1)
    return arc, rise_s[arc] + step / np.maximum(steps[arc], 1) * (set_s - rise_s)[arc]


def _corner_crossings(track, station, site_km, axes, arc, time_s):
    """Intervals k (m,) and the moments inside them at which the satellite's azimuth passes a corner of the line.

    The horizontal offset from the corner's vertical plane changes sign there (and opposite to it, which does no harm).
    """
    corners = np.radians([azimuth for azimuth, _ in station.horizon])
    level_km = (track.at(time_s)[0] - site_km) @ axes[:2].T
    offset_km = level_km[:, :1] * np.cos(corners) - level_km[:, 1:] * np.sin(corners)
    same = (np.diff(arc) == 0)[:, None]
    k, corner = np.nonzero(same & ((offset_km[:-1] < 0) != (offset_km[1:] < 0)))

    def offset(moment_s, j):
        east_km, north_km = axes[:2] @ (track.at(moment_s)[0] - site_km).T
        azimuth = corners[corner[j]]
        return east_km * np.cos(azimuth) - north_km * np.sin(azimuth)

    return k, refine(offset, time_s[k], time_s[k + 1], offset_km[k, corner], offset_km[k + 1, corner])


def _merged(arc, time_s, more_arc, more_s):
    """Both lists of (arc, moment) as one, by arc, then by time."""
    arc, time_s = np.concatenate([arc, more_arc]), np.concatenate([time_s, more_s])
    order = np.lexsort((time_s, arc))
    return arc[order], time_s[order]
