"""How far the troposphere lifts a radio source above where geometry puts it."""

import numpy as np

HIGHEST_KM, FIT_ENDS_DEG = 3.0, 10.0  # the formula was fitted to stations and elevations up to here


def refraction_deg(elevation_deg, altitude_km: float = 0.0):
    """Apparent less geometric elevation for a source beyond the atmosphere.

    Parameters
    ----------
    elevation_deg : float or array [deg], geometric; below the horizon it is taken as 0
    altitude_km : float [km] of the station; above 3 km, where the formula ends, taken as 3, which overstates

    Returns
    -------
    float or array [deg], shape of `elevation_deg`, positive

    Source: ITU-R P.834, section 4 (free-space elevation corrected; equation and coefficients from memory), a fit to its
    mean reference atmosphere from 0 to 10 deg. Deviation: above 10 deg, where the fit has ended, the cotangent law
    goes on from its value there. Weather moves it by a tenth at 5 deg and more near the horizon.
    """
    elevation = np.maximum(elevation_deg, 0.0)
    t, h = np.minimum(elevation, FIT_ENDS_DEG), np.clip(altitude_km, 0.0, HIGHEST_KM)
    at_sea = 1.728 + 0.5411 * t + 0.03723 * t**2
    with_height = h * (0.1815 + 0.06272 * t + 0.01380 * t**2) + h**2 * (0.01727 + 0.008288 * t)
    beyond = np.tan(np.radians(FIT_ENDS_DEG)) / np.tan(np.radians(np.maximum(elevation, FIT_ENDS_DEG)))
    return beyond / (at_sea + with_height)
