"""Which contact carries a session's commands up, and what is in the satellite already."""

from collections.abc import Collection
from dataclasses import dataclass

import numpy as np

from planner.mission.contacts import Session
from planner.mission.models import Mission, Satellite
from planner.units import DAY_S, HOUR_S

SAME_MOMENT_S = 2e-3  # times in files have milliseconds: what is closer than that is the same moment


@dataclass(frozen=True)
class Aboard:
    """What a re-plan cannot call back.

    sessions : those whose commands are in the satellite, and that it flies whatever is planned
    since_s : every other session is commanded by an uplink contact that is on air after this [s after the start]
    """

    sessions: frozenset[Session] = frozenset()
    since_s: float = -np.inf


NOTHING_YET = Aboard()


def aboard_at(mission: Mission, sessions: Collection[Session], freeze_s: float) -> Aboard:
    """What of an issued schedule is aboard at a moment: what powers on before it, and what was commanded before it.

    Commands go up in a session's latest uplink contact; those aboard at the start need none. Where commands are always
    aboard (no policy.upload_lead_h) they can always be changed too.
    """
    if freeze_s == -np.inf:
        return NOTHING_YET
    begun = {session for session in sessions if powers_on_s(mission, session) < freeze_s}
    if mission.policy.upload_lead_h is None:
        return Aboard(frozenset(begun), freeze_s)
    for session in sessions:
        carrier = carrier_of(mission, sessions, session)
        loaded = freeze_s > 0 and not ends_after_first_commands(mission, session)
        if loaded or (carrier is not None and powers_on_s(mission, carrier) < freeze_s):
            begun.add(session)
    return Aboard(frozenset(begun), freeze_s)


def carrier_of(
    mission: Mission, sessions: Collection[Session], session: Session, since_s: float = -np.inf
) -> Session | None:
    """The latest of the contacts that could carry a session's commands up in time, on air after `since_s`."""
    policy, modes = mission.policy, mission.satellite(session.satellite).spacecraft
    if policy.upload_lead_h is None:  # commands are always aboard
        return None
    latest_s = session.tx_on_s - policy.upload_lead_h * HOUR_S
    earliest_s = max(session.tx_off_s - policy.upload_reach_h * HOUR_S, since_s)
    found = [
        other
        for other in sessions
        if other.satellite == session.satellite
        and earliest_s <= other.tx_on_s
        and other.tx_off_s <= latest_s
        and modes.mode(other.mode).uplink
        and mission.station(other.station).uplink
    ]
    return max(found, default=None)


def commands_until_s(mission: Mission, satellite: Satellite) -> float:
    """Until when commands are aboard at the start."""
    until = satellite.start_state.commands_aboard_until
    return DAY_S if until is None else (until - mission.start).total_seconds()


def ends_after_first_commands(mission: Mission, session: Session) -> bool:
    """Whether a session ends after what was commanded before the span."""
    return session.tx_off_s > commands_until_s(mission, mission.satellite(session.satellite)) + SAME_MOMENT_S


def powers_on_s(mission: Mission, session: Session) -> float:
    """When a session's transmitter begins to warm up."""
    return session.tx_on_s - mission.satellite(session.satellite).spacecraft.mode(session.mode).warmup_s
