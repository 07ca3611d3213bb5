"""A week changed by hand: contacts taken out or put in, limits moved; simulated at once, not optimised anew."""

from collections.abc import Iterable
from dataclasses import dataclass, replace
from functools import cached_property

import pandas as pd

from planner.errors import InputError
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.schedule.candidates import find_candidates
from planner.schedule.flown import Flown
from planner.schedule.result import GivenWeek, prepared
from planner.schedule.week import Week
from planner.schedule.wishes import Wishes

CHARGE_LIMITS = {"soc_floor_pct", "soc_end_pct"}  # of the policy: nothing to the left of the schedule depends on them


@dataclass(frozen=True, eq=False)
class TrialWeek(GivenWeek):
    """Sessions changed by hand. `verdicts` are those of the plan that was changed (or None), `dropped` pass ids."""

    verdicts: pd.DataFrame | None = None
    dropped: frozenset[str] = frozenset()

    @cached_property
    def passes(self) -> pd.DataFrame:
        """Every pass; where the hand changed nothing, with the verdict and the reason of the plan."""
        passes = super().passes
        if self.verdicts is not None:
            told = self.verdicts.set_index("pass_id")
            told = told.loc[told["verdict"].isin(["left out", "unusable"])]
            known = (passes["verdict"] != "planned") & passes["pass_id"].isin(told.index)
            for column in ("verdict", "reason"):
                passes.loc[known, column] = passes.loc[known, "pass_id"].map(told[column])
        dropped = (passes["verdict"] != "planned") & passes["pass_id"].isin(list(self.dropped))
        passes.loc[dropped, ["verdict", "reason"]] = ["dropped", "dropped by hand"]
        return passes

    @cached_property
    def summary(self) -> dict:
        """As `GivenWeek.summary`; nothing is known of how good a week changed by hand is."""
        unknown = ("upper_bound_mbit", "gap_pct", "objective", "objective_bound", "solver_gap_pct")
        return super().summary | dict.fromkeys(unknown) | {"status": "changed by hand, not optimised"}


@dataclass(frozen=True, eq=False)
class Sketch:
    """What the week's picture and a comparison need of a `TrialWeek`, without the figures that take long."""

    week: GivenWeek

    @cached_property
    def contacts(self) -> pd.DataFrame:
        flown = self.week.flown
        iso, columns = flown.week.sky.clock.iso, ("pass_id", "satellite", "station", "mode", "tx_on_utc", "tx_off_utc")
        rows = [
            (s.pass_id, s.satellite, s.station, s.mode, iso(s.tx_on_s), iso(s.tx_off_s), flown.volume_mbit[s])
            for s in flown.sessions
        ]
        return pd.DataFrame(rows, columns=[*columns, "volume_mbit"])

    @property
    def passes(self) -> pd.DataFrame:
        return self.week.passes

    @property
    def battery(self) -> pd.DataFrame:
        return self.week.battery

    @property
    def recorder(self) -> pd.DataFrame:
        return self.week.recorder

    @cached_property
    def summary(self) -> dict:
        flown = self.week.flown
        return {
            "volume_mbit": flown.total_mbit,
            "soc_min_pct": min(float(series.soc_pct.min()) for series in flown.worst.values()),
            "soc_end_pct": min(float(series.soc_pct[-1]) for series in flown.worst.values()),
            "soc_floor_pct": flown.week.mission.policy.soc_floor_pct,
        }


def week_of(mission: Mission, near: Week | None = None) -> Week:
    """The mission's week; made from the week `near` where the two missions differ only in their charge limits."""
    if near is not None and _alike(mission) == _alike(near.mission):
        return replace(near, mission=mission)
    return prepared(mission)


def _alike(mission: Mission) -> Mission:
    policy = mission.policy.model_copy(update=dict.fromkeys(CHARGE_LIMITS))
    return mission.model_copy(update={"policy": policy})


def changed_by_hand(
    week: Week, sessions: Iterable[Session], *, keep: Iterable[tuple[str, str]] = (), drop: Iterable[str] = ()
) -> Flown:
    """The sessions that this week still knows, less those on dropped passes, with one on every pass that is kept.

    Raises
    ------
    InputError : a pass that is kept cannot be used in that mode
    """
    dropped = set(drop)
    known = [s for s in sessions if (week.row_of.get(s.pass_id), s.mode) in week.place_of and s.pass_id not in dropped]
    flown = Flown(week, tuple(known))
    there = {(session.pass_id, session.mode) for session in known}
    for pass_id, mode in sorted(set(keep) - there):
        flown = put_in(flown, pass_id, mode)
    return flown


def put_in(flown: Flown, pass_id: str, mode: str) -> Flown:
    """With the longest session that this pass and mode allow, in place of what cannot share the pass with it."""
    session = longest_session(flown.week, pass_id, mode)
    craft = flown.week.mission.satellite(session.satellite).spacecraft
    gone = {s for s in flown.sessions if s.pass_id == pass_id and not craft.may_overlap(s.mode, mode)}
    return flown.without(gone).with_session(session)


def longest_session(week: Week, pass_id: str, mode: str) -> Session:
    """The longest session that window and mode allow, around the fastest moment of the pass.

    Raises
    ------
    InputError : no such pass, or no session is possible on it in that mode
    """
    if pass_id not in week.row_of:
        raise InputError(f"pass must be in the span, got {pass_id!r}")
    found, refused = find_candidates(week, Wishes(), only=(week.row_of[pass_id], mode))
    if not found:
        reasons = [refusal.reason for refusal in refused] or [f"the satellite has no mode {mode!r}"]
        raise InputError(f"{mode} on {pass_id}: {reasons[0]}")
    best = max(found, key=lambda candidate: candidate.most_mbit)
    latest_s = best.closes_s - best.longest_s
    begin_s = min(max(best.peak_s - best.longest_s / 2, best.opens_s), latest_s)
    return best.session(begin_s, begin_s + best.longest_s)
