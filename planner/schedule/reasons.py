"""Why a pass was left out, with the figure that bound."""

import numpy as np

from planner.mission.contacts import Session
from planner.power.limits import Breach
from planner.schedule.candidates import Refusal
from planner.schedule.flown import Flown
from planner.schedule.frames import contact_id
from planner.schedule.problem import Problem
from planner.schedule.sessions import Candidate

CHARGE_LIMITS = ("SoC floor", "end-of-span SoC", "depth of discharge")


def verdicts(flown: Flown, problem: Problem, refusals: list[Refusal]) -> list[tuple[str, str]]:
    """(verdict, reason) of every pass, in the order of `sky.passes`."""
    planned: dict[str, list[Session]] = {}
    for session in flown.sessions:
        planned.setdefault(session.pass_id, []).append(session)
    by_row: dict[int, list[Candidate]] = {}
    for candidate in problem.candidates:
        by_row.setdefault(candidate.row, []).append(candidate)
    refused: dict[int, list[Refusal]] = {}
    for refusal in refusals:
        refused.setdefault(refusal.row, []).append(refusal)
    found = []
    for row, pass_id in enumerate(flown.week.sky.passes.pass_id):
        if pass_id in planned:
            modes = " and ".join(session.mode for session in planned[pass_id])
            found.append(("planned", modes))
        elif row in by_row:
            best = max(by_row[row], key=lambda candidate: candidate.most_mbit)
            found.append(("left out", f"{best.mode}: {_why_left_out(flown, problem, best)}"))
        else:
            found.append(_refused(refused.get(row, [])))
    return found


def _refused(refusals: list[Refusal]) -> tuple[str, str]:
    if any(refusal.verdict == "dropped" for refusal in refusals):
        return "dropped", "dropped by hand"
    texts = list(dict.fromkeys(f"{refusal.mode}: {refusal.reason}" for refusal in refusals))
    return "unusable", "; ".join(texts) or "no mode fits"


def _why_left_out(flown: Flown, problem: Problem, candidate: Candidate) -> str:
    """The first rule that stands in the way of flying the candidate at its shortest beside the plan."""
    return (
        _busy(flown, problem, candidate)
        or _no_upload(flown, problem, candidate)
        or _nothing_stored(flown, candidate)
        or _policy(flown, problem, candidate)
        or _no_energy(flown, candidate)
        or _not_worth_it(flown, problem, candidate)
    )


def _busy(flown: Flown, problem: Problem, candidate: Candidate) -> str:
    """Whether planned sessions on the satellite or the antenna leave no room for the shortest session."""
    taken = []
    for session in flown.sessions:
        if session.satellite != candidate.satellite and session.station != candidate.station:
            continue
        other = _candidate_of(problem, session)
        before_s = session.tx_on_s - problem.apart_s(candidate, other)
        after_s = session.tx_off_s + problem.apart_s(other, candidate)
        if before_s < candidate.closes_s and after_s > candidate.opens_s:
            taken.append((before_s, after_s, session))
    free_s, at_s = 0.0, candidate.opens_s
    for before_s, after_s, _ in taken:
        free_s, at_s = max(free_s, before_s - at_s), max(at_s, after_s)
    free_s = max(free_s, candidate.closes_s - at_s)
    if not taken or free_s >= candidate.shortest_s:
        return ""
    who = taken[0][2]
    what = "satellite" if who.satellite == candidate.satellite else "antenna"
    return f"{what} busy with {contact_id(who)}, {max(free_s, 0.0):.0f} s left of {candidate.window_s:.0f} s"


def _candidate_of(problem: Problem, session: Session) -> Candidate:
    return next(c for c in problem.candidates if (c.pass_id, c.mode) == (session.pass_id, session.mode))


def _no_upload(flown: Flown, problem: Problem, candidate: Candidate) -> str:
    if not problem.needs_upload(candidate):
        return ""
    index = problem.candidates.index(candidate)
    planned = {(session.pass_id, session.mode) for session in flown.sessions}
    carriers = [problem.candidates[i] for i in problem.uploads_for(index)]
    if any((c.pass_id, c.mode) in planned for c in carriers):
        return ""
    policy = problem.policy
    span = f"between {policy.upload_reach_h:g} h and {policy.upload_lead_h:g} h before it"
    return f"no {'planned' if carriers else 'possible'} contact {span} carries its commands up"


def _nothing_stored(flown: Flown, candidate: Candidate) -> str:
    stored_mbit = flown.recorder[candidate.satellite].stored_at_mbit(candidate.closes_s)
    if stored_mbit > 0.01 * candidate.most_mbit:
        return ""
    return f"storage empty: {stored_mbit:.0f} Mbit left when it could send {candidate.most_mbit:.0f} Mbit"


def _policy(flown: Flown, problem: Problem, candidate: Candidate) -> str:
    most = problem.policy.max_sessions_per_day
    if most is not None:
        day = problem.day_of(candidate.opens_s)
        today = sum(s.satellite == candidate.satellite and problem.day_of(s.tx_on_s) == day for s in flown.sessions)
        if today >= most:
            return f"policy: {today} sessions that day already, {most} allowed"
    return ""


def _shortest(candidate: Candidate) -> Session:
    """The shortest session around the fastest moment of the candidate's window."""
    on_s = np.clip(
        candidate.peak_s - candidate.shortest_s / 2, candidate.opens_s, candidate.closes_s - candidate.shortest_s
    )
    return candidate.session(float(on_s), float(on_s + candidate.shortest_s))


def _no_energy(flown: Flown, candidate: Candidate) -> str:
    """What breaks when the shortest session is added to the plan."""
    trial = flown.with_session(_shortest(candidate))
    breaches = trial.worst[candidate.satellite].breaches(trial.week.mission.policy)
    if not breaches:
        return ""
    breach: Breach = min(breaches, key=lambda b: b.limit not in CHARGE_LIMITS)
    when = trial.week.sky.clock.iso(breach.time_s)[:16] + "Z"
    if breach.limit == "SoC floor":
        lowest = f"would take the charge to {breach.value:.1f} % ({when}), floor {breach.bound:g} %"
        return f"energy: even {candidate.shortest_s:.0f} s {lowest}"
    if breach.limit == "end-of-span SoC":
        left = f"would leave {breach.value:.1f} % at the end, {breach.bound:g} % asked"
        return f"energy: even {candidate.shortest_s:.0f} s {left}"
    return f"{breach.limit}: {breach.value:.2f} {breach.unit} ({when}), limit {breach.bound:.2f} {breach.unit}"


def _not_worth_it(flown: Flown, problem: Problem, candidate: Candidate) -> str:
    """It would fit; what it earns against what it costs."""
    cost = problem.stations[candidate.station].cost
    price_mbit = problem.policy.cost_mbit * (cost.per_pass + cost.per_minute * candidate.longest_s / 60)
    stored_mbit = flown.recorder[candidate.satellite].stored_mbit[-1]
    if price_mbit > candidate.most_mbit:
        return f"not worth it: at most {candidate.most_mbit:.0f} Mbit for a station cost of {price_mbit:.0f} Mbit"
    energy_wh = candidate.likely.fixed_wh + candidate.likely.on_air_wh(candidate.opens_s, candidate.closes_s)
    return (
        f"not worth it: {energy_wh:.2f} Wh for at most {candidate.most_mbit:.0f} Mbit;"
        f" other sessions bring more of the {stored_mbit:.0f} Mbit still stored at the end"
    )
