"""What the operator says by hand: keep, drop, a previous plan, a freeze."""

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, replace
from datetime import datetime
from pathlib import Path

import numpy as np
import pandas as pd

from planner.errors import InputError
from planner.mission.contacts import Session, read_contacts
from planner.mission.models import Mission
from planner.mission.text import nearest
from planner.schedule.uplinks import NOTHING_YET, Aboard, aboard_at, powers_on_s
from planner.schedule.week import Week


@dataclass(frozen=True)
class Wishes:
    """Hand steering, names checked.

    keep : (pass_id, mode) that must fly;  drop : pass ids that must not
    previous : sessions that should stay where that costs little;  frozen : those that stay just as they are
    freeze_until_s : no other session begins before [s after the start];  aboard : what cannot be called back
    """

    keep: frozenset[tuple[str, str]] = frozenset()
    drop: frozenset[str] = frozenset()
    previous: tuple[Session, ...] = ()
    frozen: tuple[Session, ...] = ()
    freeze_until_s: float = -np.inf
    aboard: Aboard = NOTHING_YET

    def __str__(self) -> str:
        kept = ", ".join(f"{pass_id}:{mode}" for pass_id, mode in sorted(self.keep)) or "nothing"
        return (
            f"kept {kept}; dropped {', '.join(sorted(self.drop)) or 'nothing'}; {len(self.previous)} contacts of the"
            f" previous plan, {len(self.frozen)} of them frozen"
        )


def read_wishes(
    week: Week, keep: Iterable[str], drop: Iterable[str], previous, freeze_until: datetime | None
) -> Wishes:
    """Wishes from the mission file's lists and these.

    Raises
    ------
    InputError : unknown pass or mode, a pass both kept and dropped, a freeze without a time zone or previous plan
    """
    policy = week.mission.policy
    kept = [_pass_and_mode(week, entry) for entry in (*policy.keep, *keep)]
    dropped = [_known_pass(week, entry, "drop") for entry in (*policy.drop, *drop)]
    both = sorted({pass_id for pass_id, _ in kept} & set(dropped))
    if both:
        raise InputError(*(f"pass {pass_id} must not be both kept and dropped" for pass_id in both))
    sessions = sessions_of(previous, week.mission) if previous is not None else []
    if freeze_until is not None and previous is None:
        raise InputError("freeze_until needs the previous contacts that stay frozen (--from CONTACTS.csv)")
    frozen_s = freeze_s(week.mission, freeze_until)
    aboard = aboard_at(week.mission, sessions, frozen_s)
    frozen = tuple(s for s in sessions if s in aboard.sessions or powers_on_s(week.mission, s) < 0.0)
    _refuse_frozen(week.mission, frozen, dropped, max(frozen_s, 0.0))
    return Wishes(
        keep=frozenset(kept),
        drop=frozenset(dropped),
        previous=tuple(sessions),
        frozen=tuple(session for session in frozen if session.pass_id in week.row_of),
        freeze_until_s=frozen_s,
        aboard=replace(aboard, sessions=frozenset(frozen)),
    )


def _refuse_frozen(mission: Mission, frozen: tuple[Session, ...], drop: list[str], freeze_s: float) -> None:
    begun = {session.pass_id for session in frozen if powers_on_s(mission, session) < freeze_s}
    loaded = {session.pass_id for session in frozen} - begun
    faults = [
        f"drop: {pass_id} is frozen and stays: its contact begins before freeze_until (--freeze-until) or the start"
        for pass_id in dict.fromkeys(drop)
        if pass_id in begun
    ]
    faults += [
        f"drop: {pass_id} stays: its commands are aboard by freeze_until (--freeze-until), and the satellite flies it"
        " unless an uplink contact cancels it; freeze from before that contact to plan without it"
        for pass_id in dict.fromkeys(drop)
        if pass_id in loaded
    ]
    twice = Counter((session.pass_id, session.mode) for session in frozen)
    faults += [
        f"{pass_id}: two frozen contacts in {mode!r} on one pass cannot be planned around; drop one from the file"
        for (pass_id, mode), count in twice.items()
        if count > 1
    ]
    if faults:
        raise InputError(*faults)


def sessions_of(contacts, mission: Mission) -> list[Session]:
    """Sessions from a path, a contacts table, or sessions themselves."""
    if isinstance(contacts, str | Path | pd.DataFrame):
        return [contact.session for contact in read_contacts(contacts, mission)]
    return sorted(contacts)


def freeze_s(mission: Mission, freeze_until: datetime | None) -> float:
    """Seconds after the mission's start; minus infinity where nothing is frozen. InputError without a time zone."""
    if freeze_until is None:
        return -np.inf
    if freeze_until.tzinfo is None:
        raise InputError(f"freeze_until must carry a time zone (append Z for UTC), got {freeze_until.isoformat()}")
    return (freeze_until - mission.start).total_seconds()


def _pass_and_mode(week: Week, entry: str) -> tuple[str, str]:
    pass_id, _, mode = entry.partition(":")
    _known_pass(week, pass_id, "keep")
    satellite = week.sky.passes.satellite[week.row_of[pass_id]]
    modes = [transmitter.mode for transmitter in week.mission.satellite(satellite).spacecraft.transmitter]
    if mode not in modes:
        raise InputError(f"keep: must be PASS:MODE with a mode of {modes}, got {entry!r}{nearest(mode, modes)}")
    return pass_id, mode


def _known_pass(week: Week, pass_id: str, what: str) -> str:
    if pass_id not in week.row_of:
        raise InputError(
            f"{what}: must be the id of a pass in the span, as `passes` lists them, got {pass_id!r}"
            f"{nearest(pass_id, week.row_of)}"
        )
    return pass_id
