"""The week sheet: the week's picture and the list of its contacts, as PDF and as HTML."""

import base64
from collections.abc import Container, Iterator
from datetime import UTC
from typing import Any

import pandas as pd
from matplotlib.figure import Figure

from planner.charts import style
from planner.charts.week import finding, week_figure
from planner.export.contacts import as_written, azimuth_text, clock_text, schedule_issue, utc_text
from planner.export.fold import fold, shortened
from planner.export.html import escape, items_html, noted_table_html, page
from planner.export.render import pdf_bytes, png_bytes
from planner.mission.models import Mission

COLUMNS = {  # heading: (place across the table, letters that fit)
    "day": (0.0, 11), "warm-up": (0.076, 9), "AOS": (0.137, 9), "on": (0.195, 9), "off": (0.253, 9), "LOS": (0.311, 9),
    "az. AOS": (0.417, 7), "az. LOS": (0.469, 7), "max el.": (0.519, 7), "satellite": (0.530, 15),
    "station": (0.640, 18), "mode": (0.764, 15), "margin": (0.923, 9), "Mbit": (0.991, 9),
}  # fmt: skip
EVENTS = ("power_on", "aos", "tx_on", "tx_off", "los")  # whose times are told, in the order of their columns
TO_THE_RIGHT = ("az. AOS", "az. LOS", "max el.", "margin", "Mbit")
TEXT_PT = 9.0
LINES_A_PAGE, NOTE_LETTERS = 34, 145
TOO_OLD = "take newer elements before this pass: the present ones no longer point this dish by then"
CAUTIONS = (
    "Planning aid: the flight rules, the licences of transmitter and stations, and licensed practice come first.",
    "Check power flux-density against the current Radio Regulations and your licence.",
    "Antennas move by remote control: nobody at or in front of them; keep to each station's exposure limits.",
)


def sheet_files(
    mission: Mission, plan, issue: str | None = None, outdated: Container[str] = frozenset()
) -> dict[str, bytes]:
    """`week_sheet.pdf` and `week_sheet.html` of a plan (its four tables and its summary).

    Parameters
    ----------
    issue : which schedule it is, the contacts' own `schedule_issue` when None
    outdated : ids of contacts whose dish needs newer elements by then, which is said beside each
    """
    return {
        "week_sheet.pdf": pdf_bytes(sheet_pages(mission, plan, issue, outdated), mission.name),
        "week_sheet.html": sheet_html(mission, plan, issue, outdated).encode(),
    }


def sheet_pages(
    mission: Mission, plan, issue: str | None = None, outdated: Container[str] = frozenset()
) -> Iterator[Figure]:
    """A4 landscape: the week's picture, then as many pages of contacts as it takes."""
    yield week_figure(mission, plan)
    pages = _paginated(sheet_rows(plan.contacts, outdated))
    under = _provenance(mission, issue or schedule_issue(plan.contacts))
    for number, rows in enumerate(pages, 1):
        yield _list_page(mission, rows, under, f"{number} of {len(pages)}")


def sheet_html(mission: Mission, plan, issue: str | None = None, outdated: Container[str] = frozenset()) -> str:
    """The same as one page for a browser."""
    picture = base64.b64encode(png_bytes(week_figure(mission, plan), dpi=110)).decode()
    under = _provenance(mission, issue or schedule_issue(plan.contacts))
    body = [
        f"<h1>{escape(mission.name)}</h1>",
        f'<p class="under">{escape(finding(mission, plan))}. {escape(under)}</p>',
        f'<img class="week" src="data:image/png;base64,{picture}" alt="{escape(finding(mission, plan))}">',
        '<h2 class="list">Contacts</h2>' + noted_table_html(list(COLUMNS), sheet_rows(plan.contacts, outdated)),
        f'<div class="caution"><h2>Cautions</h2><ul>{items_html(CAUTIONS)}</ul></div>',
    ]
    return page(mission.name, "\n".join(body), landscape=True)


def sheet_rows(contacts: pd.DataFrame, outdated: Container[str] = frozenset()) -> list[tuple[str, ...]]:
    """A row of texts under `COLUMNS` for every contact, in the table's order, its cautions behind them."""
    return [_row(contact, contact.contact_id in outdated) for contact in as_written(contacts).itertuples()]


def _row(contact: Any, outdated: bool) -> tuple[str, ...]:
    events = utc_text([getattr(contact, f"{event}_utc") for event in EVENTS]).tolist()
    cautions = [] if pd.isna(contact.cautions) or not contact.cautions else [str(contact.cautions)]
    azimuths = (contact.aos_azimuth_deg, contact.los_azimuth_deg)
    return (
        f"{pd.Timestamp(contact.tx_on_utc).round('s'):%a %d %b}", *map(clock_text, events),
        *(f"{azimuth_text(azimuth, 0)}°" for azimuth in azimuths), f"{contact.max_elevation_deg:.0f}°",
        contact.satellite, contact.station, contact.mode, f"{contact.min_margin_db:.2f} dB",
        f"{contact.volume_mbit:,.0f}", "; ".join([*cautions, *([TOO_OLD] if outdated else [])]),
    )  # fmt: skip


def _provenance(mission: Mission, issue: str) -> str:
    """Which schedule the sheet shows, and the elements under it."""
    epochs = sorted({satellite.elements.epoch.astimezone(UTC) for satellite in mission.satellites})
    span = " to ".join(f"{epoch:%Y-%m-%d %H:%M:%S}" for epoch in dict.fromkeys((epochs[0], epochs[-1])))
    return f"Schedule issue {issue}. Element epoch {span}. All times UTC."


def _lines(row: tuple[str, ...]) -> list[list[str]]:
    """The lines that a row takes on paper: a text for each column, and cautions as lines of one text."""
    cells = [fold(text, letters) for text, (_, letters) in zip(row, COLUMNS.values(), strict=False)]
    count = max(map(len, cells))
    table = [[cell[n] if n < len(cell) else "" for cell in cells] for n in range(count)]
    cautions = row[len(COLUMNS)]
    return table + [[line] for line in (fold(f"! {cautions}", NOTE_LETTERS, "   ") if cautions else [])]


def _paginated(rows: list[tuple[str, ...]]) -> list[list[list[list[str]]]]:
    """Rows, as their lines, page by page; a row stays whole where a page holds it."""
    pages: list[list[list[list[str]]]] = [[]]
    for row in rows:
        lines = _lines(row)[:LINES_A_PAGE]
        if pages[-1] and sum(map(len, pages[-1])) + len(lines) > LINES_A_PAGE:
            pages.append([])
        pages[-1].append(lines)
    return pages


def _list_page(mission: Mission, rows: list[list[list[str]]], under: str, number: str) -> Figure:
    with style.on_paper():
        figure = style.new_figure(style.A4_LANDSCAPE_IN)
        figure.set_layout_engine(None)
        axes = figure.add_axes((0.03, 0.105, 0.94, 0.795))
        axes.set_axis_off()
        axes.set_xlim(0, 1)
        axes.set_ylim(LINES_A_PAGE + 1, 0)
        figure.text(0.03, 0.95, shortened(f"{mission.name}: contacts", 90), fontsize=13, fontweight="bold")
        figure.text(0.97, 0.95, number, ha="right", fontsize=TEXT_PT)
        figure.text(0.03, 0.918, shortened(under, 150), fontsize=TEXT_PT)
        _write_line(axes, 0.5, list(COLUMNS), fontweight="bold")
        y = 1.0
        for k, lines in enumerate(rows):
            if k % 2 == 0:
                axes.axhspan(y, y + len(lines), color="#EEEEEE", linewidth=0)
            for n, line in enumerate(lines):
                _write_line(axes, y + n + 0.5, line)
            y += len(lines)
        if not rows:
            axes.text(0.5, 5, "No contact planned", ha="center", fontsize=12)
        for n, caution in enumerate(CAUTIONS):
            figure.text(0.03, 0.075 - 0.022 * n, caution, fontsize=TEXT_PT)
    return figure


def _write_line(axes, y: float, texts: list[str], **options) -> None:
    """A text for each column, or one across from the second."""
    if len(texts) == 1:
        axes.text(COLUMNS["warm-up"][0], y, texts[0], va="center", fontsize=TEXT_PT, **options)
        return
    for (heading, (x, _)), text in zip(COLUMNS.items(), texts, strict=True):
        side = "right" if heading in TO_THE_RIGHT else "left"
        axes.text(x, y, text, va="center", ha=side, fontsize=TEXT_PT, **options)
