import json

import numpy as np
import pytest
from link_examples import make_mission, make_station, make_transmitter

from planner.errors import InputError
from planner.link import link_budget
from planner.mission.station import Receiver

KEYS = [
    "satellite", "station", "mode", "modcod", "elevation_deg", "availability_pct", "slant_range_km", "eirp_dbw",
    "free_space_loss_db", "atmospheric_loss_db", "system_temperature_k", "gt_dbk", "cn0_dbhz", "ebn0_db", "esn0_db",
    "required_db", "margin_db", "flux_dbw_m2", "flux_limit_dbw_m2", "flux_bandwidth_hz", "lines",
]  # fmt: skip
ROUNDING_DB = 1e-9


@pytest.fixture(scope="module")
def page(day):
    return link_budget(day[0], "Reed Bank", "fixed", elevation_deg=30.0)


def test_the_json_has_every_key_in_order_and_survives_json(page):
    table = json.loads(json.dumps(page.as_dict()))
    assert list(table)[: len(KEYS)] == KEYS
    assert set(table["lines"][0]) == {"item", "value", "unit", "source"}


def test_every_line_names_its_source(page):
    for line in page.lines:
        assert line.item
        assert line.unit
        assert line.source
        assert line.value is None or np.isfinite(line.value)


def test_the_margin_is_what_the_lines_say(page):
    value = {line.item: line.value for line in page.lines}
    assert value["margin"] == page.margin_db
    expected = page.esn0_db - value["implementation loss"] - page.required_db
    assert page.margin_db == pytest.approx(expected, abs=ROUNDING_DB)
    assert page.ebn0_db - value["required Eb/N0"] == pytest.approx(page.esn0_db - page.required_db, abs=ROUNDING_DB)
    losses = ("transmit pointing loss", "polarisation mismatch", "free-space loss", "atmospheric loss",
              "receive pointing loss")  # fmt: skip
    cn0 = value["EIRP"] - sum(value[loss] for loss in losses) + value["G/T"] + 228.599168
    assert page.cn0_dbhz == pytest.approx(cn0, abs=1e-5)


def test_an_elevation_says_that_its_orbit_is_circular(page):
    assert "circular orbit at the mean height of" in str(page)
    assert "not a pass" in str(page)


def test_a_pass_is_budgeted_at_its_highest_moment(day):
    mission, sky = day
    row = int(np.flatnonzero(sky.passes.station == "Reed Bank")[0])
    budget = link_budget(mission, "Reed Bank", "fixed", pass_id=str(sky.passes.pass_id[row]), sky=sky)
    assert budget.elevation_deg == pytest.approx(sky.passes.max_elevation_deg[row], abs=1e-6)
    assert budget.slant_range_km == pytest.approx(sky.passes.tca_range_km[row], abs=1e-6)
    assert "at TCA" in str(budget)


def test_without_a_sky_the_pass_is_found_anew(day):
    mission, sky = day
    own = str(sky.passes.pass_id[int(np.flatnonzero(sky.passes.station == "Reed Bank")[0])])
    with_sky = link_budget(mission, "Reed Bank", "fixed", pass_id=own, sky=sky)
    assert link_budget(mission, "Reed Bank", "fixed", pass_id=own) == with_sky


def test_without_a_modcod_the_fastest_that_keeps_the_margin_is_taken(day):
    mission, _ = day
    high = link_budget(mission, "Reed Bank", "variable", elevation_deg=80.0)
    asked = link_budget(mission, "Reed Bank", "variable", elevation_deg=80.0, modcod="QPSK 1/2")
    assert high.margin_db >= mission.policy.link_margin_db
    assert high.required_db > asked.required_db
    assert asked.modcod == "QPSK 1/2"
    assert high.cn0_dbhz == asked.cn0_dbhz


def test_a_short_margin_is_noted(day):
    low = link_budget(day[0], "Reed Bank", "fixed", elevation_deg=0.0, availability_pct=99.999)
    assert low.margin_db < 0
    assert low.notes[0].startswith("The margin is -")


def test_more_availability_costs_margin(day):
    pages = [
        link_budget(day[0], "Reed Bank", "fixed", elevation_deg=20.0, availability_pct=pct)
        for pct in (50.0, 95.0, 99.0, 99.9, 99.99)
    ]
    margins = [page.margin_db for page in pages]
    assert margins == sorted(margins, reverse=True)
    rain = [next(line.value for line in page.lines if line.item == "rain") for page in pages]
    assert rain[0] == 0.0 < rain[1]


def test_a_loud_transmitter_is_cautioned_and_deferred_to_the_licence(day):
    mission, _ = day
    satellite = mission.satellites[0]
    loud = make_transmitter(rf_power_w=5e3, dc_power_w=1e4)
    craft = satellite.spacecraft.model_copy(update={"transmitter": (loud,)})
    mission = mission.model_copy(update={"satellites": (satellite.model_copy(update={"spacecraft": craft}),)})
    page = link_budget(mission, "Reed Bank", "K", elevation_deg=90.0)
    assert any("CAUTION: the flux density is" in note and "your licence" in note for note in page.notes)


def test_a_band_without_a_limit_says_so_and_low_bands_stand_on_an_upper_bound():
    receiver = Receiver(bands=("UHF",), noise_temperature_k=100.0)
    mission = make_mission([make_transmitter(frequency_mhz=435.0)], [make_station(receiver=(receiver,))])
    page = link_budget(mission, "Reed Bank", "K", elevation_deg=30.0)
    assert page.as_dict()["flux_limit_dbw_m2"] is None
    assert any("No flux-density limit is held for 435 MHz" in note for note in page.notes)
    assert next(line.source for line in page.lines if line.item == "gas").endswith("(at 1 GHz, an upper bound)")


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"station": "Red Bank"}, "station 'Red Bank' is not known; did you mean \"Reed Bank\"?"),
        ({"mode": "fxed"}, "mode 'fxed' is not known on TESTBED; did you mean \"fixed\"?"),
        ({"satellite": "TESTBAD"}, "satellite 'TESTBAD' is not known; did you mean \"TESTBED\"?"),
        ({"modcod": "QPSK 1/2 "}, "modcod 'QPSK 1/2 ' is not known to mode 'fixed'; did you mean \"QPSK 1/2\"?"),
        ({"elevation_deg": -5.0}, "elevation_deg must be 0 to 90, got -5.0"),
        ({"elevation_deg": float("nan")}, "elevation_deg must be 0 to 90, got nan"),
        ({"availability_pct": 100.0}, "availability_pct must be 50 to 99.999, got 100.0"),
        ({"elevation_deg": None}, "give either elevation_deg or pass_id, got neither"),
        ({"pass_id": "x"}, "give either elevation_deg or pass_id, got 30.0 and 'x'"),
    ],
)
def test_wrong_arguments_are_told(day, changes, message):
    arguments = {"station": "Reed Bank", "mode": "fixed", "elevation_deg": 30.0} | changes
    with pytest.raises(InputError) as refused:
        link_budget(day[0], arguments.pop("station"), arguments.pop("mode"), **arguments)
    assert str(refused.value) == message


def test_a_pass_of_another_station_is_told(day):
    mission, sky = day
    own = str(sky.passes.pass_id[int(np.flatnonzero(sky.passes.station == "Deaf Dune")[0])])
    with pytest.raises(InputError, match="is of station 'Deaf Dune', got station 'Reed Bank'"):
        link_budget(mission, "Reed Bank", "fixed", pass_id=own, sky=sky)


def test_an_unknown_pass_is_told_with_some_that_exist(day):
    with pytest.raises(InputError, match=r"pass 'zzz' is not known; known: (.*, ){6}…"):
        link_budget(day[0], "Reed Bank", "fixed", pass_id="zzz", sky=day[1])


def test_a_deaf_station_has_no_budget(day):
    with pytest.raises(InputError, match="mode 'fixed' at station 'Deaf Dune': station does not hear K band"):
        link_budget(day[0], "Deaf Dune", "fixed", elevation_deg=30.0)
