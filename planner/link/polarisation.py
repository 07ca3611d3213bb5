"""How much of the wave a receiving antenna of another polarisation ellipse takes in."""

import numpy as np

from planner.mission.transmitter import Polarisation
from planner.units import decibel_of_power

LINEAR = ("horizontal", "vertical")
TILT_DEG = {"RHCP": 45.0, "LHCP": 45.0, "horizontal": 0.0, "vertical": 90.0}  # as ITU-R P.838-3 wants it


def mismatch_loss_db(axial_ratio_a_db: float, axial_ratio_b_db: float) -> float:
    """Polarisation mismatch of two antennas of the same sense, ellipses crossed at the worst angle [dB].

    Source: textbook formula (from memory), with axial ratios r as amplitudes and the ellipses 90 deg apart:
    share = 1/2 + (4 ra rb - (ra^2 - 1)(rb^2 - 1)) / (2 (ra^2 + 1)(rb^2 + 1)).
    """
    a, b = 10 ** (axial_ratio_a_db / 20), 10 ** (axial_ratio_b_db / 20)
    share = 0.5 + (4 * a * b - (a**2 - 1) * (b**2 - 1)) / (2 * (a**2 + 1) * (b**2 + 1))
    return float(-decibel_of_power(share)) + 0.0


def linear_mismatch_loss_db(axial_ratio_db: float) -> float:
    """Loss between a linear antenna and an elliptical one whose long axis is square to it [dB]; 3 dB when circular."""
    return float(10 * np.log10(1 + 10 ** (axial_ratio_db / 10)))


def polarisation_loss_db(
    sent: Polarisation, sent_axial_ratio_db: float, heard: tuple[Polarisation, ...], heard_axial_ratio_db: float
) -> float | None:
    """The loss into the best of the station's polarisations [dB], or None where it has none for this wave.

    A linear antenna's own axial ratio (its cross-polarised leakage) is neglected, and its tilt is taken as aligned:
    Faraday rotation, large below 1 GHz, is neglected too.
    """
    if sent in heard:
        return 0.0 if sent in LINEAR else mismatch_loss_db(sent_axial_ratio_db, heard_axial_ratio_db)
    circular_end_db = heard_axial_ratio_db if sent in LINEAR else sent_axial_ratio_db
    if any((one in LINEAR) != (sent in LINEAR) for one in heard):
        return linear_mismatch_loss_db(circular_end_db)
    return None
