"""What the full physics showed of a set of sessions, put into the programme's terms: gains, and floors."""

import logging
from dataclasses import replace

import numpy as np

from planner.power.balance import SatellitePower
from planner.power.batch import most_broken
from planner.power.series import BatterySeries
from planner.schedule.checks import Fault
from planner.schedule.flown import CHARGE_LIMITS, Flown
from planner.schedule.problem import Problem
from planner.schedule.states import EnergyStates, SatelliteStates

MARGIN_WH = 0.004  # asked for beyond a floor that broke, so that rounding to whole seconds does not break it again

_log = logging.getLogger(__name__)

Chosen = list[tuple[int, float, float]]  # (candidate, tx_on_s, tx_off_s)


def followed(problem: Problem, states: SatelliteStates, chosen: Chosen, flown: Flown) -> SatelliteStates:
    """Each interval's gain as the simulation showed it, these sessions' modelled cost given back; and where the policy
    asks for a probability, floors moved by how much the weeks that it allows to break differ from the pessimistic one.
    """
    cost_wh = np.zeros(len(states.events_s) - 1)
    for index, on_s, off_s in chosen:
        candidate = problem.candidates[index]
        if candidate.satellite == states.satellite:
            flown_wh, start_wh, length_wh = candidate.cost_wh
            price_wh = flown_wh + start_wh * (on_s - candidate.opens_s) + length_wh * (off_s - on_s)
            for interval, share in states.shares(candidate.opens_s, candidate.closes_s):
                cost_wh[interval] += share * price_wh
    series = flown.worst[states.satellite]
    stored_wh = np.interp(states.events_s, series.time_s, series.stored_wh)
    modelled_wh = np.minimum(stored_wh[:-1] + states.likely.gain_wh - cost_wh, states.likely.full_wh)
    gain_wh = states.likely.gain_wh + stored_wh[1:] - modelled_wh
    off_wh = np.abs(gain_wh - states.likely.gain_wh).max(initial=0.0)
    _log.info("%s: the programme follows the simulated battery, by up to %.3f Wh", states.satellite, off_wh)
    followed_wh = replace(states.likely, gain_wh=gain_wh)
    return replace(states, likely=_for_risk(followed_wh, flown, states.satellite))


def granted(problem: Problem, flown: Flown) -> Problem:
    """Floors no higher than what these sessions, which fly whatever is chosen, leave: none could be asked for."""
    states = []
    for one in problem.states:
        series = flown.worst[one.satellite]
        left_wh = np.interp(one.events_s, series.time_s, series.stored_wh) - MARGIN_WH
        energy = replace(one.likely, floor_wh=np.minimum(one.likely.floor_wh, left_wh))
        states.append(replace(one, likely=energy))
    return replace(problem, states=tuple(states))


def _for_risk(energy: EnergyStates, flown: Flown, satellite: str) -> EnergyStates:
    """The same with floors at which the sessions' risk would be just as allowed; as it is without such a policy.

    The programme steers by the pessimistic week, whose shape is that of a bad week, and asks of it as much more (or
    less) than the floor as the weeks at the edge of the allowed risk fall lower (or stay higher) than it does.
    """
    policy = flown.week.mission.policy
    if policy.floor_risk_pct is None:
        return energy
    worst = flown.worst[satellite].soc_pct
    of_worst_pct = max(policy.soc_floor_pct - worst.min(), policy.soc_end_pct - worst[-1])
    raise_pct = _short_at_edge_pct(flown, satellite) - of_worst_pct
    _log.info("%s: floors moved by %.2f %% for the allowed risk", satellite, raise_pct)
    return replace(energy, risk_wh=_wh(flown, satellite, raise_pct))


def _short_at_edge_pct(flown: Flown, satellite: str) -> float:
    """What the best of the weeks beyond the allowed risk lacks of floor or end charge [%]; at most 0 if all is well."""
    short_pct, allowed_pct = np.sort(flown.short_pct(satellite))[::-1], flown.week.mission.policy.floor_risk_pct
    return float(short_pct[most_broken(len(short_pct), allowed_pct or 0.0)])


def _wh(flown: Flown, satellite: str, charge_pct: float) -> float:
    power = flown.week.powers[satellite]
    return float(power.stored_wh(100.0) - power.stored_wh(100.0 - charge_pct))


def tightened(problem: Problem, flown: Flown, faults: list[Fault], overdone: float = 1.0) -> Problem:
    """More energy asked for around each breach: what was missing, and a margin.

    `overdone` : how much more than what is missing for an allowed risk, for part of it goes to weeks that break anyway
    """
    tighter = []
    for states in problem.states:
        energy = states.likely
        for fault in (fault for fault in faults if fault.satellite == states.satellite):
            if fault.rule == "floor risk":
                missing_wh = _wh(flown, fault.satellite, overdone * _short_at_edge_pct(flown, fault.satellite))
                anew_wh = _for_risk(energy, flown, fault.satellite).risk_wh or 0.0
                energy = replace(energy, risk_wh=max(anew_wh, (energy.risk_wh or 0.0) + missing_wh) + MARGIN_WH)
            elif fault.rule in CHARGE_LIMITS or is_sag(fault):
                energy = replace(energy, floor_wh=_raised_wh(states.events_s, energy, flown, fault))
        tighter.append(replace(states, likely=energy))
    return replace(problem, states=tuple(tighter))


def _raised_wh(events_s: np.ndarray, energy: EnergyStates, flown: Flown, fault: Fault) -> np.ndarray:
    """Floors (n + 1,) raised around where one limit of charge breaks."""
    series = flown.judged[fault.satellite]
    missing_pct = _missing_pct(fault, series, flown.week.powers[fault.satellite])
    missing_wh = _wh(flown, fault.satellite, missing_pct) + MARGIN_WH
    event = int(np.searchsorted(events_s, _lowest_s(series, fault)))
    floor_wh = energy.floor_wh.copy()
    for at in {max(event - 1, 1), min(max(event, 1), len(floor_wh) - 1)}:
        # a floor was believed to hold; a depth counts from what there was
        there_wh = float(np.interp(events_s[at], series.time_s, series.stored_wh))
        held_wh = max(floor_wh[at], there_wh) if fault.rule == "depth of discharge" else floor_wh[at]
        floor_wh[at] = min(held_wh + missing_wh, energy.full_wh)
    return floor_wh


def is_sag(fault: Fault) -> bool:
    """The satellite's own loads pull an all but empty battery down: more charge there is the mend."""
    return fault.rule == "cell voltage under load" and fault.session is None


def _missing_pct(fault: Fault, series: BatterySeries, power: SatellitePower) -> float:
    """How much more charge is missing where a limit breaks; for a voltage, along the open-circuit curve."""
    if not is_sag(fault):
        return abs(fault.value - fault.bound)
    soc_pct = np.linspace(0.0, 100.0, 2001)
    cells = power.satellite.spacecraft.battery.cells_series
    rest_v = np.asarray(power.pack_open_circuit_v(soc_pct)) / cells
    now_pct = float(series.soc_at_pct(_lowest_s(series, fault)))
    wanted_v = np.interp(now_pct, soc_pct, rest_v) + fault.bound - fault.value
    return max(float(np.interp(wanted_v, rest_v, soc_pct)) - now_pct, 0.1)


def _lowest_s(series: BatterySeries, fault: Fault) -> float:
    """When a breach that begins at the fault's time is deepest."""
    if is_sag(fault):
        later = np.flatnonzero(series.time_s[:-1] >= fault.time_s - 1e-3)
        return float(series.time_s[later[np.argmin(np.abs(series.lowest_cell_v[later] - fault.value))]])
    later = np.flatnonzero(series.time_s >= fault.time_s - 1e-3)
    lowest_pct = fault.value
    if fault.rule == "depth of discharge":  # a cycle may end days after the peak that it began with, or begin low
        peak_pct = float(series.soc_at_pct(fault.time_s))
        lowest_pct = (
            peak_pct - fault.value if peak_pct - fault.value >= series.soc_pct[later].min() - 1e-6 else peak_pct
        )
    return float(series.time_s[later[np.argmin(np.abs(series.soc_pct[later] - lowest_pct))]])
