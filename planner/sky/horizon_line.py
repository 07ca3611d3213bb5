"""Arcs cut by a station's own horizon, a line of elevation against azimuth, straight between its corners."""

import numpy as np

from planner.sky.horizon import CUT_STEP_S, Arcs, _sine_and_slope
from planner.sky.roots import refine
from planner.sky.sites import Sites, look_from, mask_deg
from planner.sky.track import Track


def cut_by_the_line(track: Track, sites: Sites, arcs: Arcs, with_line) -> Arcs:
    """`arcs` with those of stations that have a horizon line (`with_line`, bool (n,)) cut by it; order kept."""
    kept = [np.flatnonzero(~with_line)]
    columns = [[arcs.station_index[kept[0]], arcs.rise_s[kept[0]], arcs.peak_s[kept[0]], arcs.set_s[kept[0]]]]
    for index in np.unique(arcs.station_index[with_line]):
        chosen = np.flatnonzero(arcs.station_index == index)
        pieces = _pieces(track, sites, int(index), arcs.rise_s[chosen], arcs.peak_s[chosen], arcs.set_s[chosen])
        columns.append([np.full(len(pieces[0]), index), *pieces])
    station_index, rise_s, peak_s, set_s = (np.concatenate(column) for column in zip(*columns, strict=True))
    order = np.lexsort((rise_s, station_index))
    return Arcs(station_index[order], rise_s[order], peak_s[order], set_s[order])


def _pieces(track: Track, sites: Sites, index: int, rise_s, peak_s, set_s):
    """Rise, peak and set of every piece above the line of station `index`."""
    station, site_km, axes = sites.stations[index], sites.position_km[index], sites.axes[index]

    def clearance_deg(time_s, _=None):
        view = look_from(*track.at(time_s), site_km, axes)
        return view.elevation_deg - mask_deg(station, view.azimuth_deg)

    def slope(time_s, _=None):
        ahead = np.minimum(time_s + 0.005, track.time_s[-1])
        return clearance_deg(ahead) - clearance_deg(ahead - 0.01)

    arc, time_s = _sampled(rise_s, peak_s, set_s)
    arc, time_s = _corners_added(track, station, site_km, axes, arc, time_s)
    arc, time_s, clear = _turns_added(clearance_deg, arc, time_s)
    # an arc's own ends on the lowest mask lie on the line or under it
    above = clear > 1e-9
    same_before, same_after = np.append(False, np.diff(arc) == 0), np.append(np.diff(arc) == 0, False)
    rises = np.flatnonzero(above & ~(np.append(False, above[:-1]) & same_before))
    sets = np.flatnonzero(above & ~(np.append(above[1:], False) & same_after))
    begin_s, end_s = time_s[rises].copy(), time_s[sets].copy()
    for moment_s, left, has in ((begin_s, rises - 1, same_before[rises]), (end_s, sets, same_after[sets])):
        k = left[has]
        moment_s[has] = refine(clearance_deg, time_s[k], time_s[k + 1], clear[k], clear[k + 1])
    up = axes[2]
    top_s = np.clip(peak_s[arc[rises]], begin_s, end_s)
    # the arc's highest point may lie outside the piece: then the higher end, unless a lower maximum stands inside
    inner = _highest_inside(track, site_km, up, arc, time_s, rises, sets)
    candidates = np.stack([top_s, begin_s, end_s, np.clip(inner, begin_s, end_s)])
    height = _sine_and_slope(*track.at(candidates), site_km, up)[0]
    return begin_s, candidates[np.argmax(height, axis=0), np.arange(len(begin_s))], end_s


def _highest_inside(track, site_km, up, arc, time_s, rises, sets):
    sine = _sine_and_slope(*track.at(time_s), site_km, up)[0] if time_s.size else np.zeros(0)
    return np.array([time_s[a + np.argmax(sine[a : b + 1])] for a, b in zip(rises, sets, strict=True)])


def _sampled(rise_s, peak_s, set_s):
    """Arc index and moments from each rise to its set, the peak among them, at most CUT_STEP_S apart."""
    times = [
        np.unique(np.concatenate([np.linspace(a, p, 2 + int((p - a) / CUT_STEP_S)),
                                  np.linspace(p, b, 2 + int((b - p) / CUT_STEP_S))]))
        for a, p, b in zip(rise_s, peak_s, set_s, strict=True)
    ]  # fmt: skip
    arc = np.repeat(np.arange(len(times)), [len(t) for t in times])
    return arc, np.concatenate(times) if times else np.zeros(0)


def _corners_added(track, station, site_km, axes, arc, time_s):
    """The moments at which the satellite's azimuth passes a corner of the line are added."""

    def across_km(time_s, azimuth_rad):
        local_km = (track.at(time_s)[0] - site_km) @ axes[:2].T
        return local_km[..., 0] * np.cos(azimuth_rad) - local_km[..., 1] * np.sin(azimuth_rad)

    corners = np.radians([azimuth for azimuth, _ in station.horizon])
    values = across_km(time_s[:, None], corners)
    same = (np.diff(arc) == 0)[:, None]
    k, corner = np.nonzero(same & ((values[:-1] < 0) != (values[1:] < 0)))
    found_s = refine(
        lambda t, j: across_km(t, corners[corner[j]]),
        time_s[k],
        time_s[k + 1],
        values[k, corner],
        values[k + 1, corner],
    )
    return _merged(arc, time_s, arc[k], found_s)


def _turns_added(clearance_deg, arc, time_s):
    """The highest and lowest points of the clearance between moments are added, by golden section."""
    clear = clearance_deg(time_s)
    if len(time_s) < 2:
        return arc, time_s, clear
    same = np.diff(arc) == 0
    width = np.diff(time_s)
    nudge = np.minimum(0.01, width / 10)
    start_slope = clearance_deg(time_s[:-1] + nudge) - clearance_deg(time_s[:-1])
    end_slope = clearance_deg(time_s[1:]) - clearance_deg(time_s[1:] - nudge)
    k = np.flatnonzero(same & ((start_slope > 0) != (end_slope > 0)) & (width > 1e-3))
    sign = np.where(start_slope[k] > 0, 1.0, -1.0)
    low, high = time_s[k], time_s[k + 1]
    golden = (np.sqrt(5) - 1) / 2
    for _ in range(32):
        left, right = high - golden * (high - low), low + golden * (high - low)
        keep_left = sign * clearance_deg(left) > sign * clearance_deg(right)
        low, high = np.where(keep_left, low, left), np.where(keep_left, right, high)
    arc, time_s = _merged(arc, time_s, arc[k], (low + high) / 2)
    return arc, time_s, clearance_deg(time_s)


def _merged(arc, time_s, more_arc, more_s):
    arc, time_s = np.concatenate([arc, more_arc]), np.concatenate([time_s, more_s])
    order = np.lexsort((time_s, arc))
    return arc[order], time_s[order]
