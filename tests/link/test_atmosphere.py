import subprocess
import sys

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.errors import InputError
from planner.link.atmosphere import (
    Attenuation,
    Site,
    cloud_attenuation_db,
    gas_attenuation_db,
    path_factor,
    rain_attenuation_db,
    rain_rate_exceeded_mm_h,
    scintillation_db,
    total_attenuation_db,
)

# Where ITU-R P.618-14's validation rows stand (second-hand), at the height and tilt with which P.618-13 agrees
LONDON = Site(51.5, -0.14, 0.031382984, rain_rate_mm_h=26.48052)
P618_ROWS = ((1.0, 2.2078), (0.1, 8.5701), (0.01, 23.4444), (0.001, 45.1987))
AGREES_DB = 0.005  # as found between the two editions when the rows were read

CONTINUOUS = 1e-4  # relative step across 5 deg that an elevation step of 1e-5 deg may make
DISH_M = 3.0


@pytest.mark.parametrize(("unavailability_pct", "published_db"), P618_ROWS)
def test_rain_agrees_with_the_published_rows(unavailability_pct, published_db):
    computed = rain_attenuation_db(LONDON, 29.0, 31.07699124, unavailability_pct, tilt_deg=0.0)
    assert computed == pytest.approx(published_db, abs=AGREES_DB)


def test_the_rain_map_is_read_at_the_stations_place():
    # ITU-R P.618 validation spreadsheet, London: R0.01 26.48 mm/h
    assert rain_rate_exceeded_mm_h(Site(51.5, -0.14)) == pytest.approx(26.4805, abs=0.001)
    assert rain_rate_exceeded_mm_h(Site(51.5, 359.86)) == pytest.approx(26.4805, abs=0.001)
    assert rain_rate_exceeded_mm_h(Site(51.5, -0.14, 0.0, 40.0)) == 40.0


def test_the_total_is_the_recommendations_sum():
    # P.618-13 section 2.5: A = gas + sqrt((rain + cloud)^2 + scintillation^2)
    parts = Attenuation(*(np.array([part]) for part in (1.0, 2.0, 10.0, 5.0)))
    assert parts.total_db == pytest.approx(1 + 13)
    assert parts.absorbed_db == pytest.approx(13)


def test_gas_is_that_of_version_twelve_even_when_another_was_set():
    from itur.models import itu676

    site = Site(51.5, -0.14, 0.031382984)
    twelve = float(gas_attenuation_db(site, 29.0, 31.07699124, 1.0))
    itu676.change_version(11)
    other = Site(51.5, -0.14, 0.0313829841)  # a new place, so that nothing kept from before is read
    assert float(gas_attenuation_db(other, 29.0, 31.07699124, 1.0)) == pytest.approx(twelve, abs=1e-6)
    assert itu676.get_version() == 12


def test_a_high_station_has_less_gas_and_less_rain():
    low, high = Site(51.5, 10.0, 0.0), Site(51.5, 10.0, 2.0)
    assert gas_attenuation_db(high, 26.0, 30.0, 1.0) < 0.8 * gas_attenuation_db(low, 26.0, 30.0, 1.0)
    assert rain_attenuation_db(high, 26.0, 30.0, 0.1) < 0.8 * rain_attenuation_db(low, 26.0, 30.0, 0.1)


def test_gas_and_cloud_keep_their_one_percent_values_below_it():
    for part in (gas_attenuation_db, cloud_attenuation_db):
        assert part(LONDON, 26.0, 20.0, 0.01) == part(LONDON, 26.0, 20.0, 1.0)


def test_no_rain_is_no_attenuation_and_not_a_missing_number():
    dry = Site(51.5, -0.14, 0.0, rain_rate_mm_h=0.0)
    np.testing.assert_array_equal(rain_attenuation_db(dry, 26.0, [5.0, 90.0], 0.001), [0.0, 0.0])


def test_a_station_above_the_rain_stays_dry():
    assert rain_attenuation_db(Site(-70.0, 0.0, 4.5), 26.0, 10.0, 0.01) == 0.0


def test_beyond_five_percent_of_the_year_the_sky_is_clear_of_rain():
    assert rain_attenuation_db(LONDON, 26.0, 30.0, 5.0) > 0
    assert rain_attenuation_db(LONDON, 26.0, 30.0, 5.01) == 0.0
    assert total_attenuation_db(LONDON, 26.0, 30.0, 20.0, diameter_m=DISH_M).rain_db == 0.0


def test_at_25_degrees_the_recommendations_high_branch_is_taken():
    # P.618-13 step 10: beta = -0.005 (|lat| - 36) from 25 deg up, for |lat| < 36 and p < 1 %
    site = Site(10.0, 10.0, 0.0, 90.0)
    below, at_25, above = rain_attenuation_db(site, 26.0, [25.0 - 1e-9, 25.0, 25.0 + 1e-9], 0.001)
    assert at_25 == pytest.approx(above, rel=1e-9)
    assert abs(below / above - 1) > 1e-3  # beta differs by 0.0039: 0.4 % of the attenuation


def test_the_horizon_is_finite_and_the_step_at_five_degrees_small():
    elevation_deg = np.array([0.0, 0.1, 1.0, 5.0 - 1e-5, 5.0, 5.0 + 1e-5])
    for frequency_ghz in (1.0, 8.0, 26.0):
        parts = total_attenuation_db(LONDON, frequency_ghz, elevation_deg, 0.1, diameter_m=DISH_M)
        for part in (parts.gas_db, parts.cloud_db, parts.scintillation_db):
            assert np.isfinite(part).all()
            assert part[3] == pytest.approx(part[4], rel=CONTINUOUS)
        assert np.isfinite(parts.rain_db).all()


def test_the_path_is_a_cosecant_down_to_five_degrees_and_bounded_below():
    assert path_factor(30.0, 2.0) == pytest.approx(2.0)
    # P.618-13 eq. (2) on the horizon: 2 / sqrt(2 h / Re), scaled to meet the cosecant at 5 deg (a tenth at most)
    assert path_factor(0.0, 2.0) == pytest.approx(2 / np.sqrt(4 / 8500), rel=0.1)


def test_low_scintillation_grows_with_the_path_as_it_does_above():
    # P.618-13 eq. (47): sigma goes as sin(elevation)^-1.2; below 5 deg the bounded path takes the place of 1/sin
    three, five = scintillation_db(LONDON, 26.0, [3.0, 5.0], 0.1, diameter_m=DISH_M)
    assert three / five == pytest.approx((path_factor(3.0, 1.0) / path_factor(5.0, 1.0)) ** 1.2)


def test_low_rain_never_outgrows_its_path():
    # at low frequencies P.618's step 7 takes (hR - hS)/sin(elevation), which has no end on the horizon
    for elevation_deg in (0.0, 0.5, 2.0):
        low, five = rain_attenuation_db(LONDON, 1.0, [elevation_deg, 5.0], 0.1)
        assert low / five < path_factor(elevation_deg, 1.0) / path_factor(5.0, 1.0)


def test_low_elevation_gas_grows_as_the_line_by_line_path_does():
    # ITU-R P.676-12 Annex 1 through itur at sea level, standard air of 7.5 g/m3, relative to 5 deg (computed).
    # The bounded path stands within a tenth of it at 1 deg, where 1/sin is half as much again too high.
    exact_over_five_deg = {3.0: 1.579, 2.0: 2.189, 1.0: 3.448}
    sea = Site(51.5, -0.14, 0.0)
    five = gas_attenuation_db(sea, 26.0, 5.0, 1.0)
    for elevation_deg, ratio in exact_over_five_deg.items():
        assert gas_attenuation_db(sea, 26.0, elevation_deg, 1.0) / five == pytest.approx(ratio, rel=0.1)


@pytest.mark.parametrize("latitude_deg", [90.0, 87.5, -90.0])
def test_the_poles_have_values(latitude_deg):
    parts = total_attenuation_db(Site(latitude_deg, 10.0), 26.0, [5.0, 60.0], 0.1, diameter_m=DISH_M)
    assert np.isfinite(parts.total_db).all()


@settings(max_examples=40, deadline=None)
@given(
    latitude_deg=st.floats(-90, 90),
    longitude_deg=st.floats(-180, 360),
    height_km=st.floats(-0.5, 9),
    rain_rate_mm_h=st.none() | st.floats(0, 1e6),
    frequency_ghz=st.floats(1, 55),
    elevation_deg=st.floats(0, 90),
    unavailability_pct=st.floats(0.001, 50),
)
def test_everywhere_attenuation_is_a_number_and_not_a_gain(
    latitude_deg, longitude_deg, height_km, rain_rate_mm_h, frequency_ghz, elevation_deg, unavailability_pct
):
    parts = total_attenuation_db(
        Site(latitude_deg, longitude_deg, height_km, rain_rate_mm_h),
        frequency_ghz,
        elevation_deg,
        unavailability_pct,
        diameter_m=DISH_M,
    )
    for part in (parts.gas_db, parts.cloud_db, parts.rain_db, parts.scintillation_db, parts.total_db):
        assert np.isfinite(part)
        assert part >= 0


def test_a_larger_dish_averages_scintillation_out():
    small, large = (scintillation_db(LONDON, 26.0, 10.0, 0.1, diameter_m=diameter) for diameter in (0.3, 13.0))
    assert large < small


def test_a_scalar_gives_what_a_one_element_array_gives():
    one = total_attenuation_db(LONDON, 26.0, 12.0, 0.1, diameter_m=DISH_M)
    array = total_attenuation_db(LONDON, 26.0, np.array([12.0]), 0.1, diameter_m=DISH_M)
    assert one.total_db == pytest.approx(array.total_db[0])
    assert np.shape(one.total_db) == ()


def test_numpys_warnings_stay_as_the_caller_had_them():
    code = (
        "import numpy as np; before = np.geterr(); from planner.link.atmosphere import Site, gas_attenuation_db;"
        " gas_attenuation_db(Site(50.0, 5.0), 26.0, 30.0, 1.0); print(np.geterr() == before)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "True"


@pytest.mark.parametrize(
    ("frequency_ghz", "elevation_deg", "unavailability_pct", "message"),
    [
        (60.0, 30.0, 1.0, "frequency must be 1 to 55 GHz for ITU-R P.618-13, got 60 GHz"),
        (0.4, 30.0, 1.0, "frequency must be 1 to 55 GHz for ITU-R P.618-13, got 0.4 GHz"),
        (26.0, -5.0, 1.0, "elevation must be 0 to 90 deg, got -5 deg"),
        (26.0, float("nan"), 1.0, "elevation must be 0 to 90 deg, got nan deg"),
        (26.0, 30.0, 0.0, "availability must be 50 to 99.999 % for ITU-R P.618-13, got 100 %"),
        (26.0, 30.0, 70.0, "availability must be 50 to 99.999 % for ITU-R P.618-13, got 30 %"),
    ],
)
def test_what_lies_outside_the_models_is_told(frequency_ghz, elevation_deg, unavailability_pct, message):
    with pytest.raises(InputError) as refused:
        total_attenuation_db(LONDON, frequency_ghz, elevation_deg, unavailability_pct, diameter_m=DISH_M)
    assert str(refused.value) == message
