"""Everything to the left of the schedule, computed once: geometry, links, power, storage."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from planner.data.recorder import Rates
from planner.data.volume import Profile
from planner.errors import InputError
from planner.link.table import LinkTable, link_table
from planner.mission.contacts import Session
from planner.mission.models import Mission, Satellite
from planner.power.balance import SatellitePower
from planner.power.batch import share_of
from planner.schedule.hours import Windows, open_hours_s, open_windows_s
from planner.schedule.programme import start_worker
from planner.sky import Sky, observe

SAMPLE_STEP_S = 5.0
REACH_S = 1800.0  # tracks go on for a revolution and more beyond the span; slews and cool-down need room too
MOST_LINKS = 6_000  # passes x modes: their links, sampled, and the tables of 60 days fill some 1 GB
Progress = Callable[[str], None]


@dataclass(frozen=True, eq=False)
class Week:
    """A mission and what follows from it without any session.

    `links` by (satellite, mode), `powers` by satellite, `profiles` by (row of the pass, mode).
    """

    mission: Mission
    sky: Sky
    links: dict[tuple[str, str], LinkTable]
    powers: dict[str, SatellitePower]

    @cached_property
    def row_of(self) -> dict[str, int]:
        """Row of each pass id in `sky.passes`."""
        return {pass_id: row for row, pass_id in enumerate(self.sky.passes.pass_id)}

    @cached_property
    def place_of(self) -> dict[tuple[int, str], tuple[LinkTable, int]]:
        """(row of the pass, mode) -> its link table and its place there."""
        return {
            (int(row), mode): (table, place)
            for (_, mode), table in self.links.items()
            for place, row in enumerate(table.pass_rows)
        }

    @cached_property
    def open_s(self) -> dict[str, Windows]:
        """Open windows of each station."""
        return {station.name: open_windows_s(self.mission, station) for station in self.mission.stations}

    @cached_property
    def shifts_s(self) -> Windows:
        """When operators are there."""
        return open_hours_s(self.mission, self.mission.policy.shifts)

    @cached_property
    def produced(self) -> dict[str, list[tuple[int, Rates]]]:
        """What each satellite's payloads record: (place of its data class, rates)."""
        return {
            satellite.name: _production(satellite, self.powers[satellite.name]) for satellite in self.mission.satellites
        }

    def reaches(self, session: Session) -> bool:
        """Whether a session lies in the span, or so little beyond it that the orbit is known there."""
        return session.tx_on_s >= -REACH_S and session.tx_off_s <= self.mission.span_s + REACH_S

    def profiles(self, row: int, mode: str) -> list[Profile]:
        """The ways of coding `mode` on the pass of `row`."""
        table, place = self.place_of[row, mode]
        at = slice(table.offsets[place], table.offsets[place + 1])
        transmitter = self.mission.satellite(table.satellite).spacecraft.mode(mode)
        return [
            Profile(
                label=option.label,
                names=table.names,
                time_s=table.time_s[at],
                usable=option.usable[at],
                rate_mbps=option.rate_mbps[at],
                expected_rate_mbps=option.expected_rate_mbps[at],
                margin_db=option.margin_db[at],
                modcod=option.modcod[at],
                acquisition_s=transmitter.acquisition_s,
                change_s=transmitter.modcod_change_s,
            )
            for option in table.options
        ]

    def along(self, row: int, mode: str, column: str, begin_s: float, end_s: float) -> np.ndarray:
        """A column of the link table from `begin_s` to `end_s` of a pass, both ends interpolated."""
        table, place = self.place_of[row, mode]
        at = slice(table.offsets[place], table.offsets[place + 1])
        time_s, values = table.time_s[at], getattr(table, column)[at]
        inside = (time_s > begin_s) & (time_s < end_s)
        return np.concatenate([np.interp([begin_s, end_s], time_s, values), values[inside]])


def prepare(mission: Mission, *, progress: Progress = lambda stage: None) -> Week:
    """Compute passes, links and power of a mission; `progress` hears the name of each stage as it begins."""
    _check_risk(mission)
    start_worker()
    progress("passes")
    sky = observe(mission, sample_step_s=SAMPLE_STEP_S)
    _check_size(mission, sky)
    links, powers = {}, {}
    for satellite in mission.satellites:
        progress(f"links of {satellite.name}")
        for transmitter in satellite.spacecraft.transmitter:
            links[satellite.name, transmitter.mode] = link_table(mission, sky, satellite.name, transmitter.mode)
        progress(f"power of {satellite.name}")
        powers[satellite.name] = SatellitePower(mission, sky, satellite.name)
    return Week(mission, sky, links, powers)


def _check_risk(mission: Mission) -> None:
    """InputError for a risk so small that the spread weeks cannot show it."""
    allowed_pct = mission.policy.floor_risk_pct
    samples = min(satellite.spacecraft.spread.samples for satellite in mission.satellites)
    least_pct = 100 * share_of(0, samples).high
    if allowed_pct is not None and allowed_pct < least_pct:
        raise InputError(
            f"{mission.name}: policy.floor_risk_pct must be at least {least_pct:.3f} with spread.samples = {samples}:"
            f" so much may still be when not one of them breaks; got {allowed_pct:g}, ask for more samples or more risk"
        )


def _check_size(mission: Mission, sky: Sky) -> None:
    """InputError for more links than memory holds."""
    modes = max(len(satellite.spacecraft.transmitter) for satellite in mission.satellites)
    if len(sky.passes) * modes > MOST_LINKS:
        raise InputError(
            f"{mission.name}: passes x modes must be at most {MOST_LINKS} to be planned at once,"
            f" got {len(sky.passes)} x {modes}; plan fewer days, stations or satellites"
        )


def _production(satellite: Satellite, power: SatellitePower) -> list[tuple[int, Rates]]:
    """(data class, rates): payloads record at their duty-cycled rate in sunlight, eclipse, windows, or always."""
    idle, recorder = power.idle("nominal"), satellite.spacecraft.recorder
    start = power.mission.start
    share = {"always": np.ones_like(idle.visible_sun), "sunlit": idle.visible_sun, "eclipse": 1 - idle.visible_sun}
    rates = []
    for source in recorder.source:
        own, rate_mbps = recorder.class_index(source), source.rate_mbps * source.duty
        if source.when == "windows":
            spans = [[(moment - start).total_seconds() for moment in window] for window in source.windows]
            rates += [(own, (np.array(span_s), np.array([rate_mbps]))) for span_s in spans]
        else:
            rates.append((own, (idle.edges_s, rate_mbps * share[source.when])))
    return rates
