"""A plan as a file of contacts: ids, mode and transmit times are read; everything else is derived anew."""

from collections.abc import Collection, Iterable
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from planner.errors import InputError
from planner.mission.models import Mission
from planner.mission.table import read_table
from planner.mission.text import nearest, shown

REQUIRED = ("pass_id", "satellite", "station", "mode", "tx_on_utc", "tx_off_utc")
MOST_CONTACTS = 20_000  # as many passes as the largest mission has: what comes after compares every contact with others


@dataclass(frozen=True, order=True)
class Session:
    """One mode on one pass, radio frequency on from `tx_on_s` to `tx_off_s` [s after the mission's start]."""

    tx_on_s: float
    tx_off_s: float
    satellite: str
    station: str
    mode: str
    pass_id: str

    @property
    def duration_s(self) -> float:
        return self.tx_off_s - self.tx_on_s


@dataclass(frozen=True)
class StatedContact:
    """A row of a contacts file: the session, the line it stands on, and what else the row states."""

    session: Session
    line: int
    stated: dict[str, str]


def read_contacts(contacts, mission: Mission) -> list[StatedContact]:
    """The contacts of a CSV file (its path), or of a DataFrame with the same columns, in the order of transmit times.

    A DataFrame's rows count from line 2, as they would in its file.

    Raises
    ------
    InputError : every row at fault, with line, column, rule and value; rows that repeat others; too many rows
    """
    if isinstance(contacts, str | Path):
        return _stated(contacts, read_table(Path(contacts), REQUIRED), mission)
    missing = [f"contacts: column {name!r} is required" for name in REQUIRED if name not in contacts.columns]
    if missing:
        raise InputError(*missing)
    return _stated("contacts", enumerate(contacts.astype(str).to_dict("records"), 2), mission)


def commands_of(contacts: Iterable[StatedContact], aboard: Collection[Session]) -> dict[Session, str]:
    """The MODCOD commands that a file states for those of its sessions that are aboard."""
    return {c.session: c.stated["modcods"] for c in contacts if c.session in aboard and c.stated.get("modcods")}


def _stated(place, rows: Iterable[tuple[int, dict[str, str]]], mission: Mission) -> list[StatedContact]:
    rows = list(rows)
    if len(rows) > MOST_CONTACTS:
        raise InputError(f"{place}: must hold at most {MOST_CONTACTS} contacts, got {len(rows)}")
    contacts: list[StatedContact] = []
    faults: list[str] = []
    lines: dict[Session, int] = {}
    for line, row in rows:
        found = _row_faults(row, mission)
        if found:
            faults.extend(f"{place}: line {line}: {fault}" for fault in found)
        else:
            on_s, off_s = (
                (utc_moment(row[key]) - mission.start).total_seconds() for key in ("tx_on_utc", "tx_off_utc")
            )
            session = Session(on_s, off_s, row["satellite"], row["station"], row["mode"], row["pass_id"])
            if session in lines:
                faults.append(f"{place}: line {line} repeats line {lines[session]}: {_told(session, row)}; delete one")
            lines.setdefault(session, line)
            contacts.append(StatedContact(session, line, row))
    if faults:
        raise InputError(*faults)
    return sorted(contacts, key=lambda contact: contact.session)


def _told(session: Session, row: dict[str, str]) -> str:
    on, off = shown(row["tx_on_utc"]), shown(row["tx_off_utc"])
    return f"each contact must stand once, got {shown(session.pass_id)}, {shown(session.mode)}, {on} to {off} again"


def _row_faults(row: dict[str, str], mission: Mission) -> list[str]:
    satellites = {satellite.name: satellite for satellite in mission.satellites}
    stations = [station.name for station in mission.stations]
    faults = [_unknown("satellite", row["satellite"], satellites), _unknown("station", row["station"], stations)]
    if row["satellite"] in satellites:
        modes = [transmitter.mode for transmitter in satellites[row["satellite"]].spacecraft.transmitter]
        faults.append(_unknown("mode", row["mode"], modes))
    if not row["pass_id"].isprintable() or not row["pass_id"]:
        faults.append(f"pass_id: must be a pass id, got {shown(row['pass_id'])}")
    times = []
    for key in ("tx_on_utc", "tx_off_utc"):
        try:
            times.append(utc_moment(row[key]))
        except ValueError as error:
            faults.append(f"{key}: {error}, got {shown(row[key])}")
    if len(times) == 2 and times[1] <= times[0]:
        faults.append(f"tx_off_utc: must be after tx_on_utc = {row['tx_on_utc']}, got {row['tx_off_utc']}")
    return [fault for fault in faults if fault]


def _unknown(key: str, value: str, known) -> str:
    return (
        ""
        if value in known
        else f"{key}: must be one of {shown(list(known))}, got {shown(value)}{nearest(value, known)}"
    )


def utc_moment(text: str) -> datetime:
    """A moment of a contacts file; ValueError where it is none or has no time zone."""
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        raise ValueError("must be a time such as 2026-12-07T09:30:00.000Z") from None
    if moment.tzinfo is None:
        raise ValueError("must carry a time zone (append Z for UTC)")
    try:
        return moment.astimezone(UTC)
    except OverflowError:
        raise ValueError("must be a time within the years 1 to 9999") from None
