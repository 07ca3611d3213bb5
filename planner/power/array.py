"""What the panels give to the bus: incidence, shading, temperature, efficiency."""

import numpy as np

from planner.mission.power import ArrayConversion, Panel
from planner.units import AU_KM, KELVIN_AT_0_C, SOLAR_CONSTANT_W_M2, dot, unit_vector

STEFAN_BOLTZMANN_W_M2_K4 = 5.670374419e-8  # SI 2019, exact to these digits
REFERENCE_C = 28.0  # the temperature at which makers state the efficiency of space cells
# Optical properties of a covered cell on a thin panel that radiates from both faces, from memory
SOLAR_ABSORPTIVITY = 0.92
EMISSIVITY = 0.85
# Earth's mean thermal radiation 237 W/m2 (from memory), taken as falling on one face of a panel with view factor 0.7
EARTH_HEAT_W_M2 = 0.7 * 237.0
# Sunlight that the Earth reflects to that face: albedo 0.3, the same view factor, half for the mean over the day side
REFLECTED_SHARE = 0.3 * 0.7 * 0.5


def turned(vector, axis, angle_deg: float):
    """`vector` (3,) turned about `axis` (3,) by the right-hand rule.

    Source: Rodrigues' rotation formula.
    """
    vector, axis, angle = np.asarray(vector, dtype=float), unit_vector(axis), np.radians(angle_deg)
    along = axis * dot(axis, vector) * (1 - np.cos(angle))
    return vector * np.cos(angle) + np.cross(axis, vector) * np.sin(angle) + along


def panel_normal(panel: Panel):
    """Outward unit normal (3,) in body axes with the hinge opened."""
    if panel.hinge_axis is None:
        return unit_vector(panel.normal)
    return unit_vector(turned(panel.normal, panel.hinge_axis, panel.hinge_angle_deg))


def lit_share(panel: Panel, cosine):
    """Share of the panel's cells outside the shadow of the body, from its table over incidence."""
    if not panel.shading:
        return np.ones_like(cosine)
    return np.interp(np.degrees(np.arccos(np.clip(cosine, 0.0, 1.0))), *np.transpose(panel.shading))


def solar_flux_w_m2(distance_km):
    """Sunlight at a distance from the Sun: the solar constant by the inverse square."""
    return SOLAR_CONSTANT_W_M2 * (AU_KM / np.asarray(distance_km)) ** 2


def panel_temperature_c(panel: Panel, absorbed_flux_w_m2):
    """Temperature of a panel that takes in `absorbed_flux_w_m2` of sunlight, flux times cosine times lit share [W/m2].

    Source: radiative balance of a plate with two radiating faces; what the cells turn into electricity does not heat.
    Sunlight reflected by the Earth is taken in proportion to the panel's own. Neglected: the minute a panel takes
    to warm after eclipse (it then gives more, so the neglect is on the safe side), and the side of a panel on the body
    that cannot radiate: it runs hotter than this, give it `temperature_sunlit_c`.
    """
    if panel.temperature_sunlit_c is not None:
        return np.full_like(absorbed_flux_w_m2, panel.temperature_sunlit_c)
    kept_share = max(SOLAR_ABSORPTIVITY - panel.efficiency, 0.0) + SOLAR_ABSORPTIVITY * REFLECTED_SHARE
    heat_w_m2 = kept_share * absorbed_flux_w_m2 + EMISSIVITY * EARTH_HEAT_W_M2
    return (heat_w_m2 / (2 * EMISSIVITY * STEFAN_BOLTZMANN_W_M2_K4)) ** 0.25 - KELVIN_AT_0_C


def panel_power_w(panel: Panel, cosine, flux_w_m2):
    """Power of one new panel at its own terminals.

    Parameters
    ----------
    cosine : (n,) cosine of the angle between normal and Sun, 0 where the Sun is behind
    flux_w_m2 : (n,) [W/m2] sunlight at the satellite, penumbra included

    Returns
    -------
    (n,) [W] at the maximum power point, before tracking, converter and end-of-life factors

    Neglected: what the Earth reflects onto the cells, some per cent more over the day side.
    """
    lit_flux_w_m2 = np.maximum(cosine, 0.0) * lit_share(panel, cosine) * flux_w_m2
    warmer_k = panel_temperature_c(panel, lit_flux_w_m2) - REFERENCE_C
    efficiency = panel.efficiency * (1 + panel.temperature_coefficient_pct_k / 100 * warmer_k)
    return panel.cell_area_m2 * np.maximum(efficiency, 0.0) * lit_flux_w_m2


def tumbling_power_w(panel: Panel, flux_w_m2):
    """`panel_power_w` averaged over all directions of the Sun, each as likely as any other.

    The cosine of the incidence is then uniform over -1 to 1: the mean is half of that over the lit side.
    """
    cosines = (np.arange(50) + 0.5) / 50  # midpoint rule
    powers_w = panel_power_w(panel, np.tile(cosines, np.size(flux_w_m2)), np.repeat(flux_w_m2, len(cosines)))
    return 0.5 * powers_w.reshape(-1, len(cosines)).mean(axis=1)


def bus_power_w(panels_w, panel_factor, conversion: ArrayConversion):
    """Array power that the bus may take [W], (n,), from new panels' powers (n, panels) and their corner's factors."""
    at_bus_w = panels_w @ np.asarray(panel_factor) * conversion.tracking_efficiency * conversion.converter_efficiency
    return at_bus_w if conversion.max_array_w is None else np.minimum(at_bus_w, conversion.max_array_w)
