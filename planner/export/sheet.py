"""The week sheet: the week's picture and the list of its contacts, as PDF and as HTML."""

import base64
import textwrap
from collections.abc import Iterator
from datetime import datetime

import pandas as pd
from matplotlib.figure import Figure

from planner.charts import style
from planner.charts.week import finding, week_figure
from planner.export.contacts import utc_text
from planner.export.html import escape, items_html, page, table_html
from planner.export.render import pdf_bytes, png_bytes
from planner.mission.models import Mission

COLUMNS = {  # heading: (place across the table, letters that fit)
    "day": (0.0, 12), "AOS": (0.072, 9), "on": (0.128, 9), "off": (0.184, 9), "LOS": (0.24, 9), "az. up": (0.298, 9),
    "az. down": (0.345, 9), "max el.": (0.402, 9), "station": (0.45, 20), "mode": (0.575, 16), "margin": (0.677, 9),
    "Mbit": (0.765, 9), "cautions": (0.785, 42),
}  # fmt: skip
HEADINGS = tuple(COLUMNS)
ROWS_A_PAGE = 36
CAUTIONS = (
    "Planning aid: the flight rules, the licences of transmitter and stations, and licensed practice come first.",
    "Check power flux-density against the current Radio Regulations and your licence.",
    "Antennas move by remote control: nobody at or in front of them; keep to each station's exposure limits.",
)


def sheet_files(mission: Mission, plan) -> dict[str, bytes]:
    """`week_sheet.pdf` and `week_sheet.html` of a plan (its four tables and its summary)."""
    return {
        "week_sheet.pdf": pdf_bytes(sheet_pages(mission, plan), mission.name),
        "week_sheet.html": sheet_html(mission, plan).encode(),
    }


def sheet_pages(mission: Mission, plan) -> Iterator[Figure]:
    """A4 landscape: the week's picture, then as many pages of contacts as it takes."""
    yield week_figure(mission, plan)
    rows = sheet_rows(plan.contacts)
    count = max(1, -(-len(rows) // ROWS_A_PAGE))
    for number in range(count):
        yield _list_page(mission, rows[number * ROWS_A_PAGE : (number + 1) * ROWS_A_PAGE], number + 1, count)


def sheet_html(mission: Mission, plan) -> str:
    """The same as one page for a browser."""
    picture = base64.b64encode(png_bytes(week_figure(mission, plan), dpi=110)).decode()
    body = [
        f"<h1>{escape(mission.name)}</h1>",
        f'<p class="under">{escape(finding(plan))}. All times UTC.</p>',
        f'<img src="data:image/png;base64,{picture}" alt="{escape(finding(plan))}">',
        "<h2>Contacts</h2>" + table_html(HEADINGS, sheet_rows(plan.contacts)),
        f'<div class="caution"><h2>Cautions</h2><ul>{items_html(CAUTIONS)}</ul></div>',
    ]
    return page(mission.name, "\n".join(body), landscape=True)


def sheet_rows(contacts: pd.DataFrame) -> list[tuple[str, ...]]:
    """A row of texts under `HEADINGS` for every contact, in the table's order."""
    return [_row(contact) for contact in contacts.itertuples()]


def _row(contact) -> tuple[str, ...]:
    events = [getattr(contact, f"{event}_utc") for event in ("aos", "tx_on", "tx_off", "los")]
    aos, on, off, los = (datetime.fromisoformat(text) for text in utc_text(events).tolist())
    clock = [f"{moment:%H:%M:%S}" for moment in (aos, on, off, los)]
    angles = (contact.aos_azimuth_deg, contact.los_azimuth_deg, contact.max_elevation_deg)
    return (
        f"{on:%a %d %b}", *clock, *(f"{angle:.0f}°" for angle in angles), contact.station, contact.mode,
        f"{contact.min_margin_db:.1f} dB", f"{contact.volume_mbit:,.0f}",
        "" if pd.isna(contact.cautions) else str(contact.cautions),
    )  # fmt: skip


def _list_page(mission: Mission, rows: list[tuple[str, ...]], number: int, count: int) -> Figure:
    with style.on_paper():
        figure = style.new_figure(style.A4_LANDSCAPE_IN)
        figure.set_layout_engine("none")
        axes = figure.add_axes((0.03, 0.11, 0.94, 0.80))
        axes.set_axis_off()
        axes.set_xlim(0, 1)
        axes.set_ylim(ROWS_A_PAGE + 1, 0)
        title = textwrap.shorten(f"{mission.name}: contacts, all times UTC", 100, placeholder=" …")
        figure.text(0.03, 0.94, title, fontsize=12.5, fontweight="bold")
        figure.text(0.97, 0.94, f"{number} of {count}", ha="right")
        _write_row(axes, 0.5, HEADINGS, fontweight="bold")
        for k, row in enumerate(rows):
            if k % 2 == 0:
                axes.axhspan(k + 1, k + 2, color="#F2F2F2", linewidth=0)
            _write_row(axes, k + 1.5, row)
        if not rows:
            axes.text(0.5, 5, "No contact planned", ha="center", fontsize=12)
        for n, caution in enumerate(CAUTIONS):
            figure.text(0.03, 0.075 - 0.02 * n, caution, fontsize=8)
    return figure


def _write_row(axes, y: float, texts, **options) -> None:
    for (heading, (x, letters)), text in zip(COLUMNS.items(), texts, strict=True):
        shown = text if len(text) <= letters else text[: letters - 1] + "…"
        side = "right" if heading == "Mbit" else "left"
        axes.text(x, y, shown, va="center", ha=side, fontsize=7.2, **options)
