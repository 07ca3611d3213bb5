"""Can the battery pay for this one session?"""

from dataclasses import asdict, dataclass
from itertools import combinations

import numpy as np

from planner.errors import InputError
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.mission.text import nearest
from planner.schedule.candidates import find_candidates
from planner.schedule.checks import Fault, find_faults
from planner.schedule.flown import Flown
from planner.schedule.frames import contact_id
from planner.schedule.result import plan_week, prepared
from planner.schedule.sessions import Candidate
from planner.schedule.week import Progress
from planner.schedule.wishes import Wishes, sessions_of
from planner.units import JOULE_PER_WH

STARTS = 9  # places in the window at which a transmission of a given length is tried
MOST_GIVEN_UP = 3  # sets of up to so many contacts are tried as ones to give way
ALREADY = "the contacts given break a limit already (see `audit`): "
NEAREST = 14  # … among the contacts nearest before the session


@dataclass(frozen=True)
class Affordability:
    """The go or no-go for one session at the pessimistic corner, and the figures behind it. None where not defined.

    It is a no as well where the accepted contacts break a limit of the battery already, whatever the session adds, and
    where a rule other than the battery's would break: those are the `conflicts`.
    `replaces` names accepted contacts that the session takes the place of, `replaced_s` on air in all. `gained_mbit` is
    what all contacts together then bring more: less than `volume_mbit` where others would have brought the same data.
    """

    pass_id: str
    satellite: str
    station: str
    mode: str
    affordable: bool
    reason: str
    tx_on_utc: str | None = None
    tx_off_utc: str | None = None
    duration_s: float | None = None
    volume_mbit: float | None = None
    energy_wh: float | None = None
    joule_per_mbit: float | None = None
    soc_before_pct: float | None = None
    soc_lowest_pct: float | None = None
    soc_lowest_utc: str | None = None
    soc_after_pct: float | None = None
    lowest_cell_v: float | None = None
    recovered_utc: str | None = None
    longest_s: float | None = None
    longest_tx_on_utc: str | None = None
    binding_limit: str | None = None
    missing: float | None = None
    missing_unit: str | None = None
    give_way: tuple[str, ...] = ()
    conflicts: tuple[str, ...] = ()
    replaces: tuple[str, ...] = ()
    replaced_s: float | None = None
    gained_mbit: float | None = None

    @property
    def only_by_rules(self) -> bool:
        """Whether the battery could pay, and only rules of the week say no."""
        return not self.affordable and self.reason in self.conflicts

    @property
    def binding(self) -> str:
        """The binding limit with what is missing, where that is a figure."""
        missing = "" if self.missing is None else f", missing {self.missing:.2f} {self.missing_unit}".rstrip()
        return f"{self.binding_limit}{missing}"

    def as_dict(self) -> dict:
        return asdict(self) | {name: list(getattr(self, name)) for name in ("give_way", "conflicts", "replaces")}


def afford(
    mission: Mission, pass_id: str, mode: str, contacts=None, *, progress: Progress | None = None
) -> Affordability:
    """Is one session affordable on energy, beside the contacts given (without them, the planned week)?

    The session asked about is the longest that window and mode allow. A contact already planned on that pass in that
    mode, or one that cannot share the pass, is replaced. `progress` hears the name of each stage.

    Raises
    ------
    InputError : unknown pass or mode, or contacts that cannot be read
    NoWeekError : without contacts given, and no week can be planned
    """
    tell = progress or (lambda stage: None)
    tell("passes, links and power")
    week = prepared(mission)
    if pass_id not in week.row_of:
        raise InputError(
            f"pass must be in the span, as `passes` lists them, got {pass_id!r}{nearest(pass_id, week.row_of)}"
        )
    row = week.row_of[pass_id]
    satellite, station = str(week.sky.passes.satellite[row]), str(week.sky.passes.station[row])
    modes = [transmitter.mode for transmitter in mission.satellite(satellite).spacecraft.transmitter]
    if mode not in modes:
        raise InputError(f"mode must be one of {modes}, got {mode!r}{nearest(mode, modes)}")
    found, refused = find_candidates(week, Wishes(), only=(row, mode))
    if not found:
        reason = next(r.reason for r in refused)
        return Affordability(pass_id, satellite, station, mode, False, reason)
    sessions = plan_week(mission, progress=tell).flown.sessions if contacts is None else sessions_of(contacts, mission)
    tell("the battery with this session")
    return _answer(Flown(week, tuple(filter(week.reaches, sessions))), max(found, key=lambda c: c.most_mbit))


def _answer(flown: Flown, candidate: Candidate) -> Affordability:
    week, iso = flown.week, flown.week.sky.clock.iso
    craft = week.mission.satellite(candidate.satellite).spacecraft
    replaced = [
        s
        for s in flown.of(candidate.satellite)
        if s.pass_id == candidate.pass_id and not craft.may_overlap(s.mode, candidate.mode)
    ]
    base = flown.without(set(replaced))
    session = _placed(candidate, candidate.longest_s, _best_start_s(candidate, candidate.longest_s))
    trial = base.with_session(session)
    series = trial.worst[candidate.satellite]
    already, faults = _battery_faults(base, candidate.satellite), _new_faults(base, trial)
    by_battery = [fault for fault in faults if fault.satellite]
    draw = week.powers[candidate.satellite].session_draw(session)
    lowest_s, lowest_pct = series.lowest(float(draw.edges_s[0]))
    before_pct = float(series.soc_at_pct(draw.edges_s[0]))
    recovered_s = series.recovered_s(float(draw.edges_s[-1]), before_pct)
    volume_mbit = trial.volume_mbit[session]
    longest_s, start_s = (0.0, None) if already else (session.duration_s, session.tx_on_s)
    if faults and not already:
        longest_s, start_s = _longest(base, candidate)
    inside = (series.time_s >= draw.edges_s[0]) & (series.time_s <= draw.edges_s[-1])
    binding = (*already, *faults, None)[0]
    return Affordability(
        pass_id=candidate.pass_id,
        satellite=candidate.satellite,
        station=candidate.station,
        mode=candidate.mode,
        affordable=binding is None,
        reason=(ALREADY if already else "") + binding.text if binding else "every limit holds",
        tx_on_utc=iso(session.tx_on_s),
        tx_off_utc=iso(session.tx_off_s),
        duration_s=session.duration_s,
        volume_mbit=volume_mbit,
        energy_wh=draw.own_wh,
        joule_per_mbit=draw.own_wh * JOULE_PER_WH / volume_mbit if volume_mbit > 0 else None,
        soc_before_pct=before_pct,
        soc_lowest_pct=lowest_pct,
        soc_lowest_utc=iso(lowest_s),
        soc_after_pct=float(series.soc_at_pct(draw.edges_s[-1])),
        lowest_cell_v=float(np.min(series.lowest_cell_v[inside])),
        recovered_utc=None if np.isnan(recovered_s) else iso(recovered_s),
        longest_s=longest_s,
        longest_tx_on_utc=None if start_s is None else iso(start_s),
        binding_limit=binding.rule if binding else None,
        missing=abs(binding.value - binding.bound) if binding and np.isfinite(binding.value) else None,
        missing_unit=binding.unit if binding else None,
        give_way=tuple(contact_id(s) for s in _give_way(base, session)) if by_battery and not already else (),
        conflicts=tuple(fault.text for fault in faults if not fault.satellite),
        replaces=tuple(contact_id(s) for s in replaced),
        replaced_s=sum(s.duration_s for s in replaced) if replaced else None,
        gained_mbit=trial.total_mbit - flown.total_mbit,
    )


def _placed(candidate: Candidate, duration_s: float, start_s: float) -> Session:
    return candidate.session(float(start_s), float(start_s + duration_s))


def _best_start_s(candidate: Candidate, duration_s: float) -> float:
    """The start that brings a transmission of that length the most volume."""
    starts_s = np.linspace(candidate.opens_s, max(candidate.closes_s - duration_s, candidate.opens_s), 200)
    volume = [candidate.profile.volume_mbit(start_s, start_s + duration_s) for start_s in starts_s]
    return float(starts_s[int(np.argmax(volume))])


def _battery_faults(flown: Flown, satellite: str) -> list[Fault]:
    """Limits of a battery that are broken, those on stored charge first."""
    return sorted((f for f in find_faults(flown) if f.satellite == satellite), key=_charge_first)


def _charge_first(fault: Fault) -> tuple:
    return not fault.satellite, fault.rule != "SoC floor", fault.time_s


def _new_faults(base: Flown, trial: Flown) -> list[Fault]:
    """Rules that the trial breaks and the base did not: the battery's first, and of these those on stored charge."""
    known = {_rule_of(fault) if fault.satellite else fault.text for fault in find_faults(base)}
    new = [fault for fault in find_faults(trial) if (_rule_of(fault) if fault.satellite else fault.text) not in known]
    return sorted(new, key=_charge_first)


def _longest(base: Flown, candidate: Candidate) -> tuple[float, float | None]:
    """The longest transmission that breaks nothing, to the second, and its best start; 0 s and None if none does."""
    shortest, longest = int(np.ceil(candidate.shortest_s)), int(candidate.longest_s) + 1
    if _affordable_start(base, candidate, shortest) is None:
        return 0.0, None
    while longest - shortest > 1:
        middle = (shortest + longest) // 2
        if _affordable_start(base, candidate, middle) is None:
            longest = middle
        else:
            shortest = middle
    return float(shortest), _affordable_start(base, candidate, shortest)


def _affordable_start(base: Flown, candidate: Candidate, duration_s: float) -> float | None:
    """The start, of those tried, that breaks no limit and brings the most; None if every one breaks some."""
    last_s = candidate.closes_s - duration_s
    starts_s = {_best_start_s(candidate, duration_s), *np.linspace(candidate.opens_s, last_s, STARTS).tolist()}
    volume = {s: candidate.profile.volume_mbit(s, s + duration_s) for s in starts_s}
    for start_s in sorted(starts_s, key=lambda s: (-volume[s], s)):
        trial = base.with_session(_placed(candidate, duration_s, start_s))
        if not _new_faults(base, trial):
            return float(start_s)
    return None


def _give_way(base: Flown, session: Session) -> tuple[Session, ...]:
    """The smallest set of accepted contacts without which the session is affordable, least volume lost first.

    None that a rule of the week needs (a daily contact, one that carries commands up) is given up.

    Sets of up to three among the nearest are tried; beyond that contacts are given up nearest first until it fits,
    and those that turn out not to matter are taken back. Empty when giving up contacts does not help.
    """
    own = base.of(session.satellite)
    nearest_first = sorted(own, key=lambda s: abs(s.tx_on_s - session.tx_on_s))[:NEAREST]

    known = {_rule_of(fault) for fault in (*find_faults(base), *find_faults(base.with_session(session)))}

    def fits(gone) -> bool:
        faults = find_faults(base.without(set(gone)).with_session(session))
        return all(not fault.satellite and _rule_of(fault) in known for fault in faults)

    for count in range(1, MOST_GIVEN_UP + 1):
        sets = sorted(
            combinations(nearest_first, count), key=lambda gone: sum(base.volume_mbit.get(s, 0) for s in gone)
        )
        for gone in sets[:100]:
            if fits(gone):
                return tuple(sorted(gone))
    given_up: list[Session] = []
    for other in sorted(own, key=lambda s: abs(s.tx_on_s - session.tx_on_s)):
        given_up.append(other)
        if fits(given_up):
            break
    else:
        return ()
    for other in list(given_up):
        if fits([s for s in given_up if s is not other]):
            given_up.remove(other)
    return tuple(sorted(given_up))


def _rule_of(fault: Fault) -> tuple:
    """What tells a broken rule from another of its kind, whatever its figures."""
    return fault.rule, fault.satellite, None if fault.satellite else fault.session, round(fault.time_s)
