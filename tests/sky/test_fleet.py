"""Many satellites, one process or several; and the mission's whole sky."""

from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from sky_examples import FIVE_SITES, clock_of, element_set

from planner.errors import InputError
from planner.mission.files import load_mission
from planner.sky import observe
from planner.sky.fleet import ENOUGH_TO_SHARE, observe_fleet
from planner.sky.passes import find_passes
from planner.sky.sun import sun_position_km, visible_sun_fraction

DEMO = Path(__file__).parents[2] / "missions" / "marshlight.toml"


def fleet(count, **changes):
    return [
        SimpleNamespace(name=f"member {k}", elements=element_set(mean_anomaly_deg=(17.0 * k) % 360, **changes))
        for k in range(count)
    ]


def test_processes_change_nothing():
    clock, told = clock_of(0.5), []
    satellites = fleet(ENOUGH_TO_SHARE)
    shared = observe_fleet(clock, satellites, FIVE_SITES, workers=2, progress=lambda *done: told.append(done))
    alone = observe_fleet(clock, satellites, FIVE_SITES, workers=1)
    assert list(shared[1].pass_id) == list(alone[1].pass_id)
    assert np.array_equal(shared[1].aos_s, alone[1].aos_s)
    assert np.array_equal(shared[0][5].position_km, alone[0][5].position_km)
    assert told == [(k + 1, ENOUGH_TO_SHARE) for k in range(ENOUGH_TO_SHARE)]


def test_every_satellite_that_fails_is_told_at_once():
    satellites = fleet(3) + [
        SimpleNamespace(name=n, elements=element_set(name=n, eccentricity=1.5)) for n in ("a", "b")
    ]
    with pytest.raises(InputError) as caught:
        observe_fleet(clock_of(0.5), satellites, FIVE_SITES)
    assert len(caught.value.faults) == 2
    assert "mean eccentricity is outside the range 0.0 to 1.0" in caught.value.faults[1]


def test_the_demo_missions_sky():
    mission, told = load_mission(DEMO), []
    sky = observe(mission, sample_step_s=20.0, progress=lambda *done: told.append(done))
    assert told == [(1, 1)]
    assert sky.track("MARSHLIGHT-1") is sky.tracks[0]
    assert list(find_passes(sky.clock, sky.tracks, mission.stations).pass_id) == list(sky.passes.pass_id)
    assert len(sky.samples.offsets) == len(sky.passes) + 1
    with pytest.raises(KeyError):
        sky.track("nobody")


def test_the_sunlit_share_of_passes_is_that_of_a_scan():
    mission = load_mission(DEMO)
    sky = observe(mission)
    for k in range(0, len(sky.passes), 7):
        time_s = np.linspace(sky.passes.aos_s[k], sky.passes.los_s[k], 2001)
        visible = visible_sun_fraction(sky.tracks[0].at(time_s)[0], sun_position_km(sky.clock, time_s))
        assert sky.passes.sunlit_fraction[k] == pytest.approx(np.trapezoid(visible, time_s) / np.ptp(time_s), abs=2e-3)
    assert sky.passes.sunlit_s == pytest.approx(sky.passes.sunlit_fraction * sky.passes.duration_s)
