import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from link_examples import make_station, make_transmitter

from planner.errors import InputError
from planner.link.atmosphere import Attenuation
from planner.link.budget import (
    asked_unavailability_pct,
    budget_at,
    budget_lines,
    cannot_hear,
    carrier_to_noise_density_dbhz,
)
from planner.link.coding import esn0_db_of
from planner.link.geometry import Geometry, free_space_loss_db
from planner.mission.station import GroundAntenna, Receiver
from planner.mission.transmitter import Isotropic

PRINTED_DB = 0.1  # the published pages give one decimal, summed over several lines
ROUNDING_DB = 1e-9
A_TENTH_OF_A_KELVIN = 0.1


def geometry(**changes) -> Geometry:
    table = {
        "elevation_deg": 30.0,
        "slant_range_km": 1000.0,
        "off_axis_deg": 0.0,
        "range_rate_km_s": 5.0,
        "sun_separation_deg": 180.0,
        "element_error_deg": 0.0,
    }
    return Geometry(**{name: np.atleast_1d(value).astype(float) for name, value in (table | changes).items()})


def air(gas=0.0, cloud=0.0, rain=0.0, scintillation=0.0) -> Attenuation:
    return Attenuation(*(np.atleast_1d(part).astype(float) for part in (gas, cloud, rain, scintillation)))


def test_the_emwin_uplink_and_downlink_close_as_published():
    # US NWS, EMWIN-N link budget page: 41 127 km; up 2034.7 MHz, down 1692.7 MHz
    up_db, down_db = (free_space_loss_db(41_127, frequency_hz) for frequency_hz in (2034.7e6, 1692.7e6))
    assert up_db == pytest.approx(190.9, abs=PRINTED_DB)
    assert down_db == pytest.approx(189.3, abs=PRINTED_DB)
    up = carrier_to_noise_density_dbhz(76.7 - 30, 0.5 + up_db + 0.4 + 0.2, -14.2)
    down = carrier_to_noise_density_dbhz(44.8 - 30, down_db + 0.4 + 0.2, -0.3)
    assert up == pytest.approx(69.1, abs=PRINTED_DB)
    assert down == pytest.approx(53.2, abs=PRINTED_DB)
    both = -10 * np.log10(10 ** (-up / 10) + 10 ** (-down / 10))
    assert both == pytest.approx(53.1, abs=PRINTED_DB)
    ebn0_db = esn0_db_of(both, 9600e-6)
    assert ebn0_db == pytest.approx(13.3, abs=PRINTED_DB)
    assert ebn0_db - (2.6 + 2.0 + 1.0) == pytest.approx(7.7, abs=PRINTED_DB)


def test_the_emwin_downlink_through_every_line_of_the_budget():
    # the same page; 0.4 dB of gas, a stated G/T of -0.3 dB/K, 0.2 dB of polarisation by an axial ratio of 3.78 dB
    mode = make_transmitter(
        frequency_mhz=1692.7,
        rf_power_w=10**1.48,
        dc_power_w=100.0,
        antenna=Isotropic(kind="isotropic"),
        axial_ratio_db=3.78,
        symbol_rate_mbaud=0.0096,
    )
    receiver = Receiver(bands=("L",), gt_dbk=-0.3)
    station = make_station(receiver=(receiver,), antenna=GroundAntenna(diameter_m=1.8, efficiency=0.5))
    lines = budget_lines(mode, station, geometry(slant_range_km=41_127), air(gas=0.4), clear_zenith_gas_db=0.4)
    assert lines.polarisation_loss_db == pytest.approx(0.2, abs=PRINTED_DB / 10)
    assert lines.eirp_dbw == pytest.approx(14.8, abs=ROUNDING_DB)
    assert lines.cn0_dbhz[0] == pytest.approx(53.2, abs=PRINTED_DB)
    assert lines.esn0_db[0] == pytest.approx(53.2 - 39.8, abs=PRINTED_DB)


def test_the_fcc_filing_closes_as_published():
    # SAT-LOA-20070105-00002: 12.691 GHz, EIRP 13.0 - 5.7 + 16.7 dBW, free space 206.3, other 1.0, G/T 36.7;
    # the bandwidth is not printed, 1 MHz closes it
    cn0 = carrier_to_noise_density_dbhz(13.0 - 5.7 + 16.7, 206.3 + 1.0, 36.7)
    assert cn0 - 60 == pytest.approx(22.0, abs=PRINTED_DB)
    assert cn0 - 60 - 9.0 == pytest.approx(13.0, abs=PRINTED_DB)


def test_every_line_adds_up():
    mode = make_transmitter(line_loss_db=1.5, axial_ratio_db=2.0, pointing_error_deg=1.0)
    station = make_station(antenna=GroundAntenna(diameter_m=3.0, pointing_error_deg=0.05, axial_ratio_db=1.0))
    lines = budget_lines(mode, station, geometry(off_axis_deg=2.0), air(1.0, 2.0, 6.0, 3.0), 0.5)
    assert lines.eirp_dbw == pytest.approx(0.0 - 1.5 + lines.transmit_gain_dbi)
    expected = (
        lines.eirp_dbw
        - lines.transmit_pointing_loss_db
        - lines.polarisation_loss_db
        - lines.free_space_loss_db
        - (1 + np.hypot(8, 3))
        - lines.receive_pointing_loss_db
        + lines.receive_gain_dbi
        - 10 * np.log10(lines.system_temperature_k)
        + 228.5992  # 1.380649e-23 J/K
    )
    assert lines.cn0_dbhz == pytest.approx(expected, abs=1e-4)
    assert lines.esn0_db == pytest.approx(lines.cn0_dbhz - 10 * np.log10(20e6))
    for loss in (lines.transmit_pointing_loss_db, lines.receive_pointing_loss_db, lines.polarisation_loss_db):
        assert loss > 0


@given(st.floats(0, 40), st.floats(0, 40))
def test_rain_costs_its_attenuation_and_its_noise(a, b):
    mode, station = make_transmitter(), make_station()
    light, heavy = (budget_lines(mode, station, geometry(), air(rain=rain), 0.5) for rain in sorted((a, b)))
    fall_db = light.cn0_dbhz[0] - heavy.cn0_dbhz[0]
    assert fall_db >= abs(a - b) - ROUNDING_DB
    assert heavy.system_temperature_k[0] >= light.system_temperature_k[0] - ROUNDING_DB


def test_without_air_the_noise_is_the_background_the_ground_and_the_receiver():
    # cosmic 2.7 K, spillover 10 K, feed of 0.3 dB: 290 x 0.0715 + 150 x 1.0715 = 181.5 K
    lines = budget_lines(make_transmitter(), make_station(), geometry(), air(), 0.5)
    assert lines.sky_temperature_k[0] == pytest.approx(2.7, abs=A_TENTH_OF_A_KELVIN)
    assert lines.system_temperature_k[0] == pytest.approx(2.7 + 10 + 181.5, abs=A_TENTH_OF_A_KELVIN)


def test_scintillation_makes_no_noise():
    calm, rough = (
        budget_lines(make_transmitter(), make_station(), geometry(), air(scintillation=s), 0.5) for s in (0, 3)
    )
    assert rough.system_temperature_k == calm.system_temperature_k
    assert calm.cn0_dbhz - rough.cn0_dbhz == pytest.approx(3.0)


def test_the_sun_in_the_beam_is_heard():
    away, inside = (
        budget_lines(make_transmitter(), make_station(), geometry(sun_separation_deg=angle), air(), 0.5)
        for angle in (90.0, 0.0)
    )
    assert inside.system_temperature_k[0] > 5 * away.system_temperature_k[0]


def test_the_mounts_error_and_the_elements_age_are_square_to_each_other():
    station = make_station(antenna=GroundAntenna(diameter_m=3.0, pointing_error_deg=0.03))
    both = budget_lines(make_transmitter(), station, geometry(element_error_deg=0.04), air(), 0.5)
    beam_deg = 70 * 299_792_458 / 26e9 / 3.0
    assert both.receive_pointing_loss_db[0] == pytest.approx(12 * (0.05 / beam_deg) ** 2)


def test_a_dish_that_follows_the_signal_pays_nothing_for_old_elements():
    station = make_station(antenna=GroundAntenna(diameter_m=3.0, pointing_error_deg=0.03, autotrack=True))
    old, new = (
        budget_lines(make_transmitter(), station, geometry(element_error_deg=error), air(), 0.5) for error in (5.0, 0.0)
    )
    assert old.receive_pointing_loss_db == new.receive_pointing_loss_db > 0


def test_flux_is_on_a_clear_path_and_without_pointing_loss():
    wet = budget_lines(make_transmitter(pointing_error_deg=2.0), make_station(), geometry(), air(rain=30.0), 0.5)
    dry = budget_lines(make_transmitter(), make_station(), geometry(), air(), 0.5)
    assert wet.flux_dbw_m2 == dry.flux_dbw_m2
    # EIRP over 4 pi (1e6 m)^2 and 1 MHz of 20 Mbaud
    assert dry.flux_dbw_m2 == pytest.approx(dry.eirp_dbw - 130.992 - 13.010, abs=0.001)
    assert (dry.flux_limit_dbw_m2, dry.flux_bandwidth_hz) == (-105.0, 1e6)


def test_an_array_gives_what_each_sample_gives():
    mode, station = make_transmitter(), make_station()
    ranges, rains = np.array([800.0, 1500.0, 2400.0]), np.array([0.0, 3.0, 20.0])
    together = budget_lines(mode, station, geometry(slant_range_km=ranges), air(rain=rains), 0.5)
    for k in range(3):
        alone = budget_lines(mode, station, geometry(slant_range_km=ranges[k]), air(rain=rains[k]), 0.5)
        assert together.cn0_dbhz[k] == pytest.approx(alone.cn0_dbhz[0], abs=ROUNDING_DB)


def test_several_percentiles_at_once_are_each_alone():
    mode, station, place = make_transmitter(), make_station(), geometry(elevation_deg=[10.0, 40.0])
    together = budget_at(mode, station, place, (1.0,), (0.01, 10.0))
    assert together.esn0_db.shape == (3, 2)
    for k, pct in enumerate((1.0, 0.01, 10.0)):
        np.testing.assert_allclose(together.esn0_db[k], budget_at(mode, station, place, (pct,)).esn0_db[0])


def test_a_deaf_station_says_so():
    assert cannot_hear(make_transmitter(), make_station()) == ""
    assert cannot_hear(make_transmitter(frequency_mhz=435.0), make_station()) == "station does not hear UHF band"
    linear = make_station(antenna=GroundAntenna(diameter_m=3.0, polarisations=("LHCP",)))
    assert cannot_hear(make_transmitter(), linear) == "station receives LHCP, the mode sends RHCP"
    with pytest.raises(InputError, match="mode 'K' at station 'Reed Bank': station receives LHCP"):
        budget_at(make_transmitter(), linear, geometry(), (1.0,))


def test_a_frequency_beyond_the_models_is_told_with_mode_and_station():
    receiver = Receiver(bands=("V",), noise_temperature_k=500.0)
    with pytest.raises(
        InputError, match=r"mode 'K' at station 'Reed Bank': frequency must be 1 to 55 GHz .* got 60 GHz"
    ):
        budget_at(make_transmitter(frequency_mhz=60_000.0), make_station(receiver=(receiver,)), geometry(), (1.0,))


def test_unavailability_has_no_dust():
    assert asked_unavailability_pct(99.9) == 0.1
    assert asked_unavailability_pct(99.99) == 0.01
