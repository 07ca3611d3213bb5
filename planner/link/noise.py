"""System noise temperature, referred to the antenna's flange (before the feed loss), where the gain stands too."""

import numpy as np
from scipy.stats import ncx2

from planner.errors import InputError
from planner.link.antenna import gain_dbi, ground_dish, half_power_beam_deg, peak_gain_dbi
from planner.mission.station import GroundAntenna, Receiver
from planner.units import decibel_of_power, power_of_decibel

MEAN_RADIATING_K = 275.0  # Tm, ITU-R P.618-13 section 3 (from memory)
COSMIC_K = 2.725  # microwave background; P.618-13 rounds it to 2.7
REFERENCE_K = 290.0  # T0 of a noise figure and of a passive loss at room temperature, IEEE definition
NARROWEST_BEAM_DEG = 1e-3  # against the Sun's disc no narrower beam differs from this one
SUN_RADIUS_DEG = 0.265  # half of the apparent width of 0.53 deg

# Quiet-Sun brightness temperature of the disc. 37 GHz: 8,100 +- 300 K, Metsaehovi (read); the rest from memory.
QUIET_SUN_K = ((0.1, 9e5), (0.4, 6e5), (1.0, 2e5), (2.0, 8e4), (4.0, 3.5e4), (8.0, 1.7e4), (12.0, 1.25e4),
               (18.0, 1.05e4), (26.0, 9e3), (37.0, 8.1e3), (75.0, 7e3))  # fmt: skip


def galactic_k(frequency_hz: float) -> float:
    """Median noise temperature of the Galaxy [K]: it matters below 1 GHz.

    Source: ITU-R P.372, Fam = 52 - 23 log10(f / MHz) dB above 290 K (from memory), extended upward.
    """
    return float(REFERENCE_K * power_of_decibel(52 - 23 * np.log10(frequency_hz / 1e6)))


def sky_temperature_k(attenuation_db, background_k: float = COSMIC_K):
    """Noise of an absorbing atmosphere in front of a colder background [K].

    Source: ITU-R P.618-13 section 3 (from memory), T = Tm (1 - 10^(-A/10)) + 2.7 K x 10^(-A/10), where A leaves
    scintillation out because it absorbs nothing. Tm = 275 K.
    """
    passed = power_of_decibel(-np.asarray(attenuation_db, dtype=float))
    return MEAN_RADIATING_K * (1 - passed) + background_k * passed


def receiver_temperature_k(receiver: Receiver) -> float:
    """Noise of feed, amplifier, cable and what follows, at the flange [K].

    Source: Friis' cascade (textbooks); feed and cable at 290 K, each followed by the stage it feeds.
    """
    feed, cable = power_of_decibel(receiver.feed_loss_db), power_of_decibel(receiver.cable_loss_db)
    following_k = REFERENCE_K * (power_of_decibel(receiver.following_noise_figure_db) - 1)
    behind_amplifier_k = (REFERENCE_K * (cable - 1) + cable * following_k) / power_of_decibel(
        receiver.amplifier_gain_db
    )
    return float(REFERENCE_K * (feed - 1) + feed * (receiver.noise_temperature_k + behind_amplifier_k))


def system_temperature_k(antenna: GroundAntenna, receiver: Receiver, frequency_hz, sky_k, clear_zenith_k, sun_k=0.0):
    """System noise temperature at the flange, sky and Sun included.

    Parameters
    ----------
    sky_k : float or array [K], the sky's noise at the sample, rain included
    clear_zenith_k : float [K], the sky's noise straight up without cloud and rain
    sun_k : float or array [K], what the Sun adds

    Returns
    -------
    array [K]

    With a stated G/T the figure is taken as measured in clear sky at the zenith: the dish's computed gain less G/T is
    the temperature there, spillover included, and what the sky has more than then is added.

    Raises
    ------
    InputError : a stated G/T that the dish could not reach against the bare cosmic background
    """
    if receiver.gt_dbk is None:
        return sky_k + sun_k + receiver.ground_spillover_k + receiver_temperature_k(receiver)
    gain = peak_gain_dbi(ground_dish(antenna), frequency_hz)
    stated_k = float(power_of_decibel(gain - receiver.gt_dbk))
    if stated_k < COSMIC_K:
        raise InputError(
            f"gt_dbk must be one that the dish can reach: {receiver.gt_dbk:g} dB/K with {antenna.diameter_m:g} m and"
            f" efficiency {antenna.efficiency:g} ({gain:.1f} dBi) asks for a system of {stated_k:.2g} K,"
            " colder than the sky"
        )
    return stated_k + np.maximum(sky_k - clear_zenith_k, 0.0) + sun_k


def quiet_sun_k(frequency_hz: float) -> float:
    """Brightness temperature of the quiet Sun's disc [K], log-log between the rows of QUIET_SUN_K."""
    ghz, kelvin = np.log(np.array(QUIET_SUN_K)).T
    return float(np.exp(np.interp(np.log(frequency_hz / 1e9), ghz, kelvin)))


def sun_share(antenna: GroundAntenna, frequency_hz: float, separation_deg):
    """Share of the antenna's reception that looks at the Sun's disc, 0 to 1.

    Main beam: a Gaussian of the half-power beam, averaged over the disc (the offset disc of a round Gaussian is the
    noncentral chi-square law with two degrees of freedom), times the share of all reception that the beam holds.
    Beyond three beams: the disc's solid angle times the side lobes' envelope over 4 pi, which is an upper bound.
    """
    separation_deg = np.asarray(separation_deg, dtype=float)
    dish = ground_dish(antenna)
    beam_deg = max(half_power_beam_deg(dish, frequency_hz), NARROWEST_BEAM_DEG)
    variance = beam_deg**2 / (8 * np.log(2))
    beam_efficiency = min(
        power_of_decibel(peak_gain_dbi(dish, frequency_hz)) * np.deg2rad(beam_deg) ** 2 / (16 * np.log(2)), 1.0
    )
    share = np.zeros_like(separation_deg)
    near = separation_deg < 3 * beam_deg + SUN_RADIUS_DEG
    share[near] = beam_efficiency * ncx2.cdf(SUN_RADIUS_DEG**2 / variance, 2, separation_deg[near] ** 2 / variance)
    disc_sr = np.pi * np.deg2rad(SUN_RADIUS_DEG) ** 2
    lobes = power_of_decibel(gain_dbi(dish, np.minimum(separation_deg, 180.0), frequency_hz)) * disc_sr / (4 * np.pi)
    return np.where(near, share, np.minimum(lobes, 1.0))


def sun_temperature_k(antenna: GroundAntenna, frequency_hz: float, separation_deg, attenuation_db):
    """What the quiet Sun adds to the antenna's noise [K], seen through the atmosphere; an active Sun is hotter."""
    share = sun_share(antenna, frequency_hz, separation_deg)
    return quiet_sun_k(frequency_hz) * share * power_of_decibel(-np.asarray(attenuation_db, dtype=float))


def figure_of_merit_dbk(gain_db, system_k):
    """G/T [dB/K]; the same at the flange as at the amplifier's input."""
    return gain_db - decibel_of_power(system_k)
