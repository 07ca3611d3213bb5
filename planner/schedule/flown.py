"""A set of sessions with everything that follows from it under the full physics."""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from planner.data.recorder import RecorderSeries, simulate_recorder
from planner.data.volume import Profile
from planner.mission.contacts import Session
from planner.mission.models import Satellite
from planner.power.batch import Batch, Share, share_of
from planner.power.limits import Breach
from planner.power.series import BatterySeries
from planner.schedule.uplinks import NOTHING_YET, Aboard
from planner.schedule.week import Week

RISKED_LIMITS = ("SoC floor", "end-of-span SoC")  # what policy.floor_risk_pct speaks of
CHARGE_LIMITS = (*RISKED_LIMITS, "depth of discharge")


@dataclass(frozen=True, eq=False)
class Flown:
    """Sessions in order of time, whoever chose them; nothing but their passes, modes and times is taken as given."""

    week: Week
    sessions: tuple[Session, ...]
    aboard: Aboard = NOTHING_YET

    def of(self, satellite: str) -> tuple[Session, ...]:
        return tuple(session for session in self.sessions if session.satellite == satellite)

    @cached_property
    def worst(self) -> dict[str, BatterySeries]:
        """Battery at the pessimistic corner, by satellite."""
        return {name: power.simulate(self.of(name), "pessimistic") for name, power in self.week.powers.items()}

    @cached_property
    def nominal(self) -> dict[str, BatterySeries]:
        return {name: power.simulate(self.of(name), "nominal") for name, power in self.week.powers.items()}

    @property
    def judged(self) -> dict[str, BatterySeries]:
        """Battery at the corner that limits are held to; nominal where the policy asks for a probability of charge."""
        return self.worst if self.week.mission.policy.floor_risk_pct is None else self.nominal

    @cached_property
    def spread(self) -> dict[str, Batch]:
        """Weeks spread about nominal, by satellite."""
        return {name: power.perturbed(self.of(name)) for name, power in self.week.powers.items()}

    def short_pct(self, satellite: str) -> np.ndarray:
        """What each spread week is short of floor or end charge [% of charge], negative where some is to spare."""
        policy, batch = self.week.mission.policy, self.spread[satellite]
        return np.maximum(policy.soc_floor_pct - batch.soc_min_pct, policy.soc_end_pct - batch.soc_end_pct)

    def risk(self, satellite: str) -> Share:
        """Probability that the week breaks its floor or end charge, with its 95 % interval."""
        short_pct = self.short_pct(satellite)
        return share_of(int(np.sum(short_pct > 0)), len(short_pct))

    def breaches(self, satellite: str) -> list[Breach]:
        """Limits of battery and bus that break at the pessimistic corner; where the policy asks for a probability
        instead, charge by that probability and the rest at nominal."""
        policy = self.week.mission.policy
        found = list(self.judged[satellite].breaches(policy))
        if policy.floor_risk_pct is None:
            return found
        kept = [breach for breach in found if breach.limit not in RISKED_LIMITS]
        high_pct = 100 * self.risk(satellite).high
        if high_pct > policy.floor_risk_pct:
            kept.append(Breach("floor risk", 0.0, high_pct, policy.floor_risk_pct, "%"))
        return kept

    @cached_property
    def coding(self) -> dict[Session, Profile]:
        """The way of coding that brings each session most; sessions on no known pass are left out."""
        known = [s for s in self.sessions if (self.week.row_of.get(s.pass_id), s.mode) in self.week.place_of]
        return {session: self._best_profile(session) for session in known}

    def _best_profile(self, session: Session) -> Profile:
        profiles = self.week.profiles(self.week.row_of[session.pass_id], session.mode)
        return max(profiles, key=lambda profile: profile.volume_mbit(session.tx_on_s, session.tx_off_s))

    @cached_property
    def recorder(self) -> dict[str, RecorderSeries]:
        """Storage through the span, by satellite, all data classes together."""
        return {satellite.name: self._stored(satellite, None) for satellite in self.week.mission.satellites}

    def heaviest(self, satellite: Satellite) -> list[RecorderSeries]:
        """Storage of the heaviest class, of the two heaviest, … of all.

        Heavier classes are sent first and never give way, so the heaviest few fare as if there were no others.
        """
        count = len(satellite.spacecraft.recorder.classes)
        return [self._stored(satellite, lightest) for lightest in range(count - 1)] + [self.recorder[satellite.name]]

    def _stored(self, satellite: Satellite, lightest: int | None) -> RecorderSeries:
        """Storage of the classes down to `lightest`; what is stored at the start is of the lightest class of all."""
        produced = self.week.produced[satellite.name]
        return simulate_recorder(
            satellite.start_state.stored_mbit if lightest is None else 0.0,
            satellite.spacecraft.recorder.usable_mbit,
            self.week.mission.span_s,
            [rates for own, rates in produced if lightest is None or own <= lightest],
            [self._offer(session) for session in self.of(satellite.name) if session in self.coding],
        )

    def _offer(self, session: Session):
        return self.coding[session].delivery(session.tx_on_s, session.tx_off_s)

    @cached_property
    def volume_mbit(self) -> dict[Session, float]:
        """What each session delivers: what the link offers, or its share of what is stored where that is less."""
        return {session: self._delivered_mbit(session) for session in self.coding}

    def _delivered_mbit(self, session: Session) -> float:
        series = self.recorder[session.satellite]
        edges_s, rate_mbps = self._offer(session)
        grid_s = np.union1d(edges_s, series.time_s[(series.time_s > edges_s[0]) & (series.time_s < edges_s[-1])])
        offered_sum = np.concatenate([[0.0], np.cumsum(rate_mbps * np.diff(edges_s))])
        own_mbit = np.diff(np.interp(grid_s, edges_s, offered_sum))
        all_mbit = own_mbit + sum(
            (np.diff(self._offered_at(other, grid_s)) for other in self._beside(session)), np.zeros(len(own_mbit))
        )
        taken_mbit = np.diff(np.interp(grid_s, series.time_s, series.delivered_mbit))
        share = np.divide(own_mbit, all_mbit, out=np.zeros_like(own_mbit), where=all_mbit > 0)
        return float(np.minimum(taken_mbit * share, own_mbit).sum())

    def _beside(self, session: Session) -> list[Session]:
        return [
            other
            for other in self.of(session.satellite)
            if other is not session
            and other in self.coding
            and other.tx_on_s < session.tx_off_s
            and other.tx_off_s > session.tx_on_s
        ]

    def _offered_at(self, session: Session, time_s: np.ndarray) -> np.ndarray:
        edges_s, rate_mbps = self._offer(session)
        return np.interp(time_s, edges_s, np.concatenate([[0.0], np.cumsum(rate_mbps * np.diff(edges_s))]))

    @cached_property
    def mbit_per_wh(self) -> dict[str, list[float]]:
        """What each session delivers for the energy that it adds to the satellite's own, by satellite."""
        draws = {name: power.session_draws(list(self.of(name))) for name, power in self.week.powers.items()}
        return {
            name: [self.volume_mbit[s] / max(d.added_wh, 1e-9) for s, d in zip(self.of(name), own, strict=True)]
            for name, own in draws.items()
        }

    @property
    def total_mbit(self) -> float:
        return float(sum(self.volume_mbit.values()))

    def with_session(self, session: Session) -> "Flown":
        """The same sessions with this one added, in place of one on the same pass in the same mode."""
        others = [s for s in self.sessions if (s.pass_id, s.mode) != (session.pass_id, session.mode)]
        return replace(self, sessions=tuple(sorted([*others, session])))

    def without(self, gone) -> "Flown":
        """The same sessions less those in `gone`."""
        return replace(self, sessions=tuple(session for session in self.sessions if session not in gone))
