"""Contacts as iCalendar (RFC 5545), for all stations or for one.

A contact keeps its UID through every re-plan: it comes from pass and mode. Given the calendar issued before, a contact
whose times or place changed gets a higher SEQUENCE, one that is no longer planned is sent as CANCELLED, one that is
already flown is left out, and one beyond the planned span stays as it was. No clock is read: DTSTAMP is the newest
element epoch, the state of knowledge that the times were computed from, so the same inputs give the same bytes.
"""

from datetime import UTC, datetime, timedelta
from uuid import UUID, uuid5

import pandas as pd

from planner.errors import InputError
from planner.export.contacts import file_name
from planner.mission.models import Mission

PRODUCT = "-//downlink-planner//contacts//EN"
NAMES_CONTACTS = UUID("5f2f2a0e-7a55-4d0b-9a43-6d2c3f1b8e11")  # drawn once; makes the UIDs ours
ALARM_BEFORE_AOS_S = 600.0
SIGNIFICANT = ("DTSTART", "DTEND", "LOCATION", "SUMMARY", "STATUS")  # a change in these raises SEQUENCE


def calendar_files(mission: Mission, contacts: pd.DataFrame, previous: bytes | None = None) -> dict[str, bytes]:
    """`week.ics`, and `station_<name>.ics` for every station of the mission; see `contact_calendar`."""
    options = {"stamp": newest_epoch(mission), "span": (mission.start, mission.end), "previous": previous}
    files = {"week.ics": contact_calendar(contacts, **options)}
    for station in mission.stations:
        files[f"{file_name('station', station.name)}.ics"] = contact_calendar(contacts, station=station.name, **options)
    return files


def newest_epoch(mission: Mission) -> datetime:
    """The epoch of the newest element set in use."""
    return max(satellite.elements.epoch for satellite in mission.satellites)


def contact_calendar(
    contacts: pd.DataFrame,
    *,
    stamp: datetime,
    span: tuple[datetime, datetime],
    previous: bytes | None = None,
    station: str | None = None,
    alarm_before_aos_s: float = ALARM_BEFORE_AOS_S,
) -> bytes:
    """The contacts as one calendar, an event from `tx_on` to `tx_off` (outward to whole seconds) each.

    Parameters
    ----------
    contacts : DataFrame with the columns of contacts.csv
    stamp : DTSTAMP of what is issued now
    span : (begin, end) that the plan covers; only contacts in it can be cancelled
    previous : the calendar issued before, of all stations or of this one
    station : only its contacts; all when None
    alarm_before_aos_s : [s] how long before AOS to remind

    Raises
    ------
    InputError : `previous` is not a calendar
    """
    wanted = contacts if station is None else contacts[contacts["station"] == station]
    before = _events_of(previous, station)
    events = {}
    for row in wanted.itertuples():
        uid = _uid(row, events)
        events[uid] = _event(row, uid, stamp, alarm_before_aos_s)
        _set_sequence(events[uid], before.get(uid))
    for uid, event in before.items():
        if uid not in events and event.end > span[0]:
            events[uid] = event if event.start >= span[1] or _is_cancelled(event) else _cancelled(event, stamp)
    return _calendar(events.values(), span, stamp, station)


def _calendar(events, span, stamp: datetime, station: str | None) -> bytes:
    from icalendar import Calendar

    calendar = Calendar()
    calendar.add("PRODID", PRODUCT)
    calendar.add("VERSION", "2.0")
    calendar.add("NAME", f"Downlink contacts, {station or 'all stations'}")  # RFC 7986
    for event in sorted(events, key=lambda event: (event.start, str(event["UID"]))):
        calendar.add_component(event)
    if not calendar.subcomponents:  # RFC 5545 asks for one component at least
        calendar.add_component(_nothing_planned(span, stamp, station))
    return calendar.to_ical()


def _uid(row, taken) -> str:
    ordinal = 0
    while (uid := str(uuid5(NAMES_CONTACTS, f"{row.pass_id}|{row.mode}|{ordinal}"))) in taken:
        ordinal += 1  # a second session of one mode on one pass
    return uid


def _event(row, uid: str, stamp: datetime, alarm_before_aos_s: float):
    from icalendar import Alarm, Event

    on, off, aos = (_utc(getattr(row, f"{name}_utc")) for name in ("tx_on", "tx_off", "aos"))
    event, alarm = Event(), Alarm()
    begin = on.replace(microsecond=0)
    end = off if off.microsecond == 0 else off.replace(microsecond=0) + timedelta(seconds=1)
    for key, value in (
        ("UID", uid), ("DTSTAMP", _whole_second(stamp)), ("DTSTART", begin), ("DTEND", end), ("STATUS", "CONFIRMED"),
        ("SUMMARY", f"{row.satellite}: {row.mode}, {row.station}"), ("LOCATION", row.station),
        ("DESCRIPTION", _description(row)), ("CATEGORIES", [row.mode]), ("TRANSP", "OPAQUE"),
    ):  # fmt: skip
        event.add(key, value)
    alarm.add("ACTION", "DISPLAY")
    alarm.add("DESCRIPTION", f"{row.satellite} rises at {row.station} at {row.aos_utc}")
    alarm.add("TRIGGER", _whole_second(aos) - timedelta(seconds=alarm_before_aos_s) - begin)
    event.add_component(alarm)
    return event


def _description(row) -> str:
    lines = [
        f"Contact {row.contact_id} (pass {row.pass_id})",
        f"AOS {row.aos_utc}, azimuth {row.aos_azimuth_deg:.1f} deg",
        f"Transmitter on {row.tx_on_utc}, off {row.tx_off_utc}",
        f"LOS {row.los_utc}, azimuth {row.los_azimuth_deg:.1f} deg",
        f"Highest elevation {row.max_elevation_deg:.1f} deg",
        f"{row.mode}: {row.frequency_mhz:g} MHz, {row.symbol_rate_mbaud:g} Mbaud, {row.polarisation}",
        f"Lowest margin {row.min_margin_db:.1f} dB, {row.volume_mbit:.0f} Mbit",
    ]
    cautions = "" if pd.isna(row.cautions) else str(row.cautions)
    return "\n".join([*lines, *([f"Cautions: {cautions}"] if cautions else [])])


def _set_sequence(event, before) -> None:
    same = before is not None and all(_plain(event, key) == _plain(before, key) for key in SIGNIFICANT)
    event.add("SEQUENCE", 0 if before is None else int(before.get("SEQUENCE", 0)) + (not same))


def _plain(event, key: str):
    value = event.get(key)
    return getattr(value, "dt", None) or str(value)


def _is_cancelled(event) -> bool:
    return str(event.get("STATUS")) == "CANCELLED"


def _cancelled(event, stamp: datetime):
    """The event as it was, called off, without its alarm."""
    sequence = int(event.get("SEQUENCE", 0)) + 1
    for key in ("STATUS", "SEQUENCE", "DTSTAMP"):
        event.pop(key, None)
    event.add("STATUS", "CANCELLED")
    event.add("SEQUENCE", sequence)
    event.add("DTSTAMP", _whole_second(stamp))
    event.subcomponents.clear()
    return event


def _nothing_planned(span, stamp: datetime, station: str | None):
    from icalendar import Event

    event = Event()
    for key, value in (
        ("UID", str(uuid5(NAMES_CONTACTS, f"nothing planned|{station}|{span[0].isoformat()}"))),
        ("DTSTAMP", _whole_second(stamp)), ("DTSTART", _whole_second(span[0])), ("DTEND", _whole_second(span[1])),
        ("SUMMARY", f"No contact planned, {station or 'all stations'}"), ("TRANSP", "TRANSPARENT"), ("SEQUENCE", 0),
    ):  # fmt: skip
        event.add(key, value)
    return event


def _events_of(previous: bytes | None, station: str | None) -> dict:
    """Contacts of an earlier calendar by UID, of one station when asked for."""
    from icalendar import Calendar

    if previous is None:
        return {}
    try:
        found = Calendar.from_ical(previous).walk("VEVENT")
        whole = [event for event in found if event.start.tzinfo and event.end.tzinfo and "LOCATION" in event]
        return {str(event["UID"]): event for event in whole if station in (None, str(event["LOCATION"]))}
    except (ValueError, KeyError, IndexError, TypeError, AttributeError) as fault:
        raise InputError(f"the previous calendar must be iCalendar (RFC 5545): {fault}") from None


def _utc(text) -> datetime:
    return pd.Timestamp(text).tz_convert("UTC").to_pydatetime()


def _whole_second(moment: datetime) -> datetime:
    return moment.astimezone(UTC).replace(microsecond=0)
