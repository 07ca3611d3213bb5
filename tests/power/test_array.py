"""Panels: maker's figures, geometry, the thermal balance and its published range."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.mission.power import ArrayConversion, Panel
from planner.power.array import (
    bus_power_w,
    lit_share,
    panel_normal,
    panel_power_w,
    panel_temperature_c,
    solar_flux_w_m2,
    tumbling_power_w,
    turned,
)
from planner.units import AU_KM

ROUNDING = 1e-12


def panel(**changes) -> Panel:
    return Panel.model_validate({"name": "wing", "normal": (0.0, 0.0, 1.0), "cell_area_m2": 0.03} | changes)


def test_a_panel_at_28_degrees_gives_area_times_efficiency_times_flux():
    """The definition behind a maker's efficiency (29.8 % at 28 degC, maker's sheet)."""
    power_w = panel_power_w(panel(efficiency=0.298, temperature_sunlit_c=28.0), np.array([1.0]), np.array([1361.0]))
    assert power_w == pytest.approx([0.03 * 0.298 * 1361.0], rel=ROUNDING)


def test_heat_costs_a_quarter_per_cent_a_kelvin():
    """-0.25 %/K for triple-junction cells (from memory): 40 K above the maker's temperature cost a tenth."""
    cold, hot = (
        panel_power_w(panel(temperature_sunlit_c=temperature), np.array([1.0]), np.array([1361.0]))
        for temperature in (28.0, 68.0)
    )
    assert hot / cold == pytest.approx(0.9, rel=ROUNDING)


def test_cells_in_full_sun_run_20_to_60_kelvin_above_28_degrees():
    """Published range for cells in orbit."""
    assert 20 < panel_temperature_c(panel(), np.array([1361.0]))[0] - 28.0 < 60


def test_a_panel_in_the_dark_is_cold():
    assert -80 < panel_temperature_c(panel(), np.array([0.0]))[0] < -40


def test_an_edge_on_or_turned_away_panel_gives_nothing():
    assert panel_power_w(panel(), np.array([0.0, -0.5]), np.array([1361.0, 1361.0])) == pytest.approx([0.0, 0.0])


def test_sunlight_at_one_astronomical_unit_is_the_solar_constant():
    assert solar_flux_w_m2(AU_KM) == 1361.0


def test_sunlight_changes_by_seven_per_cent_over_the_year():
    """Perihelion 0.983 and aphelion 1.017 au (handbook values, from memory): (1.017 / 0.983)^2 = 1.070."""
    swing = solar_flux_w_m2(0.983 * AU_KM) / solar_flux_w_m2(1.017 * AU_KM)
    half_a_per_mille = 5e-4
    assert swing == pytest.approx(1.070, abs=half_a_per_mille)


@pytest.mark.parametrize(
    ("angle_deg", "normal"), [(0, (0, 0, 1)), (90, (0, -1, 0)), (-90, (0, 1, 0)), (180, (0, 0, -1))]
)
def test_a_hinge_turns_the_normal_by_the_right_hand(angle_deg, normal):
    hinged = panel(hinge_axis=(1.0, 0.0, 0.0), hinge_angle_deg=float(angle_deg))
    assert panel_normal(hinged) == pytest.approx(normal, abs=ROUNDING)


@given(st.tuples(*[st.floats(-1, 1)] * 3), st.tuples(*[st.floats(0.1, 1)] * 3), st.floats(-180, 180))
def test_turning_keeps_length_and_the_part_along_the_axis(vector, axis, angle_deg):
    after = turned(vector, axis, angle_deg)
    assert np.linalg.norm(after) == pytest.approx(np.linalg.norm(vector), abs=ROUNDING)
    assert np.dot(after, axis) == pytest.approx(np.dot(vector, axis), abs=ROUNDING)


def test_shading_is_read_from_the_table_over_incidence():
    shaded = panel(shading=((0.0, 1.0), (60.0, 0.5), (90.0, 0.0)))
    cosines = np.cos(np.radians([0.0, 30.0, 60.0, 75.0]))
    assert lit_share(shaded, cosines) == pytest.approx([1.0, 0.75, 0.5, 0.25])


def test_a_tumbling_panel_gives_a_quarter_of_what_it_gives_face_on():
    """A sphere shows a quarter of its surface (mean of the positive cosine), at a fixed temperature."""
    face_on = panel(temperature_sunlit_c=28.0)
    flux = np.array([1361.0, 680.0])
    quarter = panel_power_w(face_on, np.ones(2), flux) / 4
    assert tumbling_power_w(face_on, flux) == pytest.approx(quarter, rel=1e-9)


def test_a_tumbling_panel_is_the_mean_over_random_directions():
    shaded = panel(shading=((0.0, 1.0), (50.0, 1.0), (90.0, 0.2)))
    cosines = np.random.default_rng(5).uniform(-1, 1, 200_000)
    sampled = panel_power_w(shaded, cosines, np.full(200_000, 1361.0)).mean()
    three_sigma_of_the_sample = 0.01
    assert tumbling_power_w(shaded, np.array([1361.0]))[0] == pytest.approx(sampled, rel=three_sigma_of_the_sample)


def test_the_bus_gets_what_tracking_and_converter_leave_up_to_the_cap():
    panels_w = np.array([[10.0, 5.0], [1.0, 0.0]])
    conversion = ArrayConversion(converter_efficiency=0.9, tracking_efficiency=0.95, max_array_w=10.0)
    assert bus_power_w(panels_w, (1.0, 1.0), conversion) == pytest.approx([10.0, 0.855])
    assert bus_power_w(panels_w, (0.9, 0.8), conversion) == pytest.approx([min(10.0, 13 * 0.855), 0.9 * 0.855])


def test_a_cell_better_than_its_absorptivity_does_not_cool_the_panel():
    assert np.isfinite(panel_temperature_c(panel(efficiency=1.0), np.array([1361.0])))[0]
