"""A set of sessions with everything that follows from it under the full physics."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from planner.data.recorder import RecorderSeries, simulate_recorder
from planner.data.volume import Profile
from planner.mission.contacts import Session
from planner.mission.models import Satellite
from planner.power.series import BatterySeries
from planner.schedule.week import Week


@dataclass(frozen=True, eq=False)
class Flown:
    """Sessions in order of time, whoever chose them; nothing but their passes, modes and times is taken as given."""

    week: Week
    sessions: tuple[Session, ...]

    def of(self, satellite: str) -> tuple[Session, ...]:
        return tuple(session for session in self.sessions if session.satellite == satellite)

    @cached_property
    def worst(self) -> dict[str, BatterySeries]:
        """Battery at the pessimistic corner, by satellite."""
        return {name: power.simulate(self.of(name), "pessimistic") for name, power in self.week.powers.items()}

    @cached_property
    def nominal(self) -> dict[str, BatterySeries]:
        return {name: power.simulate(self.of(name), "nominal") for name, power in self.week.powers.items()}

    @cached_property
    def coding(self) -> dict[Session, Profile]:
        """The way of coding that brings each session most; sessions on no known pass are left out."""
        known = [s for s in self.sessions if (self.week.row_of.get(s.pass_id), s.mode) in self.week.place_of]
        return {
            s: max(
                self.week.profiles(self.week.row_of[s.pass_id], s.mode),
                key=lambda profile, s=s: profile.volume_mbit(s.tx_on_s, s.tx_off_s),
            )
            for s in known
        }

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

    @property
    def total_mbit(self) -> float:
        return float(sum(self.volume_mbit.values()))

    def with_session(self, session: Session) -> "Flown":
        """The same sessions with this one added, in place of one on the same pass in the same mode."""
        others = [s for s in self.sessions if (s.pass_id, s.mode) != (session.pass_id, session.mode)]
        return Flown(self.week, tuple(sorted([*others, session])))

    def without(self, gone) -> "Flown":
        """The same sessions less those in `gone`."""
        return Flown(self.week, tuple(session for session in self.sessions if session not in gone))
