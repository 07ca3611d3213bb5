"""Cards: the figures on them against the contact and the sky, one A4 page each, hostile names escaped."""

import re
import subprocess
from datetime import datetime, timedelta

import numpy as np
import pandas as pd
import pytest
from browser import require_chromium
from made_up_contacts import contact

from planner.errors import InputError
from planner.export.card_page import FOOT, card_figure
from planner.export.cards import PICTURE_IN, card_files, make_card
from planner.export.commands import carried_by
from planner.export.contacts import schedule_issue
from planner.export.html import card_html

# MediaBox of ISO 216 A4 in points: 210 x 297 mm.
A4_POINTS = (595, 842)


@pytest.fixture(scope="module")
def row(sky, session):
    k = int(np.flatnonzero(sky.passes.pass_id == session.pass_id)[0])
    iso = sky.clock.iso
    return contact(
        pass_id=session.pass_id,
        station=session.station,
        aos_utc=iso(sky.passes.aos_s[k]),
        power_on_utc=iso(session.tx_on_s - 60),
        tx_on_utc=iso(session.tx_on_s),
        tx_off_utc=iso(session.tx_off_s),
        los_utc=iso(sky.passes.los_s[k]),
        modcods=f"QPSK_3/4@{iso(session.tx_on_s)} 8PSK_3/4@{iso(session.tx_on_s + 60)}",
    )


def card_of(mission, sky, row, **changes):
    return make_card(mission, sky, next(pd.DataFrame([row | changes]).itertuples()))


def test_a_card_tells_times_directions_and_radio(mission, sky, session, row):
    card = card_of(mission, sky, row)
    times, radio = {label: figures for label, *figures in card.times}, dict(card.radio)
    assert card.title == f"MARSHLIGHT-1 over {session.station}"
    assert times["Transmitter on"][0] == sky.clock.iso(session.tx_on_s)[11:19]
    assert [time for _, time, *_ in card.times] == sorted(time for _, time, *_ in card.times)
    assert times["AOS, rises"][1] == f"{row['aos_azimuth_deg']:.1f}°"  # as the contact states it
    assert times["TCA, highest"][2] == f"{row['max_elevation_deg']:.1f}°"
    assert radio["Expected margin"] == "3.21 dB or more at 99 % availability"
    assert radio["Frequency sent"] == "26250 MHz"
    assert re.fullmatch(r"\+\d+\.\d to -\d+\.\d kHz while on air, received less sent", radio["Doppler"])
    assert radio["MODCOD from"].replace("\u00a0", " ").startswith("QPSK 3/4 ")


def test_a_card_says_what_to_do_without_lock_and_warns(mission, sky, session, row):
    card = card_of(mission, sky, row)
    acquisition_s = mission.satellites[0].spacecraft.mode("K high rate").acquisition_s
    wait_s = int(re.match(r"No lock (\d+) s after", card.search_after)[1])
    assert acquisition_s < wait_s < acquisition_s + 10  # a day-old set is late by a second or so
    assert any(re.search(r"search along the track, \d\.\d s either way \(two sigma\)", step) for step in card.steps)
    assert card.cautions[0] == "Sun within 0.4 deg of the dish axis"
    assert any("licence" in caution for caution in card.cautions)
    assert any("nobody at or in front of it" in caution for caution in card.cautions)
    assert dict(card.radio)["Element epoch"].startswith("2026-12-06 18:00:00; they point this dish until ")


def test_without_lock_the_modcod_is_the_one_on_air_by_then(mission, sky, session, row):
    on = datetime.fromisoformat(row["tx_on_utc"])
    for change_s, expected in ((2.0, "8PSK 3/4"), (60.0, "QPSK 3/4")):
        later = (on + timedelta(seconds=change_s)).isoformat()
        card = card_of(mission, sky, row, modcods=f"QPSK_3/4@{on.isoformat()} 8PSK_3/4@{later}")
        assert card.steps[0].replace("\u00a0", " ").endswith(f" Mbaud, {expected}.")


def test_files_are_one_a4_page_and_the_same_bytes_each_time(mission, sky, row):
    frame = pd.DataFrame([row])
    first, second = (dict(card_files(mission, sky, frame)) for _ in range(2))
    assert first == second
    (pdf_name, pdf), (html_name, html) = first.items()
    assert pdf_name.removesuffix(".pdf") == html_name.removesuffix(".html")
    [box] = re.findall(rb"/MediaBox \[ 0 0 ([\d.]+) ([\d.]+) \]", pdf)
    assert tuple(round(float(points)) for points in box) == pytest.approx(A4_POINTS, abs=1)
    assert "size: A4;" in html.decode()


def printed_pages(page: bytes, folder) -> list[bytes]:
    """The media box of every page that a browser makes of it."""
    (folder / "card.html").write_bytes(page)
    browser = [require_chromium(), "--headless", "--no-sandbox", "--disable-gpu", "--no-pdf-header-footer"]
    printed = folder / "card.pdf"
    subprocess.run(
        [*browser, f"--print-to-pdf={printed}", (folder / "card.html").as_uri()], check=True, capture_output=True
    )
    pages = re.findall(rb"/Type\s*/Page\b", printed.read_bytes())
    boxes = re.findall(rb"/MediaBox\s*\[0 0 ([\d.]+) ([\d.]+)\]", printed.read_bytes())
    assert tuple(round(float(points)) for points in boxes[0]) == pytest.approx(A4_POINTS, abs=1)
    return pages


def test_a_card_with_many_modcods_and_cautions_prints_from_a_browser_on_one_a4_page(mission, sky, row, tmp_path):
    on = datetime.fromisoformat(row["tx_on_utc"])
    coding = " ".join(f"16APSK_8/9@{(on + timedelta(seconds=20 * k)).isoformat()}" for k in range(9))
    frame = pd.DataFrame(
        [row | {"modcods": coding, "cautions": "; ".join(["flux 2.3 dB above the RR 21-4 limit"] * 3)}]
    )
    assert len(printed_pages(dict(card_files(mission, sky, frame)).popitem()[1], tmp_path)) == 1


def uploading(row, count: int) -> pd.DataFrame:
    """The contact of `row`, which carries up the commands of so many others."""
    served = [contact(10 + n, commands_from=row["contact_id"]) for n in range(count)]
    return pd.DataFrame([row | {"commands_from": ""}, *served])


def upload_card(mission, sky, row, count: int):
    table = uploading(row, count)
    first = next(table.itertuples())
    return make_card(mission, sky, first, carried=carried_by(table, first))


def test_an_upload_contact_says_whose_commands_to_send(mission, sky, row):
    card = upload_card(mission, sky, row, 2)
    rows = [
        ("Commands to send", "marshlight-1.vardholm.0010.k-high-rate 07 Dec 10:00:00 to 10:05:00"),
        ("", "marshlight-1.vardholm.0011.k-high-rate 07 Dec 11:00:00 to 11:05:00"),
    ]
    html = card_html(card, "")
    written = [text.get_text() for text in card_figure(card, mission, sky).texts]
    for label, text in rows:
        assert f"<th>{label}</th><td>{text}</td>" in html
        assert {label, text} - {""} <= set(written)
    served = uploading(row, 2).iloc[1:]
    assert not any(carried_by(uploading(row, 2), other) for other in served.itertuples())
    assert "Commands to send" not in card_html(card_of(mission, sky, row), "")


@pytest.mark.parametrize("count", [9, 14, 60])
def test_as_many_commands_are_named_as_an_a4_page_holds(mission, sky, row, count, tmp_path):
    card = upload_card(mission, sky, row | {"cautions": "flux 2.3 dB above the RR 21-4 limit"}, count)
    html, figure = card_html(card, ""), card_figure(card, mission, sky)
    written = [text for text in figure.texts if text.get_position()[1] > FOOT]
    for shown in (html, "\n".join(text.get_text() for text in written)):
        named = len(re.findall(r"high-rate \d\d Dec", shown))
        more = re.search(r"and (\d+) more: contacts\.csv, commands_from", shown)
        assert named + (int(more[1]) if more else 0) == count
        assert named >= min(count, 5)
    assert min(text.get_fontsize() for text in written) > 7  # points, as in small print
    frame = uploading(row | {"cautions": "flux 2.3 dB above the RR 21-4 limit"}, count)
    _, page = next(pair for pair in card_files(mission, sky, frame.iloc[:1]) if pair[0].endswith("html"))
    picture = re.search(rb"base64,([^\"]*)", page)[1].decode()
    assert len(printed_pages(card_html(card, picture).encode(), tmp_path)) == 1


def test_the_sky_is_printed_as_large_as_it_is_drawn(mission, sky, row):
    """So that its letters are those of the page."""
    html = dict(card_files(mission, sky, pd.DataFrame([row]))).popitem()[1].decode()
    assert f"flex-basis: {PICTURE_IN[0]}in" in html


def test_which_schedule_a_card_is_from_stands_on_it(mission, sky, row):
    frame = pd.DataFrame([row])
    for issue, shown in ((None, schedule_issue(frame)), ("0a1b2c3d", "0a1b2c3d")):
        html = dict(card_files(mission, sky, frame, issue)).popitem()[1].decode()
        assert f"Pass {row['pass_id']}, schedule issue {shown}" in html


def test_clocks_of_modcods_are_rounded_like_all_others(mission, sky, row):
    card = card_of(mission, sky, row, modcods="8PSK_3/4@2026-12-07T05:41:35.977Z")
    assert dict(card.radio)["MODCOD from"].replace("\u00a0", " ") == "8PSK 3/4 05:41:36"


def test_a_card_says_where_its_commands_go_up(mission, sky, row):
    carriers = [
        dict(card_of(mission, sky, row, commands_from=text).radio)["Its own commands"] for text in ("a.b.s", "")
    ]
    assert carriers == ["go up in contact a.b.s", "aboard at the start of the span"]
    assert "Its own commands" not in dict(card_of(mission, sky, row).radio)


def test_html_escapes_every_text(mission, sky, row):
    hostile = '<script>alert("1")</script>'
    frame = pd.DataFrame([row | {"cautions": hostile, "polarisation": hostile, "modcods": hostile}])
    html = dict(card_files(mission, sky, frame)).popitem()[1].decode()
    assert "<script" not in html
    assert html.count("&lt;script&gt;") == 3


def test_a_card_with_much_to_say_still_fits_its_page(mission, sky, row):
    many = "; ".join(f"caution number {n} with a good many words in it, as long as a line or two" for n in range(25))
    figure = card_figure(card_of(mission, sky, row, cautions=many), mission, sky)
    written = [text.get_position()[1] for text in figure.texts if text.get_text().startswith("! ")]
    assert len(written) == 27
    assert min(written) > FOOT


def test_elements_too_old_by_then_are_a_caution(mission, sky, row, session):
    satellite = mission.satellites[0]
    elements = satellite.elements.model_copy(update={"epoch": satellite.elements.epoch - timedelta(days=4)})
    aged = mission.model_copy(update={"satellites": (satellite.model_copy(update={"elements": elements}),)})
    assert not any("newer elements" in caution for caution in card_of(mission, sky, row).cautions)
    assert card_of(aged, sky, row).cautions[1].startswith("Take newer elements before this pass")


def test_nan_cautions_are_no_caution(mission, sky, row):
    assert len(card_of(mission, sky, row, cautions=float("nan")).cautions) == 2


def test_a_contact_on_no_pass_is_told(mission, sky, row):
    with pytest.raises(InputError, match="nowhere: must be a pass in the span of the mission"):
        card_of(mission, sky, row, pass_id="nowhere")
