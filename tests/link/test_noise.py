import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.errors import InputError
from planner.link.noise import (
    COSMIC_K,
    MEAN_RADIATING_K,
    figure_of_merit_dbk,
    galactic_k,
    quiet_sun_k,
    receiver_temperature_k,
    sky_temperature_k,
    sun_share,
    sun_temperature_k,
    system_temperature_k,
)
from planner.mission.station import GroundAntenna, Receiver

DISH = GroundAntenna(diameter_m=2.8, efficiency=0.6)
K_HZ = 26e9
LAST_BITS = 1e-12  # numpy's vector instructions round powers otherwise than its scalar ones
HAND_K = 0.1  # hand calculations are carried to a tenth of a kelvin


def receiver(**table):
    return Receiver(**{"bands": ("K",), "noise_temperature_k": 100.0} | table)


def test_an_opaque_sky_is_as_warm_as_its_air():
    assert sky_temperature_k(1000.0) == pytest.approx(MEAN_RADIATING_K)


def test_a_transparent_sky_shows_its_background():
    assert sky_temperature_k(0.0) == COSMIC_K
    assert sky_temperature_k(0.0, 40.0) == 40.0


def test_three_decibels_of_rain_by_hand():
    # 275 K x (1 - 10^-0.3) + 2.7 K x 10^-0.3 = 137.2 + 1.4
    assert sky_temperature_k(3.0) == pytest.approx(138.5, abs=HAND_K)


@given(st.floats(0, 60), st.floats(0, 60))
def test_more_attenuation_is_never_cooler(a, b):
    assert sky_temperature_k(max(a, b)) >= sky_temperature_k(min(a, b)) - 1e-9


def test_a_bare_amplifier_is_its_own_temperature():
    assert receiver_temperature_k(receiver()) == pytest.approx(100.0)


def test_friis_cascade_by_hand():
    # feed 1 dB: 290 (1.2589 - 1) = 75.1 K; amplifier 100 K x 1.2589 = 125.9; behind 20 dB: cable 3 dB 288.6 K and
    # 10 dB noise figure 2610 K x 1.9953 = 5207.7, together 5496.3 K x 1.2589 / 100 = 69.2 K
    cascade = receiver(feed_loss_db=1.0, amplifier_gain_db=20.0, cable_loss_db=3.0, following_noise_figure_db=10.0)
    assert receiver_temperature_k(cascade) == pytest.approx(75.1 + 125.9 + 69.2, abs=HAND_K)


def test_a_high_gain_hides_what_follows():
    hidden = receiver(amplifier_gain_db=120.0, cable_loss_db=10.0, following_noise_figure_db=20.0)
    assert receiver_temperature_k(hidden) == pytest.approx(100.0, abs=HAND_K)


def test_the_system_is_the_sum_of_its_parts():
    system_k = system_temperature_k(DISH, receiver(ground_spillover_k=12.0), K_HZ, 60.0, 20.0, 5.0)
    assert system_k == pytest.approx(60 + 12 + 5 + 100)


def test_a_stated_figure_of_merit_holds_in_clear_sky_and_falls_by_what_rain_adds():
    stated = receiver(noise_temperature_k=None, gt_dbk=30.0)
    clear = system_temperature_k(DISH, stated, K_HZ, 20.0, 20.0)
    wet = system_temperature_k(DISH, stated, K_HZ, 220.0, 20.0)
    gain = 10 * np.log10(0.6 * (np.pi * 2.8 / 0.0115305) ** 2)
    assert figure_of_merit_dbk(gain, clear) == pytest.approx(30.0, abs=0.001)
    assert wet - clear == pytest.approx(200.0)


def test_a_figure_of_merit_beyond_the_dish_is_refused():
    with pytest.raises(InputError, match=r"gt_dbk must be one that the dish can reach: 60 dB/K with 2\.8 m"):
        system_temperature_k(DISH, receiver(noise_temperature_k=None, gt_dbk=60.0), K_HZ, 20.0, 20.0)


def test_the_quiet_sun_at_eight_millimetres():
    assert quiet_sun_k(37e9) == pytest.approx(8100, abs=300)  # Metsaehovi, as published


def test_a_beam_narrower_than_the_sun_is_filled():
    # 13 m at 26 GHz: a beam of 0.06 deg against a disc of 0.53 deg; only the beam's own share of reception is missing
    wide = GroundAntenna(diameter_m=13.0, efficiency=0.6)
    efficiency = 0.6 * (70 * np.pi) ** 2 * np.deg2rad(1) ** 2 / (16 * np.log(2))
    assert sun_share(wide, K_HZ, 0.0) == pytest.approx(efficiency, abs=1e-6)


def test_an_absurdly_wide_dish_still_gives_a_share():
    huge = GroundAntenna(diameter_m=1e9)
    inside, outside = sun_share(huge, K_HZ, np.array([0.2, 0.3]))
    assert inside == 1.0
    assert 0 < outside < 1


def test_a_wide_beam_sees_the_sun_as_a_point():
    # the disc's solid angle times gain over 4 pi
    small = GroundAntenna(diameter_m=0.5, efficiency=0.6)
    disc_sr = np.pi * np.deg2rad(0.265) ** 2
    gain = 0.6 * (np.pi * 0.5 / 0.13627) ** 2
    assert sun_share(small, 2.2e9, 0.0) == pytest.approx(gain * disc_sr / (4 * np.pi), rel=0.002)


def test_the_sun_fades_away_from_the_axis_and_behind_rain():
    near, far = sun_temperature_k(DISH, K_HZ, np.array([0.0, 20.0]), 0.0)
    assert near > 1000 > 100 > far > 0
    assert sun_temperature_k(DISH, K_HZ, 0.0, 10.0) == pytest.approx(near / 10)


@given(st.floats(0, 180))
def test_the_share_of_the_sun_is_a_share_and_a_scalar_a_one_element_array(separation_deg):
    share = sun_share(DISH, K_HZ, separation_deg)
    assert 0 <= share <= 1
    assert share == pytest.approx(sun_share(DISH, K_HZ, np.array([separation_deg]))[0], rel=LAST_BITS)


def test_the_galaxy_matters_below_a_gigahertz_only():
    # ITU-R P.372, Fam = 52 - 23 log10(f/MHz) (from memory): 290 K x 10^0.29 at 137 MHz
    assert galactic_k(137e6) == pytest.approx(560, abs=15)
    assert galactic_k(26e9) < 0.01
