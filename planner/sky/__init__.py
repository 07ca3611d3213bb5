"""Where everything is: tracks, the Sun, passes, attitudes."""

from collections.abc import Callable
from dataclasses import dataclass

from planner.mission.models import Mission
from planner.sky.clock import Clock
from planner.sky.fleet import observe_fleet
from planner.sky.passes import Passes
from planner.sky.samples import Samples, sample_passes
from planner.sky.track import Track


@dataclass(frozen=True, eq=False)
class Sky:
    """What there is to see in a mission's span. `tracks` are in the order of the mission's satellites."""

    clock: Clock
    tracks: tuple[Track, ...]
    passes: Passes
    samples: Samples

    def track(self, satellite: str) -> Track:
        """The track of the satellite of that name; KeyError otherwise."""
        return {track.satellite: track for track in self.tracks}[satellite]


def observe(
    mission: Mission, *, sample_step_s: float = 10.0, progress: Callable[[int, int], None] | None = None
) -> Sky:
    """Every satellite's track, every pass, and the samples of each pass at most `sample_step_s` apart.

    `progress(done, total)` is called after each satellite.
    """
    clock = Clock(mission.start, mission.span_s)
    tracks, passes = observe_fleet(clock, mission.satellites, mission.stations, progress=progress)
    samples = sample_passes(clock, tracks, mission.stations, passes, sample_step_s)
    return Sky(clock, tracks, passes, samples)
