"""Calendars per RFC 5545, read back by the library's own parser and by eye of the text."""

import contextlib
from datetime import timedelta

import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from icalendar import Calendar
from made_up_contacts import END, EPOCH, START, contact, contacts

from planner.errors import InputError
from planner.export.calendar import contact_calendar

OPTIONS = {"stamp": EPOCH, "span": (START, END)}


def events(data: bytes) -> dict:
    return {str(event["SUMMARY"]) + str(event.start): event for event in Calendar.from_ical(data).walk("VEVENT")}


def only_event(data: bytes):
    [event] = Calendar.from_ical(data).walk("VEVENT")
    return event


def test_an_event_is_the_transmission_with_its_place_and_an_alarm_before_aos():
    event = only_event(contact_calendar(contacts(1), **OPTIONS))
    assert (event.start, event.end) == (START + timedelta(hours=1), START + timedelta(hours=1, seconds=300))
    assert str(event["LOCATION"]) == "Vardholm"
    assert "AOS 2026-12-07T00:58:00.000Z, azimuth 12.3 deg" in str(event["DESCRIPTION"])
    assert "Cautions: Sun within 0.4 deg of the dish axis" in str(event["DESCRIPTION"])
    [alarm] = event.walk("VALARM")
    aos_s, reminder_s = 120, 600
    assert alarm["TRIGGER"].dt == -timedelta(seconds=aos_s + reminder_s)


# RFC 5545, 3.6 and 3.6.1 (from memory): what a calendar and an event must hold; 3.1: lines of 75 octets, ended by CRLF.
def test_what_rfc_5545_asks_for_is_there():
    data = contact_calendar(contacts(1, 2), **OPTIONS)
    calendar = Calendar.from_ical(data)
    assert calendar["VERSION"] == "2.0"
    assert "PRODID" in calendar
    for event in calendar.walk("VEVENT"):
        assert {"UID", "DTSTAMP", "DTSTART"} <= set(event)
    lines = data.split(b"\r\n")
    assert max(map(len, lines)) <= 75
    assert b"\n" not in b"".join(lines)
    starts = [line for line in lines if line.startswith((b"DTSTART", b"DTEND", b"DTSTAMP"))]
    assert all(line.endswith(b"Z") and b"TZID" not in line for line in starts)


def test_fractions_of_a_second_are_rounded_outward():
    row = contact(1, tx_on_utc="2026-12-07T01:00:00.250Z", tx_off_utc="2026-12-07T01:05:00.001Z")
    event = only_event(contact_calendar(pd.DataFrame([row]), **OPTIONS))
    assert (event.start, event.end) == (START + timedelta(hours=1), START + timedelta(hours=1, seconds=301))


def test_the_same_contacts_give_the_same_bytes_and_uids_name_no_host():
    first, second = (contact_calendar(contacts(1, 2), **OPTIONS) for _ in range(2))
    assert first == second
    assert b"@" not in first
    assert len({str(event["UID"]) for event in events(first).values()}) == 2


def test_a_moved_contact_keeps_its_uid_and_raises_its_sequence():
    issued = contact_calendar(contacts(1, 2), **OPTIONS)
    moved = contacts(1, 2)
    moved.loc[0, "tx_on_utc"] = "2026-12-07T01:00:30.000Z"
    again = contact_calendar(moved, previous=(issued,), **OPTIONS)
    uids = [{str(event["UID"]): int(event["SEQUENCE"]) for event in events(data).values()} for data in (issued, again)]
    assert uids[0].keys() == uids[1].keys()
    assert sorted(uids[1].values()) == [0, 1]
    unmoved_again = contact_calendar(moved, previous=(again,), **OPTIONS)
    assert unmoved_again == again


def test_a_contact_no_longer_planned_is_sent_as_cancelled_and_can_come_back():
    issued = contact_calendar(contacts(1, 2), **OPTIONS)
    without = contact_calendar(contacts(2), previous=(issued,), **OPTIONS)
    [gone] = [event for event in events(without).values() if event["STATUS"] == "CANCELLED"]
    assert gone.start == START + timedelta(hours=1)
    assert int(gone["SEQUENCE"]) == 1
    assert not gone.walk("VALARM")
    assert str(gone["SUMMARY"]) == f"cancelled: {only_event(contact_calendar(contacts(1), **OPTIONS))['SUMMARY']}"
    assert contact_calendar(contacts(2), previous=(without,), **OPTIONS) == without
    back = contact_calendar(contacts(1, 2), previous=(without,), **OPTIONS)
    assert sorted((int(event["SEQUENCE"]), str(event["STATUS"])) for event in events(back).values()) == [
        (0, "CONFIRMED"), (2, "CONFIRMED"),
    ]  # fmt: skip


def test_only_what_the_new_plan_covers_can_be_cancelled():
    issued = contact_calendar(contacts(1, 30, 100), **OPTIONS)
    later = (START + timedelta(hours=24), START + timedelta(hours=48))
    again = contact_calendar(contacts()[:0], stamp=EPOCH, span=later, previous=(issued,))
    stati = {event.start - START: str(event["STATUS"]) for event in events(again).values()}
    assert stati == {timedelta(hours=30): "CANCELLED", timedelta(hours=100): "CONFIRMED"}  # the first is flown


def test_a_station_gets_its_own_contacts_and_cancellations_only():
    both = pd.DataFrame([contact(1), contact(2, station="Dry Pan")])
    issued = contact_calendar(both, **OPTIONS)
    dry = contact_calendar(both[:0], station="Dry Pan", previous=(issued,), **OPTIONS)
    event = only_event(dry)
    assert (str(event["LOCATION"]), str(event["STATUS"])) == ("Dry Pan", "CANCELLED")


def test_a_week_without_contacts_says_so():
    event = only_event(contact_calendar(contacts()[:0], **OPTIONS))
    assert str(event["SUMMARY"]) == "No contact planned, all stations"


def test_names_cannot_break_out_of_their_line():
    nasty = contact(1, station="A;B,C:\\D 🛰", satellite="BEGIN:VEVENT")
    event = only_event(contact_calendar(pd.DataFrame([nasty]), **OPTIONS))
    assert str(event["LOCATION"]) == "A;B,C:\\D 🛰"


# RFC 5545, 3.3.11: commas, semicolons and backslashes in text are escaped; RFC 7986, 5.1: NAME is text (from memory).
def test_the_calendars_name_is_escaped_text():
    nasty = contact(1, station="Dry, Pan; \\ 🛰")
    data = contact_calendar(pd.DataFrame([nasty]), station=nasty["station"], **OPTIONS)
    assert "NAME:Downlink contacts\\, Dry\\, Pan\\; \\\\ 🛰\r\n" in data.decode()


def test_figures_are_those_of_the_contacts_file():
    """3.1504 dB stands there as 3.15, 31.8496 deg as 31.850: who rounds those must see no other figure here."""
    row = contact(1, min_margin_db=3.1504, max_elevation_deg=31.8496, los_azimuth_deg=359.97, frequency_mhz=2245.0125)
    text = str(only_event(contact_calendar(pd.DataFrame([row]), **OPTIONS))["DESCRIPTION"])
    assert "Lowest margin 3.15 dB" in text
    assert f"Highest elevation {31.850:.1f} deg" in text
    assert "azimuth 0.0 deg" in text
    assert "2245.0125 MHz" in text


def test_news_of_an_empty_week_is_taken_back_once_there_are_contacts():
    empty = contact_calendar(contacts()[:0], **OPTIONS)
    filled = events(contact_calendar(contacts(1), previous=(empty,), **OPTIONS))
    stati = {str(event["UID"]): str(event["STATUS"]) for event in filled.values()}
    assert stati.pop(str(only_event(empty)["UID"])) == "CANCELLED"
    assert list(stati.values()) == ["CONFIRMED"]


def test_of_two_calendars_issued_before_the_later_state_of_an_event_counts():
    """RFC 5546, 2.1.4 (from memory): a client ignores an event whose SEQUENCE is below the one it has."""
    first = contact_calendar(contacts(1), **OPTIONS)
    cancelled = contact_calendar(contacts(2), previous=(first,), **OPTIONS)
    for issued in ((first, cancelled), (cancelled, first)):
        again = contact_calendar(contacts(1), previous=issued, **OPTIONS)
        assert again == contact_calendar(contacts(1), previous=(cancelled,), **OPTIONS)


@pytest.mark.parametrize(
    "broken", [b"", b"not a calendar", b"BEGIN:VCALENDAR\r\nBEGIN:VEVENT\r\nEND:VCALENDAR\r\n", b"\xff\xfe"]
)
def test_a_previous_calendar_that_is_none_is_told(broken):
    with pytest.raises(
        InputError, match=r"the previous calendar must be iCalendar as this tool writes it \(RFC 5545\)"
    ):
        contact_calendar(contacts(1), previous=(broken,), **OPTIONS)


@pytest.mark.parametrize(
    ("found", "instead"),
    [
        (b"DTSTART:20261207T010000Z", b"DTSTART:20261207T010000"),
        (b"DTSTART:20261207T010000Z", b"DTSTART;VALUE=DATE:20261207"),
        (b"SEQUENCE:0", b"SEQUENCE:many"),
        (b"SEQUENCE:0", b"SEQUENCE:-1"),
        (b"STATUS:CONFIRMED", b"STATUS:PERHAPS"),
    ],
)
def test_events_that_are_not_ours_are_told(found, instead):
    issued = contact_calendar(contacts(1), **OPTIONS)
    assert found in issued
    with pytest.raises(InputError, match="the previous calendar must be iCalendar as this tool writes it"):
        contact_calendar(contacts(1), previous=(issued.replace(found, instead),), **OPTIONS)


def test_two_sessions_of_one_mode_on_one_pass_have_two_uids():
    twice = pd.DataFrame([contact(1), contact(1, tx_on_utc="2026-12-07T01:02:00.000Z")])
    assert len({str(event["UID"]) for event in events(contact_calendar(twice, **OPTIONS)).values()}) == 2


@settings(max_examples=300, deadline=None)
@given(st.integers(0, 900), st.integers(0, 40), st.binary(max_size=20))
def test_a_mutated_calendar_is_read_or_told(at, cut, put):
    issued = contact_calendar(contacts(1, 2), **OPTIONS)
    mutated = issued[:at] + put + issued[at + cut :]
    with contextlib.suppress(InputError):
        assert Calendar.from_ical(contact_calendar(contacts(1), previous=(mutated,), **OPTIONS))
