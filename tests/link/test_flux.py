import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.link.flux import flux_density_dbw_m2, flux_limit, share_in_bandwidth

# ITU Radio Regulations Article 21, Table 21-4 (second-hand copy): dB(W/m2) at 0-5, 15 and 25-90 deg
ROWS = (
    (2245.0, -154.0, -149.0, -144.0, 4e3),
    (8200.0, -150.0, -145.0, -140.0, 4e3),
    (26_000.0, -115.0, -110.0, -105.0, 1e6),
)
HAND_DB = 0.01  # hand calculation with two decimals


@pytest.mark.parametrize(("frequency_mhz", "low", "middle", "high", "bandwidth_hz"), ROWS)
def test_the_limits_of_the_radio_regulations(frequency_mhz, low, middle, high, bandwidth_hz):
    row = flux_limit(frequency_mhz)
    np.testing.assert_allclose(row.at(np.array([0, 5, 15, 25, 90])), [low, low, middle, high, high])
    assert row.bandwidth_hz == bandwidth_hz


def test_a_band_without_a_row_has_no_limit():
    assert flux_limit(435.0).at(20.0) == np.inf


def test_the_flux_of_a_watt_over_a_thousand_kilometres():
    # 1 W over 4 pi (1e6 m)^2: -130.99 dB(W/m2)
    assert flux_density_dbw_m2(0.0, 1000.0) == pytest.approx(-130.99, abs=HAND_DB)
    assert flux_density_dbw_m2(0.0, 2000.0) == pytest.approx(-137.01, abs=HAND_DB)


def test_narrow_windows_take_their_part_of_the_symbol_rate():
    assert share_in_bandwidth(1e6, 40e6, 0.35) == pytest.approx(1 / 40)


def test_windows_as_wide_as_the_signal_take_all_of_it():
    assert share_in_bandwidth(1.35e6, 1e6, 0.35) == 1.0
    assert share_in_bandwidth(1e6, 1e6, 0.0) == 1.0


@given(st.floats(0.01, 3), st.floats(0.01, 1))
def test_the_share_is_the_integral_of_the_raised_cosine(bandwidth, roll_off):
    frequency = np.linspace(0, bandwidth / 2, 20_001)
    flat, edge = (1 - roll_off) / 2, (1 + roll_off) / 2
    ramp = 0.5 * (1 + np.cos(np.pi * (np.clip(frequency, flat, edge) - flat) / roll_off))
    assert share_in_bandwidth(bandwidth, 1.0, roll_off) == pytest.approx(2 * np.trapezoid(ramp, frequency), abs=1e-6)
