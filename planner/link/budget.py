"""The budget: every line of it as arrays, from the geometry.

The week's table and the printed page are both made of this one function's lines.
"""

from dataclasses import dataclass

import numpy as np

from planner.errors import InputError
from planner.link import antenna, noise
from planner.link.atmosphere import Attenuation
from planner.link.coding import esn0_db_of
from planner.link.curve import attenuation_curves, joined_curves, request_curves
from planner.link.flux import flux_density_dbw_m2, flux_limit, share_in_bandwidth
from planner.link.geometry import Geometry, free_space_loss_db
from planner.link.names import told_at
from planner.link.polarisation import polarisation_loss_db
from planner.mission.station import Station
from planner.mission.transmitter import Transmitter
from planner.sky.samples import doppler_hz
from planner.units import BOLTZMANN_DBW_K_HZ, decibel_of_power


@dataclass(frozen=True, eq=False)
class Lines:
    """Every line, a float where it is the same throughout, else arrays over the samples (last axis).

    Losses are positive. The reference of gain, temperature and G/T is the flange of the station's antenna.
    """

    rf_power_dbw: float
    line_loss_db: float
    transmit_gain_dbi: np.ndarray
    eirp_dbw: np.ndarray
    transmit_pointing_loss_db: np.ndarray
    polarisation_loss_db: float
    free_space_loss_db: np.ndarray
    attenuation: Attenuation
    receive_gain_dbi: float
    receive_pointing_loss_db: np.ndarray
    sky_temperature_k: np.ndarray
    sun_temperature_k: np.ndarray
    system_temperature_k: np.ndarray
    gt_dbk: np.ndarray
    cn0_dbhz: np.ndarray
    esn0_db: np.ndarray
    doppler_khz: np.ndarray
    flux_dbw_m2: np.ndarray
    flux_limit_dbw_m2: np.ndarray
    flux_bandwidth_hz: float


def carrier_to_noise_density_dbhz(eirp_dbw, losses_db, gt_dbk):
    """C/N0 [dBHz] = EIRP - all losses + G/T - 10 log10 k (textbooks; k exact, SI 2019)."""
    return eirp_dbw - losses_db + gt_dbk - BOLTZMANN_DBW_K_HZ


def cannot_hear(transmitter: Transmitter, station: Station) -> str:
    """Why the station cannot receive the mode at all; empty where it can."""
    if station.receiver_for(transmitter.band) is None:
        return f"station does not hear {transmitter.band} band"
    if _mismatch_db(transmitter, station) is None:
        heard = " and ".join(station.antenna.polarisations)
        return f"station receives {heard}, the mode sends {transmitter.polarisation}"
    return ""


def budget_lines(
    transmitter: Transmitter, station: Station, geometry: Geometry, attenuation: Attenuation, clear_zenith_gas_db: float
) -> Lines:
    """Every line of the budget.

    Parameters
    ----------
    geometry : arrays (n,)
    attenuation : arrays (n,) or (k, n) for k unavailabilities at once
    clear_zenith_gas_db : gas straight up, the clear sky in which a stated G/T holds

    Returns
    -------
    Lines, those that the atmosphere touches with the shape of `attenuation`

    Raises
    ------
    InputError : the station cannot hear the mode, a gain-only antenna has to look sideways, a G/T out of reach
    """
    polarisation_db = _mismatch_db(transmitter, station)
    if (reason := cannot_hear(transmitter, station)) or polarisation_db is None:
        raise InputError(reason)
    sent = _space_end(transmitter, geometry)
    heard = _ground_end(transmitter, station, geometry, attenuation, clear_zenith_gas_db)
    free_space_db = free_space_loss_db(geometry.slant_range_km, transmitter.frequency_mhz * 1e6)
    losses_db = (
        sent["transmit_pointing_loss_db"]
        + polarisation_db
        + free_space_db
        + attenuation.total_db
        + heard["receive_pointing_loss_db"]
    )
    cn0_dbhz = carrier_to_noise_density_dbhz(sent["eirp_dbw"], losses_db, heard["gt_dbk"])
    return Lines(
        polarisation_loss_db=polarisation_db,
        free_space_loss_db=free_space_db,
        attenuation=attenuation,
        cn0_dbhz=cn0_dbhz,
        esn0_db=esn0_db_of(cn0_dbhz, transmitter.symbol_rate_mbaud),
        doppler_khz=doppler_hz(geometry.range_rate_km_s, transmitter.frequency_mhz) / 1e3,
        **sent,
        **heard,
        **_flux(transmitter, sent["eirp_dbw"], geometry),
    )


def budget_at(
    transmitter: Transmitter, station: Station, geometry: Geometry, *unavailability_pct: tuple[float, ...]
) -> Lines:
    """The budget with the atmosphere of each unavailability [% of the year]: lines (k, n) where it touches them.

    Percentiles come in sets, and each set's curves are kept together; k counts through all sets. InputError as
    `budget_lines`, and for a frequency beyond the models' range.
    """
    with told_at(f"mode {transmitter.mode!r} at station {station.name!r}"):
        curves = joined_curves(
            attenuation_curves(
                request_curves(station, transmitter.frequency_mhz, transmitter.polarisation, percentiles)
            )
            for percentiles in unavailability_pct
        )
        zenith_gas_db = float(curves.at(90.0).gas_db[0, 0])
        return budget_lines(transmitter, station, geometry, curves.at(geometry.elevation_deg), zenith_gas_db)


def asked_unavailability_pct(availability_pct: float) -> float:
    """100 less the availability, without the dust of binary fractions."""
    return round(100 - availability_pct, 9)


def _mismatch_db(transmitter: Transmitter, station: Station) -> float | None:
    dish = station.antenna
    return polarisation_loss_db(
        transmitter.polarisation, transmitter.axial_ratio_db, dish.polarisations, dish.axial_ratio_db
    )


def _space_end(transmitter: Transmitter, geometry: Geometry) -> dict:
    """Power, gain at the attitude law's angle, EIRP, and the loss by the pointing error on top of that angle."""
    aim = transmitter.antenna, geometry.off_axis_deg
    frequency_hz = transmitter.frequency_mhz * 1e6
    rf_power_dbw = float(decibel_of_power(transmitter.rf_power_w))
    gain_dbi = antenna.gain_dbi(*aim, frequency_hz)
    return {
        "rf_power_dbw": rf_power_dbw,
        "line_loss_db": transmitter.line_loss_db,
        "transmit_gain_dbi": gain_dbi,
        "eirp_dbw": rf_power_dbw - transmitter.line_loss_db + gain_dbi,
        "transmit_pointing_loss_db": antenna.pointing_loss_db(*aim, transmitter.pointing_error_deg, frequency_hz),
    }


def _ground_end(transmitter, station, geometry: Geometry, attenuation: Attenuation, clear_zenith_gas_db) -> dict:
    """Gain, pointing loss by the mount's error and the elements' age (square to each other), noise and G/T."""
    frequency_hz = transmitter.frequency_mhz * 1e6
    dish = antenna.ground_dish(station.antenna)
    gain_dbi = antenna.peak_gain_dbi(dish, frequency_hz)
    element_error_deg = 0.0 if station.antenna.autotrack else geometry.element_error_deg
    error_deg = np.hypot(station.antenna.pointing_error_deg, element_error_deg)
    background_k = noise.COSMIC_K + noise.galactic_k(frequency_hz)
    absorbed_db = attenuation.absorbed_db
    sky_k = noise.sky_temperature_k(absorbed_db, background_k)
    sun_k = noise.sun_temperature_k(station.antenna, frequency_hz, geometry.sun_separation_deg, absorbed_db)
    system_k = noise.system_temperature_k(
        station.antenna,
        station.receiver_for(transmitter.band),
        frequency_hz,
        sky_k,
        noise.sky_temperature_k(clear_zenith_gas_db, background_k),
        sun_k,
    )
    return {
        "receive_gain_dbi": gain_dbi,
        "receive_pointing_loss_db": antenna.pointing_loss_db(dish, 0.0, error_deg, frequency_hz),
        "sky_temperature_k": sky_k,
        "sun_temperature_k": sun_k,
        "system_temperature_k": system_k,
        "gt_dbk": noise.figure_of_merit_dbk(gain_dbi, system_k),
    }


def _flux(transmitter: Transmitter, eirp_dbw, geometry: Geometry) -> dict:
    """Flux density on a clear path, its limit (infinite where the table has no row) and the reference bandwidth."""
    limit = flux_limit(transmitter.frequency_mhz)
    share = share_in_bandwidth(limit.bandwidth_hz, transmitter.symbol_rate_mbaud * 1e6, transmitter.roll_off)
    return {
        "flux_dbw_m2": flux_density_dbw_m2(eirp_dbw, geometry.slant_range_km, share),
        "flux_limit_dbw_m2": limit.at(geometry.elevation_deg),
        "flux_bandwidth_hz": limit.bandwidth_hz,
    }
