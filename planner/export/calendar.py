"""Contacts as iCalendar (RFC 5545), for all stations or for one.

A contact keeps its UID through every re-plan: it comes from pass and mode. Given the calendar issued before, a contact
whose times or place changed gets a higher SEQUENCE, one that is no longer planned is sent as CANCELLED, one that is
already flown is left out, and one beyond the planned span stays as it was. No clock is read: DTSTAMP is the newest
element epoch, the state of knowledge that the times were computed from, so the same inputs give the same bytes.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from functools import partial
from uuid import UUID, uuid5

import pandas as pd

from planner.errors import InputError
from planner.export.contacts import as_written, azimuth_text, file_name, plain_number
from planner.mission.models import Mission

PRODUCT = "-//downlink-planner//contacts//EN"
NAMES_CONTACTS = UUID("5f2f2a0e-7a55-4d0b-9a43-6d2c3f1b8e11")  # drawn once; makes the UIDs ours
ALARM_BEFORE_AOS_S = 600.0
SIGNIFICANT = ("start", "end", "location", "summary", "status")  # a change in these raises SEQUENCE
CONFIRMED, CANCELLED = "CONFIRMED", "CANCELLED"
CALLED_OFF = "cancelled: "  # before the title, for readers that show a cancelled event like any other
HIGHEST_SEQUENCE = 1_000_000


@dataclass(frozen=True)
class Entry:
    """An event of the calendar; `alarm` is how long before `start` to remind and in what words (None: never)."""

    uid: str
    stamp: datetime
    start: datetime
    end: datetime
    summary: str
    location: str
    description: str
    status: str = CONFIRMED
    sequence: int = 0
    alarm: tuple[timedelta, str] | None = None


def calendar_files(mission: Mission, contacts: pd.DataFrame, previous: Sequence[bytes] = ()) -> dict[str, bytes]:
    """`week.ics`, and `station_<name>.ics` for every station of the mission; see `contact_calendar`."""
    stamp, span = newest_epoch(mission), (mission.start, mission.end)
    issue = partial(contact_calendar, contacts, stamp=stamp, span=span, previous=previous)
    by_station = {f"{file_name('station', one.name)}.ics": issue(station=one.name) for one in mission.stations}
    return {"week.ics": issue(), **by_station}


def newest_epoch(mission: Mission) -> datetime:
    """The epoch of the newest element set in use."""
    return max(satellite.elements.epoch for satellite in mission.satellites)


def contact_calendar(
    contacts: pd.DataFrame,
    *,
    stamp: datetime,
    span: tuple[datetime, datetime],
    previous: Sequence[bytes] = (),
    station: str | None = None,
    alarm_before_aos_s: float = ALARM_BEFORE_AOS_S,
) -> bytes:
    """The contacts as one calendar, an event from `tx_on` to `tx_off` (outward to whole seconds) each.

    Parameters
    ----------
    contacts : DataFrame with the columns of contacts.csv
    stamp : DTSTAMP of what is issued now
    span : (begin, end) that the plan covers; only contacts in it can be cancelled
    previous : the calendars issued before, of all stations or of this one; of an event in several the highest SEQUENCE
    station : only its contacts; all when None
    alarm_before_aos_s : [s] how long before AOS to remind

    Raises
    ------
    InputError : one of `previous` is not a calendar
    """
    shown = as_written(contacts)
    wanted = shown if station is None else shown[shown["station"] == station]
    before = _issued(previous, station)
    entries: dict[str, Entry] = {}
    for row in wanted.itertuples():
        uid = _uid(row, entries)
        entries[uid] = _follow(_entry(row, uid, stamp, alarm_before_aos_s), before.get(uid))
    for uid, entry in before.items():
        if uid not in entries and entry.end > span[0]:
            stands = entry.start >= span[1] or entry.status == CANCELLED
            entries[uid] = entry if stands else _cancelled(entry, stamp)
    nothing = _nothing_planned(span, stamp, station)
    if previous and entries and not before:
        entries[nothing.uid] = _cancelled(nothing, stamp)  # what the issue before said
    return _calendar(entries.values() or [nothing], station)


def _uid(row, taken) -> str:
    ordinal = 0
    while (uid := str(uuid5(NAMES_CONTACTS, f"{row.pass_id}|{row.mode}|{ordinal}"))) in taken:
        ordinal += 1  # a second session of one mode on one pass
    return uid


def _entry(row, uid: str, stamp: datetime, alarm_before_aos_s: float) -> Entry:
    on, off, aos = (_utc(getattr(row, f"{name}_utc")) for name in ("tx_on", "tx_off", "aos"))
    start = _whole_second(on)
    end = off if off.microsecond == 0 else _whole_second(off) + timedelta(seconds=1)
    before = start - _whole_second(aos) + timedelta(seconds=alarm_before_aos_s)
    return Entry(
        uid=uid,
        stamp=stamp,
        start=start,
        end=end,
        summary=f"{row.satellite}: {row.mode}, {row.station}",
        location=row.station,
        description=_description(row),
        alarm=(before, f"{row.satellite} rises at {row.station} at {row.aos_utc}"),
    )


def _description(row) -> str:
    lines = [
        f"Contact {row.contact_id} (pass {row.pass_id})",
        f"AOS {row.aos_utc}, azimuth {azimuth_text(row.aos_azimuth_deg, 1)} deg",
        f"Transmitter on {row.tx_on_utc}, off {row.tx_off_utc}",
        f"LOS {row.los_utc}, azimuth {azimuth_text(row.los_azimuth_deg, 1)} deg",
        f"Highest elevation {row.max_elevation_deg:.1f} deg",
        f"{row.mode}: {plain_number(row.frequency_mhz)} MHz, {plain_number(row.symbol_rate_mbaud)} Mbaud,"
        f" {row.polarisation}",
        f"Lowest margin {row.min_margin_db:.2f} dB, {row.volume_mbit:.0f} Mbit",
    ]
    cautions = "" if pd.isna(row.cautions) else str(row.cautions)
    return "\n".join([*lines, *([f"Cautions: {cautions}"] if cautions else [])])


def _follow(entry: Entry, before: Entry | None) -> Entry:
    """The entry with the sequence number that comes after `before`."""
    if before is None:
        return entry
    same = all(getattr(entry, key) == getattr(before, key) for key in SIGNIFICANT)
    return replace(entry, sequence=before.sequence + (not same))


def _cancelled(entry: Entry, stamp: datetime) -> Entry:
    return replace(entry, status=CANCELLED, sequence=entry.sequence + 1, stamp=stamp, alarm=None)


def _nothing_planned(span, stamp: datetime, station: str | None) -> Entry:
    """RFC 5545 asks for one component at least, and an empty week is news too."""
    return Entry(
        uid=str(uuid5(NAMES_CONTACTS, f"nothing planned|{station}|{span[0].isoformat()}")),
        stamp=stamp,
        start=_whole_second(span[0]),
        end=_whole_second(span[1]),
        summary=f"No contact planned, {station or 'all stations'}",
        location="",
        description="",
    )


def _calendar(entries, station: str | None) -> bytes:
    from icalendar import Calendar, vText

    calendar = Calendar()
    calendar.add("PRODID", PRODUCT)
    calendar.add("VERSION", "2.0")
    # RFC 7986; its text is escaped like any other, which the library does for names that it knows
    calendar.add("NAME", vText(f"Downlink contacts, {station or 'all stations'}"))
    for entry in sorted(entries, key=lambda entry: (entry.start, entry.uid)):
        calendar.add_component(_component(entry))
    return calendar.to_ical()


def _component(entry: Entry):
    from icalendar import Alarm, Event

    event = Event()
    for key, value in (
        ("UID", entry.uid), ("DTSTAMP", _whole_second(entry.stamp)), ("DTSTART", entry.start), ("DTEND", entry.end),
        ("SUMMARY", CALLED_OFF * (entry.status == CANCELLED) + entry.summary), ("LOCATION", entry.location),
        ("DESCRIPTION", entry.description), ("STATUS", entry.status), ("SEQUENCE", entry.sequence),
        ("TRANSP", "OPAQUE" if entry.location else "TRANSPARENT"),
    ):  # fmt: skip
        if value != "":
            event.add(key, value)
    if entry.alarm:
        before, words = entry.alarm
        alarm = Alarm()
        alarm.add("ACTION", "DISPLAY")
        alarm.add("DESCRIPTION", words)
        alarm.add("TRIGGER", -before)
        event.add_component(alarm)
    return event


def _issued(previous: Sequence[bytes], station: str | None) -> dict[str, Entry]:
    """Contacts of earlier calendars by UID, of one station when asked for."""
    from icalendar import Calendar

    try:
        events = [event for one in previous for event in Calendar.from_ical(one).walk("VEVENT") if "LOCATION" in event]
        entries = sorted((_read_back(event) for event in events), key=lambda entry: entry.sequence)
    except (ValueError, KeyError, IndexError, TypeError, AttributeError, OverflowError) as fault:
        raise InputError(
            f"the previous calendar must be iCalendar as this tool writes it (RFC 5545): {fault}"
        ) from None
    return {entry.uid: entry for entry in entries if station in (None, entry.location)}


def _read_back(event) -> Entry:
    moments = [event[key].dt for key in ("DTSTART", "DTEND", "DTSTAMP")]
    if any(moment.tzinfo is None for moment in moments):
        raise ValueError("a time without its zone")
    start, end, stamp = (moment.astimezone(UTC) for moment in moments)
    sequence, status = int(event.get("SEQUENCE", 0)), str(event.get("STATUS", CONFIRMED))
    if not 0 <= sequence <= HIGHEST_SEQUENCE or status not in (CONFIRMED, CANCELLED):
        raise ValueError(f"an event of status {status!r} and sequence {sequence}")
    alarms = [(-alarm["TRIGGER"].dt, str(alarm["DESCRIPTION"])) for alarm in event.walk("VALARM")]
    alarm = alarms[0] if alarms and isinstance(alarms[0][0], timedelta) else None
    summary, location, description = (str(event.get(key, "")) for key in ("SUMMARY", "LOCATION", "DESCRIPTION"))
    summary = summary.removeprefix(CALLED_OFF)
    return Entry(str(event["UID"]), stamp, start, end, summary, location, description, status, sequence, alarm)


def _utc(text) -> datetime:
    return pd.Timestamp(text).tz_convert("UTC").to_pydatetime()


def _whole_second(moment: datetime) -> datetime:
    return moment.astimezone(UTC).replace(microsecond=0)
