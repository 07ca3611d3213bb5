"""The week sheet lists every contact, on paper and in a browser."""

import hashlib
from datetime import timedelta
from itertools import pairwise

import pandas as pd
from made_up_contacts import contact, contacts

from planner.export.cards import make_card, outdated_contacts
from planner.export.contacts import contacts_csv
from planner.export.sheet import COLUMNS, LINES_A_PAGE, TOO_OLD, sheet_files, sheet_html, sheet_pages, sheet_rows


def test_a_row_tells_day_times_directions_and_figures():
    [row] = sheet_rows(contacts(1))
    assert row == (
        "Mon 07 Dec", "00:59:00", "00:58:00", "01:00:00", "01:05:00", "01:06:40", "12°", "190°", "62°", "MARSHLIGHT-1",
        "Vardholm", "K high rate", "3.21 dB", "14,000", "Sun within 0.4 deg of the dish axis",
    )  # fmt: skip


def test_pages_are_the_picture_and_as_many_lists_as_it_takes(mission, plan):
    _, *lists = sheet_pages(mission, plan)
    lines_of_a_contact = 2  # its row, and its caution under it
    assert len(lists) == -(-40 // (LINES_A_PAGE // lines_of_a_contact))
    cautions = [text.get_text() for figure in lists for text in figure.axes[0].texts if "Sun within" in text.get_text()]
    assert cautions == ["! Sun within 0.4 deg of the dish axis"] * 40
    plan.contacts = plan.contacts[:0]
    _, listing = sheet_pages(mission, plan)
    assert "No contact planned" in [text.get_text() for text in listing.axes[0].texts]


def test_clocks_are_rounded_as_on_the_cards_and_the_circle_closes():
    [row] = sheet_rows(
        pd.DataFrame(
            [contact(1, los_utc="2026-12-07T23:59:59.665Z", aos_azimuth_deg=359.7, los_azimuth_deg=0.4)],
        )
    )
    shown = dict(zip(COLUMNS, row, strict=False))
    assert (shown["LOS"], shown["az. AOS"], shown["az. LOS"]) == ("00:00:00", "0°", "0°")


def test_long_names_and_cautions_are_cut_into_lines_and_never_off(mission, plan):
    name, caution = "Station " + "of the northern coast " * 3, "flux 2.3 dB above the limit, and much more " * 9
    plan.contacts = pd.DataFrame([contact(1, station=name.strip(), cautions=caution.strip())])
    _, figure = sheet_pages(mission, plan)
    texts = " ".join(text.get_text() for text in figure.axes[0].texts)
    assert "…" not in texts
    assert texts.count("northern") == 3
    assert texts.count("much more") == 9


def test_everything_written_stays_on_the_page(mission, plan):
    wide = {"station": "Ж" * 60, "mode": "W" * 40, "satellite": "M" * 70, "cautions": "Wide words " * 60}
    plan.contacts = pd.DataFrame([contact(1, volume_mbit=9_999_999.0, **wide)])
    for figure in list(sheet_pages(mission, plan))[1:]:
        texts = [*figure.texts, *figure.axes[0].texts]
        boxes = [text.get_window_extent() for text in texts]
        assert min(box.x0 for box in boxes) >= 0
        assert min(box.y0 for box in boxes) >= 0
        assert max(box.x1 for box in boxes) <= figure.bbox.x1
        assert max(box.y1 for box in boxes) <= figure.bbox.y1


def test_a_contact_whose_dish_needs_newer_elements_is_flagged(mission, plan):
    old = contact(2)["contact_id"]
    rows = sheet_rows(contacts(1, 2), {old})
    assert [row[-1].split("; ")[-1] == TOO_OLD for row in rows] == [False, True]
    [bare] = sheet_rows(pd.DataFrame([contact(2, cautions="")]), {old})
    assert bare[-1] == TOO_OLD
    files = sheet_files(mission, plan, outdated={old})
    assert files["week_sheet.html"].decode().count(TOO_OLD) == 1
    texts = [
        text.get_text() for figure in list(sheet_pages(mission, plan, None, {old}))[1:] for text in figure.axes[0].texts
    ]
    assert [text for text in texts if TOO_OLD in text] == [f"! Sun within 0.4 deg of the dish axis; {TOO_OLD}"]


def test_the_sheet_flags_the_contacts_that_the_cards_flag(mission, sky, session):
    """One and the same session, with elements of the day before and with those of four days before."""
    row = contact(
        pass_id=session.pass_id, station=session.station, tx_on_utc=sky.clock.iso(session.tx_on_s),
        tx_off_utc=sky.clock.iso(session.tx_off_s), power_on_utc=sky.clock.iso(session.tx_on_s - 60),
    )  # fmt: skip
    table, satellite = pd.DataFrame([row]), mission.satellites[0]
    flagged = []
    for age_days in (0, 4):
        epoch = satellite.elements.epoch - timedelta(days=age_days)
        elements = satellite.elements.model_copy(update={"epoch": epoch})
        aged = mission.model_copy(update={"satellites": (satellite.model_copy(update={"elements": elements}),)})
        card = make_card(aged, sky, next(table.itertuples()))
        on_card = any(caution.startswith("Take newer elements") for caution in card.cautions)
        assert outdated_contacts(aged, sky, table) == ({row["contact_id"]} if on_card else set())
        flagged.append(on_card)
    assert flagged == [False, True]


def test_a_caution_has_a_line_of_its_own_across_the_sheet(mission, plan):
    caution = (
        "flux 2.3 dB above the RR 21-4 limit (check the current Radio Regulations and your licence); carries up 14"
    )
    plan.contacts = pd.DataFrame([contact(1, cautions=f"{caution}; Sun within 0.4 deg of the axis")])
    assert f'<td colspan="{len(COLUMNS) - 1}">! {caution}' in sheet_html(mission, plan)
    _, listing = sheet_pages(mission, plan)
    assert f"! {caution}; Sun within 0.4 deg of the axis" in [text.get_text() for text in listing.axes[0].texts]


def test_columns_of_the_sheet_stand_apart(mission, plan):
    _, listing, *_ = sheet_pages(mission, plan)
    texts = [text for text in listing.axes[0].texts if not text.get_text().startswith("!")]
    rows = [texts[n : n + len(COLUMNS)] for n in range(0, len(texts), len(COLUMNS))]
    for row in rows:
        boxes = [text.get_window_extent() for text in row]
        assert all(left.x1 < right.x0 for left, right in pairwise(boxes))


def test_the_sheet_says_which_schedule_it_is(mission, plan):
    """As `sha256sum contacts.csv` prints it, so that anyone can compare."""
    digest = hashlib.sha256(contacts_csv(plan.contacts)).hexdigest()
    html = sheet_html(mission, plan)
    assert f"Schedule issue {digest[:8]}. Element epoch 2026-12-06 18:00:00. All times UTC." in html
    _, listing, *_ = sheet_pages(mission, plan)
    assert any(digest[:8] in text.get_text() for text in listing.texts)


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
