"""Every pass of every satellite over every station, as arrays over passes."""

from dataclasses import dataclass, fields, replace

import numpy as np
import pandas as pd

from planner.sky.clock import Clock
from planner.sky.horizon import Arcs, arcs_above, highest_s
from planner.sky.horizon_line import cut_by_the_line
from planner.sky.pass_ids import is_geostationary, pass_ids, refuse_equal_slugs
from planner.sky.sites import Sites, look_from
from planner.sky.sun import eclipse_edges_s, sun_position_km, visible_sun_fraction
from planner.sky.track import Track
from planner.units import DAY_S

EDGE_S = 1e-3  # beside a shadow's edge, beyond its own error
PUBLIC_COLUMNS = (
    "pass_id", "satellite", "station", "aos_utc", "tca_utc", "los_utc", "duration_s", "aos_azimuth_deg",
    "tca_azimuth_deg", "los_azimuth_deg", "max_elevation_deg", "tca_range_km", "sunlit_fraction", "truncated",
)  # fmt: skip


@dataclass(frozen=True, eq=False)
class Passes:
    """Arrays over passes (n,), by AOS, then satellite, then station. Geometric: no refraction, no light time.

    A pass lasts while the satellite stands above the station's minimum elevation and horizon line. TCA is its highest
    moment. A pass in progress at an end of the span is cut there, which `truncated` tells: '', 'start', 'end', 'both'.
    `sunlit_fraction` is the share of the pass with the satellite in sunlight, penumbra weighed by the visible disc.
    """

    pass_id: np.ndarray
    satellite: np.ndarray
    station: np.ndarray
    satellite_index: np.ndarray
    station_index: np.ndarray
    aos_s: np.ndarray
    tca_s: np.ndarray
    los_s: np.ndarray
    aos_azimuth_deg: np.ndarray
    tca_azimuth_deg: np.ndarray
    los_azimuth_deg: np.ndarray
    max_elevation_deg: np.ndarray
    tca_range_km: np.ndarray
    sunlit_fraction: np.ndarray
    truncated: np.ndarray

    def __len__(self) -> int:
        return len(self.aos_s)

    @property
    def duration_s(self) -> np.ndarray:
        return self.los_s - self.aos_s

    @property
    def sunlit_s(self) -> np.ndarray:
        """Seconds of each pass with the satellite in sunlight."""
        return self.sunlit_fraction * self.duration_s

    def take(self, index) -> "Passes":
        """The passes that an index array or a boolean mask picks."""
        return replace(self, **{field.name: getattr(self, field.name)[index] for field in fields(self)})

    def frame(self, clock: Clock) -> pd.DataFrame:
        """The public table: one row a pass, times in ISO 8601 UTC."""
        columns = {f"{event}_utc": clock.iso(getattr(self, f"{event}_s")) for event in ("aos", "tca", "los")}
        return pd.DataFrame({name: columns.get(name, getattr(self, name, None)) for name in PUBLIC_COLUMNS})


def find_passes(clock: Clock, tracks, stations) -> Passes:
    """Every pass inside the clock's span.

    Parameters
    ----------
    clock : Clock
    tracks : sequence of Track, from `track_satellite` with the same clock
    stations : sequence of Station

    Raises
    ------
    InputError : two stations or two satellites whose names would give the same pass ids
    """
    refuse_equal_slugs("station", [station.name for station in stations])
    refuse_equal_slugs("satellite", [track.satellite for track in tracks])
    sites = Sites.of(stations)
    return joined([passes_of_satellite(clock, track, index, sites) for index, track in enumerate(tracks)])


def joined(parts: list[dict]) -> Passes:
    """The passes of several satellites as one."""
    columns = {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}
    order = np.lexsort((columns["station_index"], columns["satellite_index"], columns["aos_s"]))
    return Passes(**{name: column[order] for name, column in columns.items()})


def passes_of_satellite(clock: Clock, track: Track, satellite_index: int, sites: Sites) -> dict[str, np.ndarray]:
    """The columns of one satellite's passes."""
    arcs, by_day = _cut_by_day(clock, cut_by_the_line(track, sites, arcs_above(track, sites)))
    by_day |= is_geostationary(track)
    ids = pass_ids(clock, track, sites, arcs.station_index, arcs.rise_s, by_day)
    inside = (arcs.set_s > 0) & (arcs.rise_s < clock.span_s)
    arcs, ids = Arcs(*(column[inside] for column in arcs.columns)), ids[inside]
    starts, ends = arcs.rise_s < 0, arcs.set_s > clock.span_s
    aos_s, los_s = np.maximum(arcs.rise_s, 0.0), np.minimum(arcs.set_s, clock.span_s)
    place = sites.position_km[arcs.station_index], sites.axes[arcs.station_index]
    tca_s = np.clip(arcs.peak_s, aos_s, los_s)
    cut = np.flatnonzero(tca_s != arcs.peak_s)
    tca_s[cut] = highest_s(track, sites, arcs.station_index[cut], aos_s[cut], los_s[cut])
    view = look_from(*track.at(np.stack([aos_s, tca_s, los_s])), *place)
    names = np.array([station.name for station in sites.stations], dtype=object)
    return {
        "pass_id": ids,
        "satellite": np.full(len(ids), track.satellite, dtype=object),
        "station": names[arcs.station_index],
        "satellite_index": np.full(len(ids), satellite_index),
        "station_index": arcs.station_index,
        "aos_s": aos_s,
        "tca_s": tca_s,
        "los_s": los_s,
        "aos_azimuth_deg": view.azimuth_deg[0],
        "tca_azimuth_deg": view.azimuth_deg[1],
        "los_azimuth_deg": view.azimuth_deg[2],
        "max_elevation_deg": view.elevation_deg[1],
        "tca_range_km": view.range_km[1],
        "sunlit_fraction": _sunlit_fraction(clock, track, aos_s, los_s),
        "truncated": np.array(["", "start", "end", "both"], dtype=object)[starts + 2 * ends],
    }


def _cut_by_day(clock: Clock, arcs: Arcs):
    """Arcs longer than a day cut at each UTC midnight, and which ones came from that."""
    long = arcs.set_s - arcs.rise_s > DAY_S
    if not long.any():
        return arcs, long
    first, last = clock.utc_day(arcs.rise_s), clock.utc_day(arcs.set_s)
    count = np.where(long, last - first + 1, 1)
    k = np.repeat(np.arange(len(count)), count)
    day = first[k] + np.arange(count.sum()) - np.repeat(np.cumsum(count) - count, count)
    rise_s = np.where(long[k], np.maximum(arcs.rise_s[k], clock.midnight_s(day)), arcs.rise_s[k])
    set_s = np.where(long[k], np.minimum(arcs.set_s[k], clock.midnight_s(day + 1)), arcs.set_s[k])
    some = set_s > rise_s
    cut = Arcs(arcs.station_index[k], rise_s, arcs.peak_s[k], set_s)
    return Arcs(*(column[some] for column in cut.columns)), long[k][some]


def _sunlit_fraction(clock: Clock, track: Track, aos_s, los_s):
    """Mean visible share of the Sun's disc over [aos_s, los_s], each (n,)."""
    size = len(track.time_s)
    begun, ended = (
        np.bincount(track.interval(event_s) + late, minlength=size) for late, event_s in enumerate((aos_s, los_s))
    )
    edges_s = eclipse_edges_s(track, clock, within=np.cumsum(begun - ended)[:-1] > 0)
    # between edges the share is constant but in penumbra, where it runs nearly straight from one to the other
    moments_s = np.sort(np.concatenate([aos_s, los_s, edges_s - EDGE_S, edges_s + EDGE_S]))
    visible = visible_sun_fraction(track.place_km(moments_s), sun_position_km(clock, moments_s))
    collected = np.append(0.0, np.cumsum((visible[1:] + visible[:-1]) / 2 * np.diff(moments_s)))
    lit_s = np.interp(los_s, moments_s, collected) - np.interp(aos_s, moments_s, collected) if len(aos_s) else los_s
    return np.clip(lit_s / np.maximum(los_s - aos_s, 1e-9), 0.0, 1.0)
