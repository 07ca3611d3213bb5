"""The planned week as the outside sees it: four tables and a summary."""

import logging
import platform
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from datetime import datetime
from functools import cached_property, lru_cache
from importlib.metadata import version
from pathlib import Path

import numpy as np
import pandas as pd

from planner.errors import InputError
from planner.link import check_modes
from planner.mission.contacts import Session, commands_of, read_contacts
from planner.mission.models import Mission, Policy, Satellite
from planner.schedule import frames
from planner.schedule.account import data_classes
from planner.schedule.cautions import input_cautions
from planner.schedule.checks import cost_of
from planner.schedule.flown import Flown
from planner.schedule.plan import Plan, make_plan
from planner.schedule.reasons import verdicts
from planner.schedule.week import Progress, Week, prepare
from planner.schedule.wishes import read_wishes
from planner.units import DAY_S

_log = logging.getLogger(__name__)

PACKAGES = ("downlink-planner", "itur", "numpy", "pandas", "scipy", "sgp4", "skyfield", "skyfield-data")
MUCH = 0.02  # of the recorded data lost: more is worth a caution
CAUTIONS = (
    "Planning aid: flight rules, the operator's licence and licensed practice come first.",
    "Power flux-density is compared with ITU Radio Regulations Table 21-4 as copied second-hand; check the current"
    " Radio Regulations and your licence.",
    "Antennas move without warning and transmit: keep clear of dishes and follow the station's exposure rules.",
    "Lithium cells: limits here are the mission file's; the cell maker's and the safety review's limits come first.",
)


@dataclass(frozen=True, eq=False, repr=False)
class GivenWeek:
    """A set of sessions, whoever chose them, as public tables. Columns are those of the files of the same names.

    `commanded` : the MODCOD commands of sessions that are aboard, as they went up: newer elements do not change them.
    """

    flown: Flown
    commanded: Mapping[Session, str] = field(default_factory=dict, kw_only=True)

    def __repr__(self) -> str:
        """In a line: the whole of it fills pages."""
        s = self.summary
        return (
            f"<{type(self).__name__} of {s['mission']!r}: {s['contacts']} contacts on {s['passes']} passes,"
            f" {s['volume_mbit']:.0f} Mbit, lowest charge {s['soc_min_pct']:.1f} %>"
        )

    @cached_property
    def contacts(self) -> pd.DataFrame:
        table = frames.contacts_frame(self.flown)
        modcods = [self.commanded.get(s, now) for s, now in zip(self.flown.sessions, table["modcods"], strict=True)]
        return table.assign(modcods=modcods)

    @cached_property
    def passes(self) -> pd.DataFrame:
        """Every pass, those with a contact marked planned."""
        modes: dict[str, list[str]] = {}
        for session in self.flown.sessions:
            modes.setdefault(session.pass_id, []).append(session.mode)
        sky = self.flown.week.sky
        planned = [" and ".join(modes.get(pass_id, [])) for pass_id in sky.passes.pass_id]
        verdict = ["planned" if reason else "left out" for reason in planned]
        return sky.passes.frame(sky.clock).assign(verdict=verdict, reason=planned)

    @cached_property
    def battery(self) -> pd.DataFrame:
        return frames.battery_frame(self.flown)

    @cached_property
    def recorder(self) -> pd.DataFrame:
        return frames.recorder_frame(self.flown)

    @cached_property
    def summary(self) -> dict:
        """The week in figures; volumes in Mbit, charge at the pessimistic corner."""
        flown, mission = self.flown, self.flown.week.mission
        worst, stored = flown.worst.values(), flown.recorder.values()
        return {
            "mission": mission.name,
            "start": mission.start.isoformat(),
            "days": mission.days,
            "satellites": len(mission.satellites),
            "stations": len(mission.stations),
            "passes": len(flown.week.sky.passes),
            "contacts": len(flown.sessions),
            "volume_mbit": _rounded(flown.total_mbit, 3),
            "expected_volume_mbit": _rounded(float(self.contacts["expected_volume_mbit"].sum()), 3),
            "soc_min_pct": _rounded(min(float(series.soc_pct.min()) for series in worst), 3),
            "soc_floor_pct": mission.policy.soc_floor_pct,
            "soc_end_pct": _rounded(min(float(series.soc_pct[-1]) for series in worst), 3),
            "floor_risk_pct": {name: _risk(flown, name) for name in flown.week.powers},
            "station_cost": _rounded(cost_of(flown), 3),
            "stored_end_mbit": _rounded(sum(float(series.stored_mbit[-1]) for series in stored), 3),
            "lost_mbit": _rounded(sum(float(series.lost_mbit[-1]) for series in stored), 3),
            "data_classes": [row for satellite in mission.satellites for row in _data_classes(flown, satellite)],
            "elements_age_days_max": _rounded(_oldest_age_days(flown), 4),
            "cautions": self._cautions(),
            "policy": mission.policy.model_dump(mode="json"),
            "versions": {"python": platform.python_version()} | {name: version(name) for name in PACKAGES},
            "inputs": dict(mission.inputs),
        }

    def _cautions(self) -> list[str]:
        policy = self.flown.week.mission.policy
        own = [
            f"Planned on elements renewed every {policy.elements_refresh_days:g} days; each contact says with which"
            " epoch its dish still points (elements_newer_than_utc)."
        ]
        if policy.floor_risk_pct is not None:
            own += [self._risk_caution(name, policy) for name in self.flown.week.powers]
        own += [self._loss_caution(name) for name, series in self.flown.recorder.items() if _lost_share(series) > MUCH]
        over = int(self.contacts["cautions"].str.contains("flux").sum())
        if over:
            which = "contact exceeds" if over == 1 else "contacts exceed"
            own.append(f"{over} {which} that flux limit at some moment; see the cautions beside it.")
        return [*CAUTIONS, *own, *input_cautions(self.flown.week.mission)]

    def _loss_caution(self, satellite: str) -> str:
        series = self.flown.recorder[satellite]
        full = self.flown.week.sky.clock.iso(float(series.time_s[int(np.argmax(series.lost_mbit > 0))]))
        return (
            f"{satellite}: {100 * _lost_share(series):.0f} % of what the payloads record,"
            f" {series.lost_mbit[-1]:.0f} Mbit, is lost: the recorder is full from {full[:16]}Z."
        )

    def _risk_caution(self, satellite: str, policy: Policy) -> str:
        lowest_pct, risk_pct = self.flown.worst[satellite].soc_pct.min(), 100 * self.flown.risk(satellite).high
        return (
            f"{satellite}: charge is held to a probability: up to {risk_pct:.2f} % of weeks spread about nominal fall"
            f" below floor or end charge, {policy.floor_risk_pct:g} % allowed; the pessimistic week falls to"
            f" {lowest_pct:.1f} %."
        )


@dataclass(frozen=True, eq=False, repr=False)
class WeekPlan(GivenWeek):
    """A plan that keeps every limit at the pessimistic corner, with the reason for every pass and the proof."""

    plan: Plan
    explanations: dict | None = None  # by pass id, from `explained`
    prices: pd.DataFrame | None = None  # from `priced`

    @classmethod
    def of(cls, plan: Plan, commanded: Mapping[Session, str] | None = None) -> "WeekPlan":
        return cls(plan.flown, plan, commanded=commanded or {})

    def explained(self, progress: Progress = lambda stage: None, cancelled=lambda: False) -> "WeekPlan":
        """The same plan, `passes` telling too what keeping each left-out pass would cost. A solution for each pass."""
        from planner.schedule.explain import explain

        return replace(self, explanations=explain(self.plan, progress, cancelled))

    def priced(self, progress: Progress = lambda stage: None, cancelled=lambda: False) -> "WeekPlan":
        """The same plan with `.prices`: what one more Wh, W, dB, Mbit, station hour or station is worth. Minutes."""
        from planner.schedule.prices import price_list

        return replace(self, prices=price_list(self, progress, cancelled))

    @cached_property
    def passes(self) -> pd.DataFrame:
        """Every pass with its verdict and the reason for it."""
        found = verdicts(self.plan.flown, self.plan.problem, self.plan.refusals)
        sky = self.flown.week.sky
        table = sky.passes.frame(sky.clock).assign(verdict=[v for v, _ in found], reason=[r for _, r in found])
        if self.explanations is None:
            return table
        texts = [self.explanations[p].text if p in self.explanations else "" for p in table["pass_id"]]
        return table.assign(if_kept=texts)

    @cached_property
    def summary(self) -> dict:
        """As `GivenWeek.summary`, with how good the plan is."""
        plan = self.plan
        return super().summary | {
            "upper_bound_mbit": _rounded(plan.upper_bound_mbit, 3),
            "gap_pct": _rounded(plan.gap_pct, 4),
            "objective": _rounded(plan.solution.objective, 3),
            "objective_bound": _rounded(plan.solution.bound, 3),
            "solver_gap_pct": _rounded(plan.solution.gap_pct, 4),
            "status": plan.solution.status,
            "solutions": plan.solutions,
        }


def _lost_share(series) -> float:
    """Of what is recorded through the span, how much finds no room."""
    return float(series.lost_mbit[-1]) / max(float(series.produced_mbit[-1]), 1e-9)


def _risk(flown: Flown, satellite: str) -> dict:
    """Probability that a week spread about nominal breaks floor or end charge, with its 95 % interval."""
    share = flown.risk(satellite)
    return {name: _rounded(100 * value, 3) for name, value in share._asdict().items()}


def _data_classes(flown: Flown, satellite: Satellite) -> list[dict]:
    """What became of each class of data, rounded."""
    rows = data_classes(flown, satellite)
    return [
        {k: _rounded(v, 3) if isinstance(v, float) and k != "weight" else v for k, v in row.items()} for row in rows
    ]


def _oldest_age_days(flown) -> float:
    """Age of the file's elements at the last transmission that relies on them."""
    epochs = {satellite.name: satellite.elements.epoch for satellite in flown.week.mission.satellites}
    start = flown.week.mission.start
    ages = [(start - epochs[s.satellite]).total_seconds() + s.tx_off_s for s in flown.sessions]
    return max(ages, default=0.0) / DAY_S


def _rounded(value: float, digits: int) -> float | None:
    return round(float(value), digits) if np.isfinite(value) else None


@lru_cache(maxsize=2)
def prepared(mission: Mission) -> Week:
    """The mission's week, computed once for all questions about the same mission."""
    if not isinstance(mission, Mission):
        raise InputError(f"mission must be what load_mission(path) gives, got {mission!r}")
    check_modes(mission)
    return prepare(mission)


def plan_week(
    mission: Mission,
    *,
    keep: Iterable[str] = (),
    drop: Iterable[str] = (),
    previous=None,
    freeze_until: datetime | None = None,
    time_limit_s: float | None = None,
    progress: Progress | None = None,
    cancelled: Callable[[], bool] = lambda: False,
) -> WeekPlan:
    """The best week of sessions that the battery can pay for.

    Parameters
    ----------
    keep, drop : "PASS:MODE" that must fly, pass ids that must not, beside the mission file's own lists
    previous : contacts (path, table or sessions) that should stay where that costs at most policy.replan_loss_pct
    freeze_until : previous contacts that power on before stay just as they are, and nothing new begins before
    time_limit_s : seconds for the solver; the best plan found by then is taken and its gap told
    progress : hears the name of each stage
    cancelled : asked every 50 ms while the solver runs

    Raises
    ------
    InputError : a wish names what does not exist
    NoWeekError : no week keeps the limits
    KeyboardInterrupt : cancelled
    """
    tell = progress or (lambda stage: None)
    tell("passes, links and power")
    week = prepared(mission)
    stated = read_contacts(previous, mission) if isinstance(previous, str | Path | pd.DataFrame) else None
    wishes = read_wishes(week, keep, drop, previous if stated is None else [c.session for c in stated], freeze_until)
    _log.info("by hand: %s", wishes)
    plan = make_plan(week, wishes, time_limit_s=time_limit_s, progress=tell, cancelled=cancelled)
    return WeekPlan.of(plan, commands_of(stated or (), wishes.aboard.sessions))
