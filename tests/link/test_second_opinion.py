"""One budget worked out again from the description alone, with textbook formulas and itur's own one-call total."""

import numpy as np
import pytest
from link_examples import make_mission, make_station, make_transmitter

from planner.link import link_budget
from planner.mission.station import GroundAntenna

# What interpolating the attenuation curve and rounding c and k in the formulas below can make together
A_TWENTIETH_OF_A_DECIBEL = 0.05

MODE = make_transmitter(line_loss_db=1.2, axial_ratio_db=2.0, pointing_error_deg=1.5)
STATION = make_station(
    antenna=GroundAntenna(diameter_m=2.8, efficiency=0.58, pointing_error_deg=0.03, axial_ratio_db=1.0)
)


def worked_by_hand(range_km, element_error_deg, elevation_deg, unavailability_pct):
    """C/N0 [dBHz] at 26 GHz."""
    import astropy.units as u
    import itur
    from itur.models import itu676

    itu676.change_version(12)
    gas, cloud, rain, _, total = (
        part.to_value(u.dB)
        for part in itur.atmospheric_attenuation_slant_path(
            52.0, 5.0, 26.0, elevation_deg, unavailability_pct, 2.8, hs=0.02, eta=0.58, tau=45.0,
            return_contributions=True,
        )
    )  # fmt: skip
    wavelength_m = 0.299792458 / 26
    eirp_dbw = 0.0 - 1.2 + 10 * np.log10(0.6 * (np.pi * 0.1 / wavelength_m) ** 2)
    craft_pointing_db = 12 * (1.5 / (70 * wavelength_m / 0.1)) ** 2
    dish_pointing_db = 12 * (np.hypot(0.03, element_error_deg) / (70 * wavelength_m / 2.8)) ** 2
    a, b = 10 ** (2.0 / 20), 10 ** (1.0 / 20)
    mismatch = 0.5 + (4 * a * b - (a * a - 1) * (b * b - 1)) / (2 * (a * a + 1) * (b * b + 1))
    free_space_db = 92.448 + 20 * np.log10(range_km) + 20 * np.log10(26.0)
    passed = 10 ** (-(gas + cloud + rain) / 10)
    feed = 10**0.03
    system_k = 275 * (1 - passed) + 2.725 * passed + 10 + 290 * (feed - 1) + 150 * feed
    gain_dbi = 10 * np.log10(0.58 * (np.pi * 2.8 / wavelength_m) ** 2)
    losses_db = craft_pointing_db + dish_pointing_db - 10 * np.log10(mismatch) + free_space_db + total
    return eirp_dbw - losses_db + gain_dbi - 10 * np.log10(system_k) + 228.599


@pytest.mark.parametrize("elevation_deg", [6.0, 24.0, 71.0])
@pytest.mark.parametrize("availability_pct", [96.0, 99.0, 99.9])
def test_the_page_agrees_with_the_same_budget_by_hand(elevation_deg, availability_pct):
    mission = make_mission([MODE], [STATION], elements_refresh_days=0.1)
    page = link_budget(mission, "Reed Bank", "K", elevation_deg=elevation_deg, availability_pct=availability_pct)
    # one-sigma in-track error at a tenth of a day, 1 + 0.2 + 0.005 km, across the line of sight of a circular orbit
    radius_km, earth_km = (398600.4418 / (15.08 * 2 * np.pi / 86400) ** 2) ** (1 / 3), 6378.137
    nadir = np.arcsin(earth_km * np.cos(np.deg2rad(elevation_deg)) / radius_km)
    error_deg = np.rad2deg(1.205 * np.cos(nadir) / page.slant_range_km)
    by_hand = worked_by_hand(page.slant_range_km, error_deg, elevation_deg, 100 - availability_pct)
    assert page.cn0_dbhz == pytest.approx(by_hand, abs=A_TWENTIETH_OF_A_DECIBEL)
