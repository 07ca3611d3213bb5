import pytest
from link_examples import make_mission, make_station, make_transmitter

from planner.errors import InputError
from planner.link import check_modes
from planner.mission.pointing import Law


def test_a_sound_mission_passes(day):
    check_modes(day[0])


def test_all_faults_of_all_modes_are_told_at_once():
    mission = make_mission(
        [
            make_transmitter(mode="a", modcods=("QPSK 7/8",)),
            make_transmitter(mode="b", frequency_mhz=60_000.0),
            make_transmitter(mode="c", session_law=Law(law="tumbling")),
        ],
        [make_station()],
    )
    with pytest.raises(InputError) as refused:
        check_modes(mission)
    faults = refused.value.faults
    assert len(faults) == 3
    assert faults[0].startswith("modcod 'QPSK 7/8' is not known to mode 'a'")
    assert faults[1] == (
        "mode 'b': frequency_mhz must not be above 55000 MHz, the end of ITU-R P.618-13's rain model, got 60000"
    )
    assert faults[2].startswith("mode 'c' transmits while the satellite tumbles")
