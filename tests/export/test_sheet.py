"""The week sheet lists every contact, on paper and in a browser."""

import pandas as pd
from made_up_contacts import contact, contacts

from planner.export.sheet import ROWS_A_PAGE, sheet_files, sheet_html, sheet_pages, sheet_rows


def test_a_row_tells_day_times_directions_and_figures():
    [row] = sheet_rows(contacts(1))
    assert row == (
        "Mon 07 Dec", "00:58:00", "01:00:00", "01:05:00", "01:06:40", "12°", "190°", "62°", "Vardholm", "K high rate",
        "3.2 dB", "14,000", "Sun within 0.4 deg of the dish axis",
    )  # fmt: skip


def test_pages_are_the_picture_and_as_many_lists_as_it_takes(mission, plan):
    assert len(list(sheet_pages(mission, plan))) == 1 + -(-40 // ROWS_A_PAGE)
    plan.contacts = plan.contacts[:0]
    _, listing = sheet_pages(mission, plan)
    assert "No contact planned" in [text.get_text() for text in listing.axes[0].texts]


def test_files_are_the_same_bytes_each_time(mission, plan):
    first = sheet_files(mission, plan)
    assert first == sheet_files(mission, plan)
    assert list(first) == ["week_sheet.pdf", "week_sheet.html"]


def test_html_lists_all_and_escapes(mission, plan):
    plan.contacts = pd.DataFrame([contact(1, station="<b>&"), contact(2)])
    html = sheet_html(mission, plan)
    assert "<b>" not in html
    assert "&lt;b&gt;&amp;" in html
    assert html.count("<tr>") == 3
