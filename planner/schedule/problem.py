"""The week as the optimiser sees it."""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import groupby

import numpy as np

from planner.mission.contacts import Session
from planner.mission.models import Policy
from planner.mission.station import Station
from planner.schedule.sessions import Candidate
from planner.schedule.states import SatelliteStates
from planner.schedule.uplinks import NOTHING_YET, Aboard
from planner.units import DAY_S, HOUR_S


@dataclass(frozen=True)
class Problem:
    """Everything that constrains the choice.

    keep : (pass_id, mode) that must fly;  frozen : sessions that must fly just as they are
    previous : those of the plan before this one, which should change little;  aboard : what cannot be called back
    midnight_s : the UTC midnights within the span [s]
    commands_until_s : sessions that end before need no upload in the span, by satellite
    overlapping : the modes that may be on air on the same pass as a satellite's mode;  orbit_s : revolutions [s]
    """

    candidates: tuple[Candidate, ...]
    states: tuple[SatelliteStates, ...]
    stations: dict[str, Station]
    policy: Policy
    span_s: float
    midnight_s: np.ndarray
    commands_until_s: dict[str, float]
    overlapping: dict[tuple[str, str], frozenset[str]]
    orbit_s: dict[str, float]
    keep: frozenset[tuple[str, str]] = frozenset()
    frozen: tuple[Session, ...] = ()
    previous: tuple[Session, ...] = ()
    aboard: Aboard = NOTHING_YET

    def only(self, chosen: set[int]) -> "Problem":
        """The same problem with no other candidates: small, for mending a plan."""
        return replace(self, candidates=tuple(c for i, c in enumerate(self.candidates) if i in chosen))

    def without(self, sessions: set[tuple[str, str]]) -> "Problem":
        """The same problem without some (pass_id, mode)."""
        return replace(self, candidates=tuple(c for c in self.candidates if (c.pass_id, c.mode) not in sessions))

    def day_of(self, time_s: float) -> int:
        """Which UTC day of the span (0 is the first, perhaps a short one)."""
        return int(np.searchsorted(self.midnight_s, time_s, side="right"))

    def days(self) -> list[tuple[float, float]]:
        """(begin, end) of each UTC day of the span, the first and last perhaps cut."""
        edges = np.unique(np.concatenate([[0.0], self.midnight_s, [self.span_s]]))
        return list(zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True))

    def within_day(self, satellite: str, begin_s: float, end_s: float) -> list[int]:
        """Candidates of the daily modes whose whole window lies within a day."""
        return [
            i
            for i, c in enumerate(self.candidates)
            if c.satellite == satellite
            and c.mode in self.policy.daily_contact_modes
            and begin_s <= c.opens_s
            and c.closes_s <= end_s
        ]

    def whole_days(self) -> list[tuple[float, float]]:
        """(begin, end) of the UTC days that lie in the span uncut: those that ask for a daily contact."""
        return [(begin_s, end_s) for begin_s, end_s in self.days() if end_s - begin_s == DAY_S]

    def needs_upload(self, candidate: Candidate) -> bool:
        if self.policy.upload_lead_h is None or (candidate.pass_id, candidate.mode) in self._frozen_keys:
            return False
        return self.aboard.since_s > -np.inf or candidate.closes_s > self.commands_until_s[candidate.satellite]

    @cached_property
    def _frozen_keys(self) -> frozenset[tuple[str, str]]:
        return frozenset((session.pass_id, session.mode) for session in self.frozen)

    def uploads_for(self, index: int) -> list[int]:
        """Candidates whose contact could carry this one's commands, whatever start and stop are chosen."""
        wanted, policy = self.candidates[index], self.policy
        if policy.upload_lead_h is None:  # commands are always aboard
            return []
        latest_s = wanted.opens_s - policy.upload_lead_h * HOUR_S
        earliest_s = max(wanted.closes_s - policy.upload_reach_h * HOUR_S, self.aboard.since_s)
        return [
            i
            for i, c in enumerate(self.candidates)
            if c.carries_commands
            and c.satellite == wanted.satellite
            and c.closes_s <= latest_s
            and c.opens_s >= earliest_s
        ]

    def apart_s(self, first: Candidate, second: Candidate) -> float:
        """Least time from `first`'s tx_off to `second`'s tx_on; -inf where the two may overlap."""
        if first.satellite == second.satellite:
            if first.row == second.row and second.mode in self.overlapping[first.satellite, first.mode]:
                return -np.inf
            turn_s = self.policy.turnaround_s + second.transmitter.warmup_s
            rest_s = first.transmitter.cooldown_s if first.mode == second.mode else 0.0
            return max(turn_s, first.tail_s + second.lead_s, rest_s + second.transmitter.warmup_s)
        if first.station == second.station:
            return self.policy.turnaround_s + second.transmitter.warmup_s
        return -np.inf

    def neighbours(self) -> Iterator[tuple[int, int]]:
        """Pairs of candidates, earlier window first, that could come too close to one another."""
        order = sorted(range(len(self.candidates)), key=lambda i: (self.candidates[i].opens_s, i))
        for position, i in enumerate(order):
            first = self.candidates[i]
            reach_s = first.closes_s + self._longest_apart_s
            for j in order[position + 1 :]:
                second = self.candidates[j]
                if second.opens_s > reach_s:
                    break
                if second.opens_s < first.closes_s + self.apart_s(first, second):
                    yield i, j

    @property
    def _longest_apart_s(self) -> float:
        transmitters = {c.mode: c.transmitter for c in self.candidates}.values()
        warmup_s = max((t.warmup_s for t in transmitters), default=0.0)
        rest_s = max((max(t.cooldown_s, 0.0) for t in transmitters), default=0.0)
        busy_s = max((c.lead_s for c in self.candidates), default=0.0) + max(
            (c.tail_s for c in self.candidates), default=0.0
        )
        return max(self.policy.turnaround_s + warmup_s, rest_s + warmup_s, busy_s)

    @cached_property
    def candidate_of(self) -> dict[tuple[str, str], Candidate]:
        """The first candidate of each (pass_id, mode)."""
        return {(c.pass_id, c.mode): c for c in reversed(self.candidates)}

    def of_pass_and_mode(self) -> list[list[int]]:
        """Candidates that are ways of flying the same pass and mode: at most one of each is flown."""
        key = lambda i: (self.candidates[i].pass_id, self.candidates[i].mode)  # noqa: E731
        return [list(group) for _, group in groupby(sorted(range(len(self.candidates)), key=key), key=key)]
