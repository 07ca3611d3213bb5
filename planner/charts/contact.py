"""One pass as the link sees it: what arrives against what each MODCOD needs, the margin, elevation and range."""

from datetime import UTC, tzinfo

import matplotlib.dates as mdates
import numpy as np
from matplotlib.figure import Figure

from planner.charts import style
from planner.link.table import LinkOption, LinkTable
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.sky import Sky
from planner.units import DAY_S

LABEL_SHARE = 0.03  # of the axes' height; of thresholds closer than this only the lower is named


def contact_figure(
    mission: Mission,
    sky: Sky,
    table: LinkTable,
    pass_id: str,
    *,
    option: LinkOption | None = None,
    session: Session | None = None,
    time_zone: tzinfo = UTC,
) -> Figure:
    """Es/N0 against each MODCOD's threshold, margin against what the policy asks for, elevation and range.

    Parameters
    ----------
    table : LinkTable of the pass's satellite and the mode in question
    option : way of choosing MODCODs, the table's first when None
    session : the planned transmission, shaded, when there is one

    Returns
    -------
    Figure, A4 landscape; its axes in order: Es/N0, margin, elevation, range. KeyError when the pass is unknown.
    """
    option = option or table.options[0]
    own = _samples_of(sky, table, pass_id)
    station = mission.station(str(sky.passes.station[_row(sky, pass_id)]))
    loss_db = mission.satellite(table.satellite).spacecraft.mode(table.mode).implementation_loss_db
    time = mdates.date2num(mission.start) + table.time_s[own] / DAY_S
    with style.on_paper():
        figure = style.new_figure(title=_finding(mission, table, option, own, station.name, session))
        level, margin, height = figure.subplots(3, 1, sharex=True, height_ratios=[3, 1.3, 1.5])
        _draw_level(level, table, option, own, time, loss_db)
        _draw_margin(margin, mission, option, own, time)
        _draw_height(height, sky, table.sample_index[own], time)
        height.set_xlim(time[0], time[-1])
        for axes in (level, margin, height):
            _shade_session(axes, mission, session)
            style.time_axis(axes, time_zone, label=axes is height)
        style.legend_above(level)
        style.legend_above(margin)
    return figure


def _row(sky: Sky, pass_id: str) -> int:
    found = np.flatnonzero(sky.passes.pass_id == pass_id)
    if not len(found):
        raise KeyError(f"no pass {pass_id!r} in the span")
    return int(found[0])


def _samples_of(sky: Sky, table: LinkTable, pass_id: str) -> slice:
    place = np.flatnonzero(table.pass_rows == _row(sky, pass_id))
    if not len(place):
        raise KeyError(f"pass {pass_id!r} is none of {table.satellite!r}")
    return slice(int(table.offsets[place[0]]), int(table.offsets[place[0] + 1]))


def _finding(mission, table, option, own, station: str, session: Session | None) -> str:
    usable = option.usable[own]
    what = f"{table.mode} over {station}"
    if not usable.any():
        best = float(np.max(option.margin_db[own]))
        return f"{what}: not usable, best margin {best:.1f} dB of the {mission.policy.link_margin_db:g} dB asked for"
    seconds = float(np.sum(np.diff(table.time_s[own]) * (usable[1:] & usable[:-1])))
    on_air = usable
    if session is not None:
        inside = (table.time_s[own] >= session.tx_on_s) & (table.time_s[own] <= session.tx_off_s)
        on_air = inside if inside.any() else usable
    lowest, flown = float(np.min(option.margin_db[own][on_air])), "on air" if session is not None else "where usable"
    return f"{what}: {seconds:.0f} s usable, lowest margin {flown} {lowest:.1f} dB"


def _draw_level(axes, table: LinkTable, option: LinkOption, own: slice, time, loss_db: float) -> None:
    """Es/N0 less the implementation loss, so that its height above a threshold is the margin."""
    needed = np.array([row.required_esn0_db for row in table.modcods])
    level = table.esn0_db[own] - loss_db
    active = option.modcod[own]
    threshold = np.where(active >= 0, needed[active], np.nan)
    shown = np.concatenate([needed, level[level > -100]])
    lowest, highest = shown.min() - 1.5, shown.max() + 1.5
    labelled = -np.inf
    for name, required in sorted(zip(table.names, needed, strict=True), key=lambda pair: pair[1]):
        axes.axhline(required, color=style.PALE, linewidth=0.8, zorder=1)
        if required - labelled >= LABEL_SHARE * (highest - lowest):
            axes.annotate(
                f"{name}  {required:.1f}", (1.0, required), xycoords=("axes fraction", "data"), xytext=(4, 0),
                textcoords="offset points", va="center", fontsize=7,
            )  # fmt: skip
            labelled = required
    held = np.repeat(np.arange(len(time)), 2)  # the threshold holds from one sample to the next, the level runs on
    axes.fill_between(
        time[held[1:]], threshold[held[:-1]], level[held[1:]], color=style.SKY_BLUE, alpha=0.35, linewidth=0,
        label="margin", zorder=2,
    )  # fmt: skip
    axes.plot(time, level, color=style.BLACK, label="Es/N0 less implementation loss", zorder=4)
    axes.step(
        time, threshold, where="post", color=style.VERMILLION, linewidth=2.0, label="active MODCOD needs", zorder=3
    )
    axes.set_ylim(lowest, highest)
    axes.set_ylabel("Es/N0, dB")


def _draw_margin(axes, mission: Mission, option: LinkOption, own: slice, time) -> None:
    asked = mission.policy.link_margin_db
    margin, usable = option.margin_db[own], option.usable[own]
    axes.plot(time, margin, color=style.BLUE, linewidth=1.0, linestyle=":", label="margin")
    axes.plot(time, np.where(usable, margin, np.nan), color=style.BLUE, linewidth=2.0, label="margin where usable")
    axes.axhline(asked, color=style.VERMILLION, linestyle="--", linewidth=1.2, label=f"asked for, {asked:g} dB")
    axes.set_ylim(min(asked, max(margin.min(), asked - 8)) - 1, max(margin.max(), asked) + 1.5)
    axes.set_ylabel("margin, dB")


def _draw_height(axes, sky: Sky, samples, time) -> None:
    axes.plot(time, sky.samples.elevation_deg[samples], color=style.GREEN)
    axes.set_ylabel("elevation (solid), °")
    axes.set_ylim(0, max(30.0, float(sky.samples.elevation_deg[samples].max()) * 1.1))
    other = axes.twinx()
    other.plot(time, sky.samples.range_km[samples], color=style.PURPLE, linestyle="--")
    other.set_ylabel("range (dashed), km")
    other.spines["right"].set_visible(True)


def _shade_session(axes, mission: Mission, session: Session | None) -> None:
    if session is not None:
        start = mdates.date2num(mission.start)
        begin, end = start + session.tx_on_s / DAY_S, start + session.tx_off_s / DAY_S
        axes.axvspan(begin, end, color=style.YELLOW, alpha=0.18, linewidth=0, zorder=0.4, label="transmission")
        for edge in (begin, end):
            axes.axvline(edge, color=style.INK, linewidth=0.7, zorder=0.6)
