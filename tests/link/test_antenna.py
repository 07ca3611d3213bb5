import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.errors import InputError
from planner.link.antenna import (
    NO_GAIN_DBI,
    gain_dbi,
    ground_dish,
    half_power_beam_deg,
    peak_gain_dbi,
    pointing_loss_db,
    side_lobe_envelope_dbi,
)
from planner.mission.station import GroundAntenna
from planner.mission.transmitter import (
    CosinePower,
    GainOnly,
    Isotropic,
    MeasuredPattern,
    Parabola,
    ReflectingArray,
)

K_HZ, S_HZ = 26e9, 2.2e9
DISH = Parabola(kind="parabola", diameter_m=3.0, efficiency=0.6)
FLAT = ReflectingArray(kind="flat reflecting array", width_m=0.1, height_m=0.2)
PATCH = CosinePower(kind="patch", gain_dbi=6.0)
PATTERN = MeasuredPattern(kind="measured pattern", file="p.csv", samples=((0.0, 10.0), (20.0, 4.0), (60.0, -5.0)))
EVERY = (DISH, FLAT, PATCH, PATTERN, Isotropic(kind="isotropic"))

HANDBOOK_ROUNDING_DB = 0.05  # tables of dish gains give one decimal
ROUNDING_DB = 1e-9


def test_a_dish_has_its_textbook_gain():
    # eta (pi D / lambda)^2 by hand: 0.6 (pi 3 m / 11.5305 mm)^2 = 400 860
    assert peak_gain_dbi(DISH, K_HZ) == pytest.approx(56.03, abs=HANDBOOK_ROUNDING_DB)


def test_gain_times_beam_squared_does_not_depend_on_size_or_frequency():
    # identity: eta (pi D / lambda)^2 x (70 lambda / D)^2 = eta (70 pi)^2 square degrees
    for diameter_m in (0.1, 1.0, 13.0):
        for frequency_hz in (S_HZ, K_HZ):
            dish = Parabola(kind="parabola", diameter_m=diameter_m, efficiency=0.55)
            product = 10 ** (peak_gain_dbi(dish, frequency_hz) / 10) * half_power_beam_deg(dish, frequency_hz) ** 2
            assert product == pytest.approx(0.55 * (70 * np.pi) ** 2)


@pytest.mark.parametrize("antenna", [DISH, FLAT, PATCH])
def test_the_half_power_beam_is_where_half_the_power_is_left(antenna):
    half_deg = half_power_beam_deg(antenna, K_HZ) / 2
    loss_db = peak_gain_dbi(antenna, K_HZ) - gain_dbi(antenna, half_deg, K_HZ)
    assert loss_db == pytest.approx(3.0, abs=0.011)  # 12 / 4 against 10 log10 2


def test_pointing_loss_is_the_same_whichever_end_transmits():
    ground = ground_dish(GroundAntenna(diameter_m=3.0, efficiency=0.6))
    for error_deg in (0.0, 0.02, 0.1):
        sent, heard = (pointing_loss_db(dish, 0.0, error_deg, K_HZ) for dish in (DISH, ground))
        assert sent == heard
        assert sent == pytest.approx(12 * (error_deg / half_power_beam_deg(DISH, K_HZ)) ** 2, abs=ROUNDING_DB)


def test_an_error_on_top_of_an_off_axis_angle_is_taken_square_to_it():
    narrow_deg = half_power_beam_deg(DISH, K_HZ)
    along = pointing_loss_db(DISH, 0.3 * narrow_deg, 0.1 * narrow_deg, K_HZ)
    assert along == pytest.approx(12 * 0.01, abs=ROUNDING_DB)


@given(st.sampled_from(EVERY), st.floats(0, 180))
def test_no_direction_beats_the_boresight(antenna, off_axis_deg):
    assert gain_dbi(antenna, off_axis_deg, K_HZ) <= peak_gain_dbi(antenna, K_HZ) + ROUNDING_DB


@given(st.sampled_from(EVERY), st.floats(0, 180), st.floats(0, 180))
def test_gain_never_rises_away_from_the_boresight(antenna, a, b):
    near, far = sorted((a, b))
    assert gain_dbi(antenna, far, K_HZ) <= gain_dbi(antenna, near, K_HZ) + ROUNDING_DB


@given(st.sampled_from(EVERY), st.floats(0, 180))
def test_a_scalar_gives_what_a_one_element_array_gives(antenna, off_axis_deg):
    one = gain_dbi(antenna, np.array([off_axis_deg]), K_HZ)[0]
    assert float(gain_dbi(antenna, off_axis_deg, K_HZ)) == pytest.approx(one, abs=ROUNDING_DB)


def test_a_cosine_power_pattern_radiates_what_its_gain_says():
    # the mean of the gain over the sphere is 1 for a lossless antenna; the back lobe adds at most a thousandth
    angle = np.linspace(0, np.pi / 2, 20_001)
    for peak_dbi in (3.5, 6.0, 12.0):
        level = 10 ** (gain_dbi(CosinePower(kind="array", gain_dbi=peak_dbi), np.rad2deg(angle), S_HZ) / 10)
        assert np.trapezoid(level * np.sin(angle), angle) / 2 == pytest.approx(1.0, abs=0.01)


def test_a_wide_dish_has_the_side_lobes_of_the_radio_regulations():
    # Appendix 8 Annex III from memory: 32 - 25 log10(angle) above D/lambda = 100, -10 dBi beyond 48 deg
    assert side_lobe_envelope_dbi(10.0, 260.0) == pytest.approx(7.0)
    assert side_lobe_envelope_dbi(120.0, 260.0) == pytest.approx(-10.0)
    assert gain_dbi(DISH, 10.0, K_HZ) == pytest.approx(7.0)


def test_a_flat_array_has_both_efficiencies_in_its_gain():
    ideal = 4 * np.pi * 0.1 * 0.2 / (299_792_458.0 / K_HZ) ** 2
    assert peak_gain_dbi(FLAT, K_HZ) == pytest.approx(10 * np.log10(0.6 * 0.8 * ideal), abs=ROUNDING_DB)


def test_a_measured_pattern_is_read_between_its_points_and_ends_with_them():
    np.testing.assert_allclose(gain_dbi(PATTERN, [0, 10, 40, 61], S_HZ), [10, 7, -0.5, NO_GAIN_DBI])


def test_a_pattern_without_samples_is_refused_by_file():
    with pytest.raises(InputError, match=r"the file 'x\.csv' has not been read"):
        gain_dbi(MeasuredPattern(kind="measured pattern", file="x.csv"), 0.0, S_HZ)


def test_a_bare_gain_is_refused_off_its_axis():
    bare = GainOnly(kind="gain only", gain_dbi=20.0)
    assert gain_dbi(bare, 0.0, S_HZ) == 20.0
    with pytest.raises(InputError, match=r'"gain only" has no pattern .* got 3\.00 deg off its boresight'):
        gain_dbi(bare, [0.0, 3.0], S_HZ)
