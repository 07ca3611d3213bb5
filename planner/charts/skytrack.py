"""One pass as the dish sees it: its track over the sky, the horizon, the Sun, and where the mount is too slow."""

from datetime import UTC, tzinfo

import numpy as np
from matplotlib.figure import Figure

from planner.charts import style
from planner.charts.beside import place_beside
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.sky import Sky
from planner.sky.sites import look, mask_deg
from planner.sky.sun import sun_position_km

POINTS = ("N", "NE", "E", "SE", "S", "SW", "W", "NW")
ALL_ROUND_DEG = np.linspace(0.0, 360.0, 361)
SQUARE_IN = (6.4, 6.9)
SIDE_PT, TOP_PT, TITLE_PT, LEGEND_PT = 28.0, 26.0, 26.0, 40.0  # around the dome: directions, title, legend
WIDE_PT = 300.0  # where three entries of the legend stand side by side


def skytrack_figure(
    mission: Mission,
    sky: Sky,
    pass_id: str,
    *,
    session: Session | None = None,
    time_zone: tzinfo = UTC,
    size_in=SQUARE_IN,
    titled: bool = True,
) -> Figure:
    """Azimuth and elevation of a pass on the sky dome, north up and east to the right as on a map.

    Parameters
    ----------
    pass_id : of `sky.passes`
    session : the planned transmission, drawn thick, when there is one
    time_zone : of the times written along the track
    titled : whether the finding stands over it

    Raises
    ------
    KeyError : no such pass in the span
    """
    with style.on_paper():
        figure = style.new_figure(size_in, title=finding(mission, sky, pass_id) if titled else "")
        figure.set_layout_engine(None)
        width_pt, height_pt = 72 * size_in[0], 72 * size_in[1]
        aside, below = SIDE_PT / width_pt, (TOP_PT + LEGEND_PT) / height_pt
        above = (TOP_PT + TITLE_PT * titled) / height_pt
        axes = figure.add_axes((aside, below, 1 - 2 * aside, 1 - above - below), projection="polar")
        draw_skytrack(axes, mission, sky, pass_id, session, time_zone)
        figure.legend(loc="lower center", ncols=3 if width_pt > WIDE_PT else 2)
    return figure


def draw_skytrack(axes, mission: Mission, sky: Sky, pass_id: str, session: Session | None, time_zone: tzinfo) -> None:
    """The same onto polar axes of a page that holds more."""
    row = _row(sky, pass_id)
    station = mission.station(str(sky.passes.station[row]))
    _draw_dome(axes, station)
    _draw_sun(axes, sky, station, float(sky.passes.tca_s[row]))
    _draw_track(axes, sky, row, session)
    _write_times(axes, sky, row, time_zone)


def finding(mission: Mission, sky: Sky, pass_id: str) -> str:
    """What the pass looks like from the dish, in one line."""
    row = _row(sky, pass_id)
    station, samples = mission.station(str(sky.passes.station[row])), sky.samples.of(row)
    climbs = f"{station.name}: climbs to {sky.passes.max_elevation_deg[row]:.0f}°"
    lost = ~sky.samples.trackable[samples]
    if lost.any():
        time_s = sky.samples.time_s[samples][lost]
        return f"{climbs}, mount too slow for {time_s[-1] - time_s[0]:.0f} s"
    return f"{climbs}, Sun {sky.samples.sun_separation_deg[samples].min():.0f}° away at the nearest"


def _row(sky: Sky, pass_id: str) -> int:
    found = np.flatnonzero(sky.passes.pass_id == pass_id)
    if not len(found):
        raise KeyError(f"no pass {pass_id!r} in the span")
    return int(found[0])


def _draw_dome(axes, station) -> None:
    axes.set_theta_zero_location("N")
    axes.set_theta_direction(-1)
    axes.set_ylim(0, 90)
    axes.set_yticks([0, 30, 60], labels=["90°", "60°", "30°"], fontsize=7)
    axes.set_rlabel_position(157)
    directions = [f"{text}\n{azimuth}°" for azimuth, text in zip(range(0, 360, 45), POINTS, strict=True)]
    axes.set_xticks(np.radians(np.arange(0, 360, 45)), labels=directions, fontsize=7.5)
    mask = mask_deg(station, ALL_ROUND_DEG % 360.0)
    axes.fill_between(
        np.radians(ALL_ROUND_DEG), 90 - mask, 90, facecolor=style.PALE, edgecolor=style.FAINT, hatch="////",
        linewidth=0.6, label="below the horizon line", zorder=1.5,
    )  # fmt: skip


def _draw_sun(axes, sky: Sky, station, time_s: float) -> None:
    sun = look(sun_position_km(sky.clock, np.array([time_s])), np.zeros((1, 3)), station)
    if sun.elevation_deg[0] > 0:
        axes.plot(
            np.radians(sun.azimuth_deg), 90 - sun.elevation_deg, "o", ms=13, color=style.YELLOW, mec=style.ORANGE,
            mew=1.5, linestyle="", label=f"Sun, {sun.elevation_deg[0]:.0f}° high", zorder=6.5,
        )  # fmt: skip


def _draw_track(axes, sky: Sky, row: int, session: Session | None) -> None:
    samples = sky.samples.of(row)
    time_s = sky.samples.time_s[samples]
    azimuth, zenith = np.radians(sky.samples.azimuth_deg[samples]), 90 - sky.samples.elevation_deg[samples]
    axes.plot(azimuth, zenith, color=style.INK, linewidth=1.2, label="pass", zorder=4)
    if session is not None:
        on_air = (time_s >= session.tx_on_s) & (time_s <= session.tx_off_s)
        axes.plot(azimuth[on_air], zenith[on_air], color=style.BLUE, linewidth=4, label="transmission", zorder=4.5)
    lost = ~sky.samples.trackable[samples]
    if lost.any():
        axes.plot(
            azimuth[lost], zenith[lost], color=style.VERMILLION, marker="x", ms=6, linewidth=2,
            label="mount too slow", zorder=5,
        )  # fmt: skip


def _write_times(axes, sky: Sky, row: int, time_zone: tzinfo) -> None:
    """A mark and a time where the satellite rises, is highest and sets."""
    samples, passes = sky.samples.of(row), sky.passes
    time_s = sky.samples.time_s[samples]
    azimuth, zenith = np.radians(sky.samples.azimuth_deg[samples]), 90 - sky.samples.elevation_deg[samples]
    marks = {"AOS": (passes.aos_s[row], "^"), "TCA": (passes.tca_s[row], "s"), "LOS": (passes.los_s[row], "v")}
    texts = []
    for name, (moment_s, mark) in marks.items():
        k = int(np.argmin(np.abs(time_s - moment_s)))
        axes.plot([azimuth[k]], [zenith[k]], marker=mark, ms=7, color=style.INK, zorder=6)
        zone = "Z" if time_zone is UTC else ""
        when = sky.clock.datetime(moment_s + 0.5).astimezone(time_zone)  # to the nearest second
        text = axes.annotate(
            f"{name} {when:%H:%M:%S}{zone}", (azimuth[k], zenith[k]), xytext=(0, 0), textcoords="offset points",
            va="center", zorder=7, bbox={"boxstyle": "round,pad=0.15", "facecolor": "white", "edgecolor": "none",
            "alpha": 0.75},
        )  # fmt: skip
        texts.append(text)
    place_beside(axes, texts, np.column_stack([azimuth, zenith]))
