"""What lies on the operator's desk: the mission, what was changed by hand, the plan, the pass being looked at.

State only. The week shown is derived from it by `planner.schedule.trial`; whoever shows something watches the desk.
A notebook's page may call from several threads at once (JupyterLab sends widget messages past the cells): `lock` lets
one at a time change what lies here or draw it.
"""

import threading
from collections.abc import Callable
from functools import cached_property

import planner
from planner.errors import InputError
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.notebook.changes import Changes
from planner.schedule.checks import find_faults
from planner.schedule.result import GivenWeek, WeekPlan
from planner.schedule.trial import Sketch, TrialWeek, changed_by_hand, longest_session, week_of
from planner.schedule.week import Week

WEEK, LOOK = "week", "look"  # what watchers hear: another week is shown, another pass is looked at


class Desk:
    """A mission being worked on.

    `asked` is the mission as read, `mission` the one with the changes. `plan` is the last week that was planned or
    loaded, `before` the one that it took the place of.
    """

    def __init__(self, asked: Mission):
        self.asked, self.changes = asked, Changes()
        self.mission = asked
        self.keep: frozenset[tuple[str, str]] = frozenset()
        self.drop: frozenset[str] = frozenset()
        self.plan: GivenWeek | None = None
        self.before: Sketch | None = None
        self.pass_id: str | None = None
        self.mode = asked.satellites[0].spacecraft.transmitter[0].mode
        self._watchers: list[Callable[[str], None]] = []
        self.lock = threading.RLock()

    def watch(self, watcher: Callable[[str], None]) -> None:
        """`watcher` hears WEEK or LOOK after each change."""
        self._watchers.append(watcher)

    def _tell(self, what: str) -> None:
        for watcher in self._watchers:
            watcher(what)

    @cached_property
    def prepared(self) -> Week:
        """Passes, links and power of the changed mission."""
        return week_of(self.mission)

    def _shown(self) -> GivenWeek:
        """The plan as the hand has changed it since; the plan itself where it has not."""
        sessions = self.plan.flown.sessions if self.plan is not None else ()
        flown = changed_by_hand(self.prepared, sessions, keep=self.keep, drop=self.drop)
        if self.plan is not None and flown.sessions == sessions and self.plan.flown.week.mission == self.mission:
            return self.plan
        return TrialWeek(flown, self.plan.passes if self.plan is not None else None, self.drop)

    @cached_property
    def week(self) -> GivenWeek:
        """The week that is shown."""
        return self._shown()

    @cached_property
    def sketch(self) -> Sketch:
        """The shown week as charts need it."""
        return Sketch(self.week)

    @property
    def is_planned(self) -> bool:
        """Whether the shown week is a plan as it was planned."""
        return isinstance(self.week, WeekPlan)

    @cached_property
    def faults(self) -> tuple[str, ...]:
        """Every rule that the shown week breaks."""
        return () if self.is_planned else tuple(fault.text for fault in find_faults(self.week.flown))

    def _change(self, **state) -> None:
        """Take a changed state, or leave all as it was if no week can be derived from it."""
        with self.lock:
            kept = dict(self.__dict__)
            for name in ("week", "sketch", "faults"):
                self.__dict__.pop(name, None)
            self.__dict__.update(state)
            try:
                _ = self.sketch.summary
            except Exception:
                self.__dict__.clear()
                self.__dict__.update(kept)
                raise
            self.mode = self._known_mode(self.mode)
            self._tell(WEEK)

    def alter(self, changes: Changes) -> None:
        """Take changed values of the mission.

        Raises
        ------
        InputError : the rule that is broken; nothing is changed then
        """
        mission = changes.applied_to(self.asked)
        self._change(changes=changes, mission=mission, prepared=week_of(mission, self.prepared))

    def drop_pass(self, pass_id: str) -> None:
        """Nothing is to be sent on this pass."""
        self._change(drop=self.drop | {pass_id}, keep=frozenset(k for k in self.keep if k[0] != pass_id))

    def keep_pass(self, pass_id: str, mode: str) -> None:
        """This mode must be flown on this pass.

        Raises
        ------
        InputError : it cannot be
        """
        longest_session(self.prepared, pass_id, mode)
        self._change(drop=self.drop - {pass_id}, keep=self.keep | {(pass_id, mode)})

    def leave_open(self, pass_id: str | None = None) -> None:
        """No wish about this pass (about any pass: None) any more."""
        if pass_id is None:
            self._change(drop=frozenset(), keep=frozenset())
        else:
            self._change(drop=self.drop - {pass_id}, keep=frozenset(k for k in self.keep if k[0] != pass_id))

    def replan(self, progress, cancelled) -> WeekPlan:
        """Plan the changed mission with the wishes of the hand; does not touch the desk, so any thread may call it.

        Raises
        ------
        NoWeekError, KeyboardInterrupt : as `planner.plan_week`
        """
        keep = [f"{pass_id}:{mode}" for pass_id, mode in sorted(self.keep)]
        plan = planner.plan_week(
            self.mission, keep=keep, drop=sorted(self.drop), progress=progress, cancelled=cancelled
        )
        _ = plan.passes, plan.summary, plan.battery, plan.recorder  # the slow tables, while still in the background
        return plan

    def take(self, plan: GivenWeek) -> None:
        """Put a planned or loaded week on the desk."""
        before = self.before if self.plan is None else Sketch(self.plan)
        self._change(plan=plan, before=before)

    @property
    def compared_with(self) -> Sketch | None:
        """The week against which the shown one is compared: the plan if the hand changed it, else the plan before."""
        return self.before if self.plan is None or self.week is self.plan else Sketch(self.plan)

    def look_at(self, pass_id: str | None, mode: str | None = None) -> None:
        """Open a pass."""
        if pass_id is not None and pass_id not in self.prepared.row_of:
            raise InputError(f"pass must be in the span, got {pass_id!r}")
        if mode is None and pass_id is not None:
            flown = [session.mode for session in self.week.flown.sessions if session.pass_id == pass_id]
            mode = self.mode if self.mode in flown or not flown else flown[0]
        with self.lock:
            self.pass_id = pass_id
            self.mode = self._known_mode(mode or self.mode)
            self._tell(LOOK)

    def _known_mode(self, mode: str) -> str:
        return mode if mode in self.modes else self.modes[0]

    @property
    def modes(self) -> list[str]:
        """The modes of the satellite whose pass is looked at."""
        satellite = self.mission.satellites[0]
        if self.opened is not None:
            _, row = self.opened
            satellite = self.mission.satellite(str(self.prepared.sky.passes.satellite[row]))
        return [transmitter.mode for transmitter in satellite.spacecraft.transmitter]

    @property
    def opened(self) -> tuple[str, int] | None:
        """(pass id, row) of the pass looked at; None where none is, or its station is off."""
        row = None if self.pass_id is None else self.prepared.row_of.get(self.pass_id)
        return None if self.pass_id is None or row is None else (self.pass_id, row)

    def session(self) -> Session | None:
        """The shown session of the mode on the pass looked at; None where there is none."""
        found = [s for s in self.week.flown.sessions if (s.pass_id, s.mode) == (self.pass_id, self.mode)]
        return found[0] if found else None
