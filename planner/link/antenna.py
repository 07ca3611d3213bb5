"""Antenna gain against the angle off its boresight, for either end of the link.

One law serves every antenna with a beam: 12 (off-axis / half-power beam)^2 dB below the peak, until its side lobes.
"""

import numpy as np

from planner.errors import InputError
from planner.mission.station import GroundAntenna
from planner.mission.transmitter import (
    Antenna,
    CosinePower,
    GainOnly,
    Isotropic,
    MeasuredPattern,
    Parabola,
    ReflectingArray,
)
from planner.units import C_M_S, decibel_of_power, power_of_decibel

PARABOLA_BEAM_DEG = 70.0  # half-power beam times D/lambda, tapered dish; textbooks
FLAT_ARRAY_BEAM_DEG = 58.0  # the same for a flat aperture, between uniform (51) and tapered (70); from memory
BACK_LOBE_DB = 30.0  # a patch's level behind its ground plane, below the peak; common practice, no source
NO_GAIN_DBI = -100.0  # beyond the last angle of a measured pattern nothing is known, so nothing is claimed
LOOKING_STRAIGHT_DEG = 0.01  # what rounding leaves of an off-axis angle of zero


def wavelength_m(frequency_hz):
    """Wavelength in vacuum [m]."""
    return C_M_S / frequency_hz


def ground_dish(antenna: GroundAntenna) -> Parabola:
    """The station's dish as the parabola it is."""
    return Parabola(kind="parabola", diameter_m=antenna.diameter_m, efficiency=antenna.efficiency)


def peak_gain_dbi(antenna: Antenna, frequency_hz: float) -> float:
    """Gain on boresight [dBi].

    A parabola has eta (pi D / lambda)^2 (textbooks), a flat reflecting array eta 4 pi A / lambda^2 with eta the
    product of its aperture and illumination efficiencies.
    """
    if isinstance(antenna, Isotropic):
        return 0.0
    if isinstance(antenna, CosinePower | GainOnly):
        return antenna.gain_dbi
    if isinstance(antenna, Parabola):
        return float(
            decibel_of_power(antenna.efficiency * (np.pi * antenna.diameter_m / wavelength_m(frequency_hz)) ** 2)
        )
    if isinstance(antenna, ReflectingArray):
        efficiency = antenna.aperture_efficiency * antenna.illumination_efficiency
        area_m2 = antenna.width_m * antenna.height_m
        return float(decibel_of_power(efficiency * 4 * np.pi * area_m2 / wavelength_m(frequency_hz) ** 2))
    return float(gain_dbi(antenna, 0.0, frequency_hz))


def half_power_beam_deg(antenna: Antenna, frequency_hz: float) -> float:
    """Full width between the points 3 dB below the peak [deg]; 360 where the antenna has no beam."""
    if isinstance(antenna, Parabola):
        return PARABOLA_BEAM_DEG * wavelength_m(frequency_hz) / antenna.diameter_m
    if isinstance(antenna, ReflectingArray):
        return FLAT_ARRAY_BEAM_DEG * wavelength_m(frequency_hz) / max(antenna.width_m, antenna.height_m)
    if isinstance(antenna, CosinePower) and (exponent := cosine_exponent(antenna.gain_dbi)) > 0:
        return float(2 * np.rad2deg(np.arccos(0.5 ** (1 / exponent))))
    return 360.0


def gain_dbi(antenna: Antenna, off_axis_deg, frequency_hz: float):
    """Gain towards a direction `off_axis_deg` from the boresight.

    Parameters
    ----------
    antenna : any of planner.mission.transmitter's antennas
    off_axis_deg : float or array [deg], 0 to 180
    frequency_hz : float [Hz]

    Returns
    -------
    array [dBi], shape of `off_axis_deg`

    Raises
    ------
    InputError : a "gain only" antenna asked for any direction but its boresight
    """
    off_axis_deg = np.asarray(off_axis_deg, dtype=float)
    if isinstance(antenna, Isotropic):
        return np.zeros_like(off_axis_deg)
    if isinstance(antenna, GainOnly):
        return _gain_only_dbi(antenna, off_axis_deg)
    if isinstance(antenna, CosinePower):
        return _cosine_power_dbi(antenna, off_axis_deg)
    if isinstance(antenna, MeasuredPattern):
        return _measured_dbi(antenna, off_axis_deg)
    return _beam_and_side_lobes_dbi(antenna, off_axis_deg, frequency_hz)


def pointing_loss_db(antenna: Antenna, off_axis_deg, error_deg, frequency_hz: float):
    """What a pointing error costs beyond the gain at the intended angle [dB].

    The error is taken square to the off-axis angle (both are small rotations of unknown relative direction, so the
    mean of the squared angle is the sum of squares); an axis aimed straight sees the error itself.
    """
    intended = gain_dbi(antenna, off_axis_deg, frequency_hz)
    return intended - gain_dbi(antenna, np.hypot(off_axis_deg, error_deg), frequency_hz)


def cosine_exponent(peak_dbi: float) -> float:
    """n of gain = peak cos^n over the front half: a lossless such pattern has peak 2 (n + 1); 0 below 3 dBi."""
    return max(float(power_of_decibel(peak_dbi)) / 2 - 1, 0.0)


def _gain_only_dbi(antenna: GainOnly, off_axis_deg):
    widest_deg = float(np.max(off_axis_deg, initial=0.0))
    if widest_deg > LOOKING_STRAIGHT_DEG:
        raise InputError(
            f'antenna of kind "gain only" has no pattern and must look straight at the station,'
            f" got {widest_deg:.2f} deg off its boresight (pointing error included): describe a beam instead"
        )
    return np.full_like(off_axis_deg, antenna.gain_dbi)


def _cosine_power_dbi(antenna: CosinePower, off_axis_deg):
    cosine = np.maximum(np.cos(np.deg2rad(off_axis_deg)), 1e-9)
    fall_db = -10 * cosine_exponent(antenna.gain_dbi) * np.log10(cosine)
    fall_db = np.where(off_axis_deg >= 90, BACK_LOBE_DB, fall_db)
    return antenna.gain_dbi - np.minimum(fall_db, BACK_LOBE_DB)


def _measured_dbi(antenna: MeasuredPattern, off_axis_deg):
    if not antenna.samples:
        raise InputError(f'antenna of kind "measured pattern": the file {antenna.file!r} has not been read')
    angle_deg, level_dbi = np.array(antenna.samples).T
    return np.interp(off_axis_deg, angle_deg, level_dbi, right=NO_GAIN_DBI if angle_deg[-1] < 180 else None)


def _beam_and_side_lobes_dbi(antenna: Parabola | ReflectingArray, off_axis_deg, frequency_hz: float):
    """Main beam, then the envelope of the side lobes; for a flat array in the plane of its longer, narrower side."""
    peak_dbi = peak_gain_dbi(antenna, frequency_hz)
    across_m = antenna.diameter_m if isinstance(antenna, Parabola) else max(antenna.width_m, antenna.height_m)
    beam_dbi = peak_dbi - 12 * (off_axis_deg / half_power_beam_deg(antenna, frequency_hz)) ** 2
    envelope_dbi = side_lobe_envelope_dbi(off_axis_deg, across_m / wavelength_m(frequency_hz))
    return np.maximum(beam_dbi, np.minimum(envelope_dbi, peak_dbi - 13.0))


def side_lobe_envelope_dbi(off_axis_deg, diameter_wavelengths: float):
    """Envelope of the side lobes of a dish `diameter_wavelengths` across [dBi].

    Source: ITU Radio Regulations Appendix 8, Annex III (from memory), both its cases, D/lambda above and below 100;
    the first side lobe caps it. `_beam_and_side_lobes_dbi` holds it 13 dB below the peak (a uniform aperture's first
    side lobe, textbooks), which matters for apertures of a few wavelengths only.
    """
    angle_deg = np.maximum(off_axis_deg, 1e-6)
    first_lobe_dbi = 2 + 15 * np.log10(diameter_wavelengths)
    if diameter_wavelengths >= 100:
        falling_dbi, far_dbi = 32 - 25 * np.log10(angle_deg), -10.0
    else:
        falling_dbi = 52 - 10 * np.log10(diameter_wavelengths) - 25 * np.log10(angle_deg)
        far_dbi = 10 - 10 * np.log10(diameter_wavelengths)
    return np.minimum(first_lobe_dbi, np.where(angle_deg < 48, np.maximum(falling_dbi, far_dbi), far_dbi))
