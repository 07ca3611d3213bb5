"""The week on one page: a lane of passes per station, then the charge and the stored data that they cost and empty."""

from datetime import UTC, datetime, tzinfo

import matplotlib.dates as mdates
import numpy as np
import pandas as pd
from matplotlib.artist import Artist
from matplotlib.collections import PolyCollection
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.markers import CARETRIGHT
from matplotlib.patches import Patch, Rectangle

from planner.charts import style
from planner.mission.models import Mission
from planner.schedule.hours import open_windows_s
from planner.units import DAY_S

FOOT = 0.06  # of a lane: where bars stand
SESSION_TOPS = (0.66, 0.36)  # how high a session reaches, by mode in turn: of two on one pass both are seen
FIRST_MARKER, MARKER_STEP = 0.76, 0.15
FILLS = {  # (face, edge) of a pass by its verdict
    "planned": (style.PALE, style.PALE),
    "left out": (style.FAINT, "#707070"),
    "unusable": ("white", "#B0B0B0"),
    "dropped": ("white", "#B0B0B0"),
}
TWO_LINES = 12  # lanes, up to which a station's count stands under its name
MOST_LANES = 24  # that stay legible; with more stations, those with most contacts are drawn
LONGEST_NAME = 24  # letters of a station's name beside its lane
NEAR = 0.004  # of the width in view: how far beside a pass a click may fall


def week_figure(
    mission: Mission,
    plan,
    *,
    window: tuple[datetime, datetime] | None = None,
    time_zone: tzinfo = UTC,
    satellite: str | None = None,
    selected: str | None = None,
) -> Figure:
    """Every pass and planned session by station; state of charge against its floor; stored data against capacity.

    Parameters
    ----------
    mission : Mission
    plan : has `.contacts`, `.passes`, `.battery`, `.recorder` (DataFrames) and `.summary` (dict)
    window : (begin, end) in view, the whole span when None
    time_zone : of the labels
    satellite : whose charge and data are drawn, the mission's first when None
    selected : pass_id to point out

    Returns
    -------
    Figure, A4 landscape; its axes in order: lanes, charge, data
    """
    satellite = satellite or mission.satellites[0].name
    figure = week_page(mission, plan, satellite=satellite, window=window, time_zone=time_zone)
    draw_plan(figure, mission, plan, satellite=satellite, selected=selected)
    return figure


def week_page(
    mission: Mission,
    plan,
    *,
    satellite: str,
    window=None,
    time_zone: tzinfo = UTC,
    size_in=style.A4_LANDSCAPE_IN,
    onto: Figure | None = None,
) -> Figure:
    """The page before the plan is drawn: axes, closures, eclipses, legend, the same for every plan of the mission.

    `onto` is a figure to draw on instead of a new one; what was on it is wiped off.
    """
    begin, end = window or (mission.start, mission.end)
    with style.on_paper():
        figure = style.new_figure(size_in, title=" ", onto=onto)
        figure.set_layout_engine(None)  # a layout that measures every label costs a third of a redraw
        stations = lanes_of(mission, plan)
        heights = [min(0.5 * len(stations) + 0.4, 6.0), 2.2, 1.5]
        width_in, height_in = size_in
        left_in = 0.41 + 0.061 * max(len(_short(station.name)) for station in stations)
        room = {"left": left_in / width_in, "right": 1 - 0.44 / width_in, "hspace": 0.17}
        room |= {"top": 1 - 0.455 / height_in, "bottom": 0.95 / height_in}
        lanes, charge, data = figure.subplots(3, 1, sharex=True, height_ratios=heights, gridspec_kw=room)
        lanes.set_xlim(mdates.date2num(begin), mdates.date2num(end))
        _draw_closures(lanes, mission, stations)
        battery = plan.battery[plan.battery["satellite"] == satellite]
        _shade_eclipses(charge, battery, days(battery["time_utc"]))
        for axes in (lanes, charge, data):
            style.time_axis(axes, time_zone, label=axes is data)
        lanes.tick_params(axis="x", labelbottom=False)
        charge.tick_params(axis="x", labelbottom=False)
        _legend(figure, mission)
    return figure


def draw_plan(
    figure: Figure, mission: Mission, plan, *, satellite: str, selected: str | None = None, replacing=()
) -> list[Artist]:
    """Draw a plan onto the page of `week_page`, in place of the artists `replacing` of the plan drawn before.

    Returns the artists that differ from plan to plan, in drawing order: a canvas may draw these alone over the page.
    """
    lanes, charge, data = figure.axes
    title = figure.texts[0]
    lasting = {title, lanes.yaxis, charge.yaxis, data.yaxis}
    for artist in replacing:
        if artist not in lasting:
            artist.remove()
    title.set_text(finding(mission, plan))
    with style.on_paper():
        drawn = [
            *_draw_lanes(lanes, mission, lanes_of(mission, plan), plan, selected),
            *_draw_charge(charge, mission, plan, satellite),
            *_draw_data(data, mission, plan, satellite),
        ]
    return [title, *sorted(drawn, key=lambda artist: artist.get_zorder())]


def finding(mission: Mission, plan) -> str:
    """What the week comes to, in one line."""
    summary = plan.summary
    planned = plan.contacts["pass_id"].nunique() if len(plan.contacts) else 0
    if not len(plan.passes):
        return "No pass in the span: no station sees a satellite"
    return (
        f"{planned} of {len(plan.passes)} passes planned, {_data_amount(summary['volume_mbit'])},"
        f" lowest charge {summary['soc_min_pct']:.1f} % ({mission.policy.floor_words})"
    )


def lanes_of(mission: Mission, plan) -> list:
    """The stations that have a lane, from the top down: all, or those with the most contacts and then passes."""
    planned, seen = (plan.contacts["station"].value_counts(), plan.passes["station"].value_counts())
    busy = sorted(mission.stations, key=lambda station: (-planned.get(station.name, 0), -seen.get(station.name, 0)))
    chosen = {station.name for station in busy[:MOST_LANES]}
    return [station for station in mission.stations if station.name in chosen]


def pass_at(mission: Mission, plan, x: float, y: float, width: float) -> str | None:
    """The pass_id under a point (x, y) of the lanes, when `width` days are in view; None where there is none."""
    stations = lanes_of(mission, plan)
    row = len(stations) - 1 - int(np.floor(y))
    if not 0 <= row < len(stations) or not len(plan.passes):
        return None
    here = plan.passes[plan.passes["station"] == stations[row].name]
    away = np.maximum(days(here["aos_utc"]) - x, x - days(here["los_utc"]))
    if not len(away) or away.min() > NEAR * width:
        return None
    return str(here["pass_id"].iloc[int(away.argmin())])


def days(moments) -> np.ndarray:
    """Moments (n,), datetimes or ISO texts, as matplotlib's day numbers."""
    stamps = pd.DatetimeIndex(pd.to_datetime(moments, utc=True)).tz_localize(None)
    return stamps.to_numpy().astype("datetime64[us]").astype(np.int64) / (DAY_S * 1e6)


def _data_amount(mbit: float) -> str:
    return f"{mbit / 1000:.0f} Gbit" if mbit >= 10_000 else f"{mbit:.0f} Mbit"


def _draw_lanes(axes, mission: Mission, stations: list, plan, selected: str | None) -> list[Artist]:
    count = len(stations)
    foot_of = {station.name: count - 1 - row for row, station in enumerate(stations)}
    passes, contacts = (
        _in_lanes(plan.passes, "aos", "los", foot_of),
        _in_lanes(plan.contacts, "tx_on", "tx_off", foot_of),
    )
    drawn = [*_draw_passes(axes, passes), *_point_out(axes, passes[passes["pass_id"] == selected])]
    for index, (mode, mark) in enumerate(style.mode_marks(_modes(mission)).items()):
        own = contacts[contacts["mode"] == mode]
        drawn += _draw_sessions(axes, own, mark, SESSION_TOPS[index % 2], FIRST_MARKER + MARKER_STEP * (index % 2))
    planned = plan.contacts.groupby("station")["pass_id"].nunique() if len(plan.contacts) else {}
    between = "\n" if count <= TWO_LINES else ", "
    seen = plan.passes["station"].value_counts()
    names = [
        f"{_short(station.name)}{between}{planned.get(station.name, 0)} of {seen.get(station.name, 0)}"
        for station in stations
    ]
    axes.set_yticks(count - 0.5 - np.arange(count), labels=names)
    for label in axes.get_yticklabels():
        label.set_parse_math(False)
    axes.tick_params(axis="y", length=0, labelsize=float(np.clip(140 / count, 5, 8)))
    axes.set_ylim(0, count)
    more = "" if count == len(mission.stations) else f" (the busiest {count} of {len(mission.stations)})"
    axes.set_ylabel(f"station, passes planned of all{more}")
    return [*drawn, axes.yaxis]


def _in_lanes(table: pd.DataFrame, opens: str, closes: str, foot_of: dict[str, int]) -> pd.DataFrame:
    """The rows whose station has a lane, with `begin` and `end` in days and the lane's `foot`."""
    here = table[table["station"].isin(list(foot_of))]
    foot = here["station"].map(foot_of).to_numpy(dtype=float)
    return here.assign(begin=days(here[f"{opens}_utc"]), end=days(here[f"{closes}_utc"]), foot=foot)


def _draw_closures(axes, mission: Mission, stations: list) -> None:
    bars = []
    for row, station in enumerate(stations):
        foot = len(stations) - 1 - row
        edges_s = np.array([0.0, *np.ravel(open_windows_s(mission, station)), mission.span_s]).reshape(-1, 2)
        begin, end = (mdates.date2num(mission.start) + edges_s[edges_s[:, 1] > edges_s[:, 0]] / DAY_S).T
        bars.append(_bars(begin, end, np.full(len(begin), foot + 0.02), np.full(len(begin), foot + 0.98)))
        axes.axhline(foot, color=style.PALE, linewidth=0.6, zorder=1)
    closed = PolyCollection(
        list(np.concatenate(bars)), facecolor="#F2F2F2", edgecolor="#C4C4C4", hatch="////", linewidth=0, zorder=0.5
    )
    axes.add_collection(closed, autolim=False)


def _draw_passes(axes, passes: pd.DataFrame) -> list[Artist]:
    """A bar as long as the pass and as high as it climbs; hollow where nothing can be sent."""
    begin, end, foot, verdict = (passes[name].to_numpy() for name in ("begin", "end", "foot", "verdict"))
    climbs = passes["max_elevation_deg"].to_numpy(dtype=float) / 90
    bars = _bars(begin, end, foot + FOOT, foot + FOOT + 0.08 + (SESSION_TOPS[0] - FOOT - 0.08) * climbs)
    drawn: list[Artist] = [
        axes.add_collection(
            PolyCollection(bars[verdict == name], facecolor=face, edgecolor=edge, linewidth=0.7, zorder=2),
            autolim=False,
        )
        for name, (face, edge) in FILLS.items()
    ]
    dropped = verdict == "dropped"
    middle, height = ((begin + end) / 2)[dropped], foot[dropped] + FIRST_MARKER
    return drawn + axes.plot(middle, height, "x", color=style.BLACK, ms=4, scalex=False, scaley=False)


def _draw_sessions(axes, contacts: pd.DataFrame, mark, top: float, marker_height: float) -> list[Artist]:
    colour, marker = mark
    begin, end, foot = (contacts[name].to_numpy() for name in ("begin", "end", "foot"))
    bars = PolyCollection(
        _bars(begin, end, foot + FOOT, foot + top), facecolor=colour, edgecolor=colour, linewidth=1.1, zorder=3
    )
    axes.add_collection(bars, autolim=False)
    marks = axes.plot(
        (begin + end) / 2, foot + marker_height, marker, color=colour, ms=4.2, mec="white", mew=0.3, zorder=4,
        scalex=False, scaley=False,
    )  # fmt: skip
    return [bars, *marks]


def _bars(begin, end, foot, top):
    """Corners (n, 4, 2) of upright bars."""
    x, y = np.stack([begin, end, end, begin], axis=-1), np.stack([foot, foot, top, top], axis=-1)
    return np.stack([x, y], axis=-1)


def _point_out(axes, passes: pd.DataFrame) -> list[Artist]:
    drawn: list[Artist] = []
    for begin, end, foot in zip(passes["begin"], passes["end"], passes["foot"], strict=True):
        patch = Rectangle((begin, foot), end - begin, 1.0, facecolor=style.YELLOW, alpha=0.5, zorder=0.8)
        ring = {"ms": 24, "mfc": "none", "mec": style.BLACK, "mew": 1.0, "zorder": 5}
        drawn += [axes.add_patch(patch), *axes.plot([(begin + end) / 2], [foot + 0.5], "o", scalex=False, **ring)]
    return drawn


def _draw_charge(axes, mission: Mission, plan, satellite: str) -> list[Artist]:
    battery = plan.battery[plan.battery["satellite"] == satellite]
    time = days(battery["time_utc"])
    floor, end = mission.policy.soc_floor_pct, mission.policy.soc_end_pct
    drawn: list[Artist] = [
        *axes.plot(time, battery["soc_pct"], color=style.SKY_BLUE, linewidth=0.9, label="nominal", zorder=3),
        *axes.plot(time, battery["soc_worst_pct"], color=style.BLACK, linewidth=1.1, label="pessimistic", zorder=4),
        axes.axhline(
            floor, color=style.VERMILLION, linestyle="--", linewidth=1.2, label=f"floor {floor:g} %", zorder=3
        ),
        *axes.plot(
            [mdates.date2num(mission.end)], [end], marker=CARETRIGHT, ms=8, color=style.VERMILLION, linestyle="",
            label=f"at least {end:g} % at the end", zorder=5,
        ),
    ]  # fmt: skip
    lowest_shown = floor
    if len(battery):
        lowest = int(np.argmin(battery["soc_worst_pct"].to_numpy()))
        value = float(battery["soc_worst_pct"].iloc[lowest])
        lowest_shown = min(floor, value)
        drawn += axes.plot(
            [time[lowest]], [value], "o", ms=7, mfc="none", mec=style.VERMILLION, mew=1.3, zorder=6,
            label=f"lowest {value:.1f} %",
        )  # fmt: skip
    axes.set_ylim(lowest_shown - 4, 101)
    axes.set_ylabel("state of charge, %")
    if len(mission.satellites) > 1:
        axes.set_ylabel(f"{satellite}\nstate of charge, %")
    style.legend_above(axes)
    return [*drawn, axes.get_legend(), axes.yaxis]


def _shade_eclipses(axes, battery: pd.DataFrame, time: np.ndarray) -> None:
    dark = battery["sunlit"].isin(["no", False, 0.0]).to_numpy()
    turns = np.flatnonzero(np.diff(dark, prepend=not dark[0], append=not dark[-1])) if len(dark) else np.empty(0, int)
    edges = time[np.minimum(turns, len(time) - 1)]
    axes.broken_barh(
        [(begin, end - begin) for begin, end, shade in zip(edges, edges[1:], dark[turns[:-1]], strict=False) if shade],
        (0.0, 1.0), transform=axes.get_xaxis_transform(), color="#E4E7EC", linewidth=0, zorder=0.5,
    )  # fmt: skip


def _draw_data(axes, mission: Mission, plan, satellite: str) -> list[Artist]:
    recorder = plan.recorder[plan.recorder["satellite"] == satellite]
    time, stored = days(recorder["time_utc"]), recorder["stored_mbit"].to_numpy(dtype=float) / 1000
    room = mission.satellite(satellite).spacecraft.recorder.usable_mbit / 1000
    drawn: list[Artist] = [
        axes.fill_between(time, stored, color=style.GREEN, alpha=0.3, linewidth=0, zorder=2),
        *axes.plot(time, stored, color=style.GREEN, label="stored", zorder=3),
        axes.axhline(room, color=style.BLACK, linestyle="-.", linewidth=1.0, label=f"room {room:,.0f} Gbit"),
    ]
    lost = float(recorder["lost_mbit"].iloc[-1]) / 1000 if len(recorder) else 0.0
    if lost > 0:
        drawn += axes.plot([], [], " ", label=f"{lost:,.1f} Gbit lost for want of room")
    axes.set_ylim(0, max(room, stored.max(initial=0.0)) * 1.12)
    axes.set_ylabel("data aboard, Gbit")
    style.legend_above(axes)
    return [*drawn, axes.get_legend(), axes.yaxis]


def _legend(figure: Figure, mission: Mission) -> None:
    marks = style.mode_marks(_modes(mission))
    handles: list[Artist] = [
        Line2D([], [], color=colour, marker=marker, linewidth=5, ms=5, mec="white", label=f"session, {mode}")
        for mode, (colour, marker) in marks.items()
    ]
    handles += [
        Patch(facecolor=face, edgecolor=edge, label=f"pass {verdict}{note}")
        for verdict, note in (("left out", " (as high as it climbs)"), ("unusable", ""))
        for face, edge in [FILLS[verdict]]
    ]
    handles += [
        Patch(facecolor="#F2F2F2", edgecolor="#C4C4C4", hatch="////", label="station closed"),
        Patch(facecolor="#E4E7EC", label="eclipse"),
        Line2D([], [], color=style.BLACK, marker="x", linestyle="", label="dropped by hand"),
    ]
    figure.legend(handles=handles, loc="lower left", bbox_to_anchor=(0.005, 0.0), ncols=4)


def _short(name: str) -> str:
    return name if len(name) <= LONGEST_NAME else name[: LONGEST_NAME - 1] + "…"


def _modes(mission: Mission) -> list[str]:
    return [transmitter.mode for satellite in mission.satellites for transmitter in satellite.spacecraft.transmitter]
