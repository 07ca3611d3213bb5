"""A small invented mission: one satellite, two stations, a day. The attenuation cache is the tests' own."""

import os

import pytest
from link_examples import make_mission, make_station, make_transmitter

from planner.mission.station import Receiver
from planner.sky import observe


@pytest.fixture(autouse=True, scope="session")
def own_cache(tmp_path_factory):
    """Nothing is read from or written to the user's cache."""
    names = ("XDG_CACHE_HOME", "LOCALAPPDATA")
    before = {name: os.environ.get(name) for name in names}
    folder = str(tmp_path_factory.mktemp("cache"))
    os.environ.update(dict.fromkeys(names, folder))
    yield
    for name, value in before.items():
        os.environ.pop(name) if value is None else os.environ.update({name: value})


@pytest.fixture(scope="session")
def day():
    """(mission, sky): three ways to choose a MODCOD at K band, and a deaf station."""
    several = ("QPSK 1/2", "QPSK 3/4", "8PSK 3/4", "16APSK 3/4", "16APSK 8/9")
    transmitters = (
        make_transmitter(mode="fixed"),
        make_transmitter(mode="best", modcods=several, modcod_choice="best for the pass"),
        make_transmitter(mode="variable", modcods=several, modcod_choice="variable", shortest_dwell_s=20.0),
    )
    deaf = Receiver(bands=("S",), noise_temperature_k=150.0)
    stations = (make_station(), make_station(name="Deaf Dune", latitude_deg=35.0, receiver=(deaf,)))
    mission = make_mission(transmitters, stations)
    return mission, observe(mission)
