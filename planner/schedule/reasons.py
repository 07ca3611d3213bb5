"""Why a pass was left out, with the figure that bound."""

import numpy as np

from planner.mission.contacts import Session
from planner.schedule.candidates import Refusal
from planner.schedule.checks import cost_of
from planner.schedule.flown import Flown
from planner.schedule.frames import contact_id
from planner.schedule.problem import Problem
from planner.schedule.sessions import Candidate

LITTLE = 0.05  # of what a session could send: less than that stored is next to nothing


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
        other = problem.candidate_of[session.pass_id, session.mode]
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
    """What it could bring beyond the plan is what stays stored from then on: the rest, later sessions bring anyway."""
    series = flown.recorder[candidate.satellite]
    later = np.flatnonzero(series.time_s >= candidate.closes_s)
    if not len(later):
        return ""
    lowest = later[int(np.argmin(series.stored_mbit[later]))]
    spare_mbit = float(series.stored_mbit[lowest])
    if spare_mbit > LITTLE * candidate.most_mbit:
        return ""
    when = flown.week.sky.clock.iso(series.time_s[lowest])[:16] + "Z"
    return (
        f"storage: it could send {candidate.most_mbit:.0f} Mbit, but planned sessions leave no more than"
        f" {spare_mbit:.0f} Mbit aboard ({when})"
    )


def _policy(flown: Flown, problem: Problem, candidate: Candidate) -> str:
    most = problem.policy.max_sessions_per_day
    if most is not None:
        day = problem.day_of(candidate.opens_s)
        today = sum(s.satellite == candidate.satellite and problem.day_of(s.tx_on_s) == day for s in flown.sessions)
        if today >= most:
            return f"policy: {today} sessions that day already, {most} allowed"
    budget, cost = problem.policy.cost_budget, problem.stations[candidate.station].cost
    if budget is not None:
        left = budget - cost_of(flown)
        least = cost.per_pass + cost.per_minute * candidate.shortest_s / 60
        if least > left:
            return (
                f"station budget: even {candidate.shortest_s:.0f} s cost {least:.2f}, {left:.2f} of {budget:g} are left"
            )
    return ""


def _no_energy(flown: Flown, candidate: Candidate) -> str:
    """Whether the shortest session, around the fastest moment, finds the energy it would take.

    What is spare at a moment is the least stored energy above its floor from then until the battery is next full: what
    is taken before that is made up by the Sun that would have been spilled.
    """
    begin_s = np.clip(
        candidate.peak_s - candidate.shortest_s / 2, candidate.opens_s, candidate.closes_s - candidate.shortest_s
    )
    needed_wh = candidate.likely.fixed_wh + candidate.likely.on_air_wh(begin_s, begin_s + candidate.shortest_s)
    spare_wh, at_s, asked = spare_energy_wh(flown, candidate.satellite, float(begin_s))
    if needed_wh <= spare_wh:
        return ""
    when = flown.week.sky.clock.iso(at_s)[:16] + "Z"
    return (
        f"energy: even {candidate.shortest_s:.0f} s take {needed_wh:.2f} Wh,"
        f" and {max(spare_wh, 0.0):.2f} Wh are to spare ({asked} at {when})"
    )


def spare_energy_wh(flown: Flown, satellite: str, from_s: float) -> tuple[float, float, str]:
    """Energy that could be taken at `from_s` without breaking a charge limit later: how much, when it binds, which."""
    series, power, policy = flown.worst[satellite], flown.week.powers[satellite], flown.week.mission.policy
    later = series.time_s >= from_s
    time_s, stored_wh = series.time_s[later], series.stored_wh[later]
    spilled = np.flatnonzero(series.spill_w[later] > 0)
    until = spilled[0] + 1 if len(spilled) else len(time_s)
    lowest = int(np.argmin(stored_wh[:until]))
    spare_wh = float(stored_wh[lowest] - power.stored_wh(policy.soc_floor_pct))
    if not len(spilled):
        end_wh = float(stored_wh[-1] - power.stored_wh(policy.soc_end_pct))
        if end_wh < spare_wh:
            return end_wh, float(time_s[-1]), f"{policy.soc_end_pct:g} % asked"
    return spare_wh, float(time_s[lowest]), f"floor {policy.soc_floor_pct:g} %"


def _not_worth_it(flown: Flown, problem: Problem, candidate: Candidate) -> str:
    """It would fit; what it earns against what it costs."""
    cost = problem.stations[candidate.station].cost
    price_mbit = problem.policy.cost_mbit * (cost.per_pass + cost.per_minute * candidate.longest_s / 60)
    if price_mbit > candidate.most_mbit:
        return f"not worth it: at most {candidate.most_mbit:.0f} Mbit for a station cost of {price_mbit:.0f} Mbit"
    taken_wh = candidate.likely.fixed_wh + candidate.likely.on_air_wh(candidate.opens_s, candidate.closes_s)
    own = candidate.most_mbit / max(taken_wh, 1e-9)
    rivals = flown.mbit_per_wh[candidate.satellite]
    poorest = min((rival for rival in rivals if rival > own), default=None)
    beaten = "" if poorest is None else f"; planned sessions bring from {poorest:.0f} Mbit/Wh"
    return f"not worth it: {taken_wh:.2f} Wh for at most {candidate.most_mbit:.0f} Mbit ({own:.0f} Mbit/Wh{beaten})"
