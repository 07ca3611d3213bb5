"""Changed values are checked by the mission's own rules, and nothing but what was asked for changes."""

import pytest
from bench_examples import HIGH, LOW

from planner.errors import InputError
from planner.notebook.changes import Changes


def test_no_change_is_the_mission_itself(mission):
    assert Changes().applied_to(mission) == mission


def test_a_value_is_changed_and_the_rest_is_not(mission):
    changed = Changes().with_value("policy", "soc_floor_pct", 55.0).applied_to(mission)
    assert changed.policy.soc_floor_pct == 55.0
    assert changed.policy.model_copy(update={"soc_floor_pct": mission.policy.soc_floor_pct}) == mission.policy


def test_the_start_charge_is_changed_for_every_satellite(mission):
    changed = Changes().with_value("start_state", "soc_pct", 71.0).applied_to(mission)
    assert {satellite.start_state.soc_pct for satellite in changed.satellites} == {71.0}


@pytest.mark.parametrize(
    ("table", "key", "value", "rule"),
    [
        ("policy", "soc_floor_pct", 130.0, "soc_floor_pct: must be at most 100, got 130.0"),
        ("policy", "soc_floor_pct", 90.0, "soc_end_pct must not be below soc_floor_pct, got 80 and 90"),
        ("policy", "availability_pct", 12.0, "availability_pct: must be at least 50, got 12.0"),
        ("policy", "link_margin_db", float("nan"), "link_margin_db: must be a finite number, got nan"),
        ("start_state", "soc_pct", -1.0, "soc_pct: must be at least 0, got -1.0"),
    ],
)
def test_a_wrong_value_is_refused_with_its_rule(mission, table, key, value, rule):
    with pytest.raises(InputError) as refused:
        Changes().with_value(table, key, value).applied_to(mission)
    assert rule in str(refused.value)


def test_stations_and_modes_go_off(mission):
    off = mission.stations[0].name
    changed = Changes(stations_off=frozenset([off]), modes_off=frozenset([LOW])).applied_to(mission)
    assert [station.name for station in changed.stations] == [station.name for station in mission.stations[1:]]
    (mode,) = changed.satellites[0].spacecraft.transmitter
    assert (mode.mode, mode.together_with) == (HIGH, ())
    assert LOW not in changed.policy.daily_contact_modes


def test_the_last_station_stays_on(mission):
    with pytest.raises(InputError, match="at least one station must stay on, got none"):
        Changes(stations_off=frozenset(station.name for station in mission.stations)).applied_to(mission)


def test_the_last_mode_stays_on(mission):
    with pytest.raises(InputError, match="at least one mode of MARSHLIGHT-1 must stay on, got none"):
        Changes(modes_off=frozenset([HIGH, LOW])).applied_to(mission)
