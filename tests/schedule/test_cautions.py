"""What is allowed in a mission's files and yet warned of."""

from datetime import timedelta

import pytest
from small_missions import smaller, with_craft

import planner
from planner.errors import NoWeekError
from planner.schedule.cautions import input_cautions


def with_elements(mission, **changes):
    satellites = tuple(
        one.model_copy(update={"elements": one.elements.model_copy(update=changes)}) for one in mission.satellites
    )
    return mission.model_copy(update={"satellites": satellites})


def with_battery(mission, **changes):
    return with_craft(mission, lambda craft: {"battery": craft.battery.model_copy(update=changes)})


def test_the_demo_is_warned_of_nothing(marshlight):
    assert input_cautions(marshlight) == []


def test_newer_elements_that_are_not_used(marshlight):
    [caution] = input_cautions(with_elements(marshlight, newer_epoch=marshlight.start + timedelta(days=2)))
    assert caution == (
        "MARSHLIGHT-1: elements of 2026-12-06T18:00:00Z are used; those of 2026-12-09T00:00:00Z in the same file are"
        " newer than the start: leave only them in the file to plan with them."
    )


def test_commands_that_ended_before_the_start(marshlight):
    late = marshlight.model_copy(update={"start": marshlight.start + timedelta(days=2)})
    [caution] = input_cautions(late)
    assert caution.startswith("MARSHLIGHT-1: start_state.commands_aboard_until = 2026-12-08T00:00:00Z is not after the")
    assert input_cautions(late.with_changes(policy={"upload_lead_h": None})) == []


@pytest.mark.parametrize("changes", [{"frequency_mhz": 8200.0}, {"polarisation": "vertical"}])
def test_a_mode_that_no_station_hears(marshlight, changes):
    def deaf(antenna):
        return antenna.model_copy(update={"polarisations": ("horizontal",)})

    stations = tuple(one.model_copy(update={"antenna": deaf(one.antenna)}) for one in marshlight.stations)
    mission = with_craft(
        marshlight if "frequency_mhz" in changes else marshlight.model_copy(update={"stations": stations}),
        lambda craft: {"transmitter": (craft.transmitter[0].model_copy(update=changes), *craft.transmitter[1:])},
    )
    [caution] = input_cautions(mission)
    assert caution.startswith("MARSHLIGHT-1: mode 'K high rate' is never used: no station hears ")


def test_a_charger_that_stops_early_is_told_where_the_week_fails(marshlight):
    """A layered-oxide cell at 3.5 V is nearly empty: the upper voltage of the other chemistry was left in."""
    mission = with_battery(smaller(marshlight, 1, "Vardholm"), chemistry="Li-ion", cell_max_v=3.5)
    [caution] = input_cautions(mission)
    assert caution.startswith("battery.cell_max_v = 3.5 ends the charge of this Li-ion cell at ")
    with pytest.raises(NoWeekError) as told:
        planner.plan_week(mission)
    assert str(told.value).splitlines()[-1] == caution


def test_per_cents_that_look_like_shares(marshlight):
    mission = marshlight.with_changes(policy={"soc_floor_pct": 0.65}, start_state={"soc_pct": 0.9})
    assert input_cautions(mission) == [
        "policy.soc_floor_pct = 0.65 means 0.65 %: was 65 meant?",
        "start_state.soc_pct = 0.9 means 0.9 %: was 90 meant?",
    ]


def test_a_plan_carries_the_cautions(two_day_mission, two_day_plan):
    assert set(input_cautions(two_day_mission)) <= set(two_day_plan.summary["cautions"])
