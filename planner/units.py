"""Constants with their sources, and the two kinds of decibel."""

import numpy as np

C_M_S = 299_792_458.0  # speed of light, SI, exact
BOLTZMANN_J_K = 1.380649e-23  # SI 2019, exact
BOLTZMANN_DBW_K_HZ = 10 * np.log10(BOLTZMANN_J_K)
EARTH_RADIUS_KM = 6378.137  # WGS 84 equatorial
EARTH_FLATTENING = 1 / 298.257223563  # WGS 84
EARTH_RATE_RAD_S = 7.2921150e-5  # WGS 84
EARTH_GM_KM3_S2 = 398600.4418  # WGS 84
AU_KM = 149_597_870.700  # IAU 2012 B2, exact
SUN_RADIUS_KM = 695_700.0  # IAU 2015 B3, nominal
SOLAR_CONSTANT_W_M2 = 1361.0  # IAU 2015 B3, nominal, at 1 au
KELVIN_AT_0_C = 273.15
DAY_S, HOUR_S = 86_400.0, 3600.0
JOULE_PER_WH = 3600.0


def decibel_of_power(ratio):
    """10 log10 of a ratio of powers."""
    return 10 * np.log10(ratio)


def power_of_decibel(level_db):
    """The ratio of powers that a level stands for."""
    return 10 ** (np.asarray(level_db) / 10)


def decibel_of_amplitude(ratio):
    """20 log10 of a ratio of amplitudes."""
    return 20 * np.log10(ratio)


def unit_vector(vector):
    """`vector` (..., 3) divided by its length along the last axis."""
    vector = np.asarray(vector, dtype=float)
    return vector / np.linalg.norm(vector, axis=-1, keepdims=True)


def dot(a, b):
    """Scalar product along the last axis of (..., 3) arrays."""
    return np.einsum("...i,...i->...", a, b)
