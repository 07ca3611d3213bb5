"""Any set of contacts, checked from its ids, modes and transmit times alone."""

from dataclasses import dataclass
from datetime import datetime, timedelta

from planner.errors import InputError
from planner.mission.contacts import Session, StatedContact, commands_of, read_contacts, utc_moment
from planner.mission.models import Mission
from planner.mission.numbers import number
from planner.schedule import frames
from planner.schedule.checks import Fault, find_faults
from planner.schedule.flown import Flown
from planner.schedule.restore import has_moved
from planner.schedule.result import prepared
from planner.schedule.uplinks import aboard_at, powers_on_s
from planner.schedule.wishes import freeze_s, read_wishes, sessions_of


@dataclass(frozen=True)
class Stale:
    """A figure that a contacts file states and that is not what it would be now."""

    line: int
    contact: str
    column: str
    stated: str
    now: str

    @property
    def text(self) -> str:
        return f"line {self.line}: {self.contact}: {self.column} states {self.stated}, is now {self.now}"


@dataclass(frozen=True, eq=False)
class Audit:
    """The verdict on a set of contacts: every broken rule, and every stale figure (which breaks nothing).

    `commanded` : the MODCOD commands that the file states of those that are aboard.
    """

    flown: Flown
    faults: tuple[Fault, ...]
    stale: tuple[Stale, ...]
    lines: dict
    commanded: dict[Session, str]

    @property
    def safe(self) -> bool:
        return not self.faults

    def texts(self) -> list[str]:
        """One line a fault, with the contact and where it stands in the file."""
        return [self._place(fault) + fault.text for fault in self.faults]

    def _place(self, fault: Fault) -> str:
        if fault.session is None:
            return ""
        return f"line {self.lines[fault.session]}: {frames.contact_id(fault.session)}: "

    def as_dict(self) -> dict:
        return {
            "safe": self.safe,
            "contacts": len(self.flown.sessions),
            "faults": [
                {
                    "rule": fault.rule,
                    "contact_id": None if fault.session is None else frames.contact_id(fault.session),
                    "line": None if fault.session is None else self.lines[fault.session],
                    "time_utc": self.flown.week.sky.clock.iso(fault.time_s),
                    "value": None if fault.value != fault.value else float(fault.value),
                    "bound": None if fault.bound != fault.bound else float(fault.bound),
                    "unit": fault.unit,
                    "text": fault.text,
                }
                for fault in self.faults
            ],
            "stale": [vars(figure) for figure in self.stale],
        }


def audit(mission: Mission, contacts, *, freeze_until: datetime | None = None, previous=None) -> Audit:
    """Recompute everything that a set of contacts claims.

    Parameters
    ----------
    contacts : path of a contacts CSV, or its table
    freeze_until : contacts that power on before have flown or are being flown: newer elements may put them seconds
        beside their pass, which is no fault of theirs; what they take from the battery is judged like all else
    previous : the contacts issued before `freeze_until`: what of them is aboard by then must be there as it was, and
        all else needs an uplink contact after it. Without them all contacts that were commanded before are believed

    Raises
    ------
    InputError : a file cannot be read as contacts of this mission, a time without a zone, `previous` without a freeze
    """
    if previous is not None and freeze_until is None:
        raise InputError("previous contacts (--from) need the moment by which they were aboard (--freeze-until)")
    frozen_s = freeze_s(mission, freeze_until)
    stated = read_contacts(contacts, mission)
    week = prepared(mission)
    lines = {contact.session: contact.line for contact in stated}
    aboard = aboard_at(mission, lines if previous is None else sessions_of(previous, mission), frozen_s)
    flown = Flown(week, tuple(contact.session for contact in stated if week.reaches(contact.session)), aboard)
    faults = [
        fault
        for fault in (*_beyond(flown, lines), *find_faults(flown), *_wishes_broken(flown), *_not_as_aboard(flown))
        if fault.satellite or fault.session is None or powers_on_s(mission, fault.session) >= frozen_s
    ]
    return Audit(flown, tuple(faults), tuple(_stale(flown, stated)), lines, commands_of(stated, aboard.sessions))


def _beyond(flown: Flown, sessions) -> list[Fault]:
    """Sessions so far from the span that nothing more can be said of them."""
    clock, span_s = flown.week.sky.clock, flown.week.mission.span_s
    text = f"on air outside the mission's span, {clock.iso(0.0)} to {clock.iso(span_s)}"
    outside = [session for session in sessions if not flown.week.reaches(session)]
    return [Fault("span", session, session.tx_on_s, session.tx_on_s, span_s, "s", text) for session in outside]


def _not_as_aboard(flown: Flown) -> list[Fault]:
    """Contacts that the satellite flies whatever is planned, and that are not planned so."""
    iso, nan = flown.week.sky.clock.iso, float("nan")
    planned = {(session.pass_id, session.mode): session for session in flown.sessions}
    faults = []
    for session in sorted(filter(flown.week.reaches, flown.aboard.sessions)):
        now = planned.get((session.pass_id, session.mode))
        if now is None or has_moved(now, session):
            text = (
                f"{session.pass_id}:{session.mode} is aboard and will be on air from {iso(session.tx_on_s)} to"
                f" {iso(session.tx_off_s)}, which is not what these contacts say"
            )
            faults.append(Fault("aboard", None, session.tx_on_s, nan, nan, "", text))
    return faults


def _wishes_broken(flown: Flown) -> list[Fault]:
    """The mission file's own keep and drop lists."""
    wishes = read_wishes(flown.week, (), (), None, None)
    planned = {(session.pass_id, session.mode) for session in flown.sessions}
    nan = float("nan")
    missing = [f"{pass_id}:{mode} must be kept and is not planned" for pass_id, mode in sorted(wishes.keep - planned)]
    faults = [Fault("keep", None, 0.0, nan, nan, "", text) for text in missing]
    unwanted = [session for session in flown.sessions if session.pass_id in wishes.drop]
    text = "its pass is dropped by the mission file"
    return faults + [Fault("drop", session, session.tx_on_s, nan, nan, "", text) for session in unwanted]


def _stale(flown: Flown, stated: list[StatedContact]) -> list[Stale]:
    known = [contact for contact in stated if contact.session in flown.coding]
    if not known:
        return []
    now = frames.contacts_frame(flown, [contact.session for contact in known])
    found = []
    for contact, row in zip(known, now.to_dict("records"), strict=True):
        for column in frames.CONTACT_COLUMNS:
            agree = _same_moment if column.endswith("_utc") else _agrees
            if column in contact.stated and not agree(contact.stated[column], row[column]):
                name = frames.contact_id(contact.session)
                found.append(Stale(contact.line, name, column, contact.stated[column], _shown(row[column])))
    return found


def _same_moment(stated: str, now: str) -> bool:
    """However the moment is written, to the millisecond that the files have."""
    try:
        return abs(utc_moment(stated.strip()) - utc_moment(now)) < timedelta(milliseconds=1)
    except ValueError:
        return stated.strip() == now


def _agrees(stated: str, now) -> bool:
    """Equal as far as the stated text has digits."""
    if isinstance(now, str):
        return stated.strip() == now.strip()
    try:
        value = number(stated)
    except ValueError:
        return False
    decimals = len(stated.partition(".")[2])
    return abs(value - float(now)) <= 0.75 * 10.0**-decimals


def _shown(value) -> str:
    return value if isinstance(value, str) else f"{float(value):.3f}"
