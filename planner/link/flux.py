"""Power flux-density at the ground against the limits of the Radio Regulations.

A planning aid: check the current Radio Regulations and your licence, which may ask for less.
"""

from dataclasses import dataclass

import numpy as np

from planner.units import decibel_of_power

CHECK_YOUR_LICENCE = "check the current Radio Regulations and your licence"


@dataclass(frozen=True)
class FluxLimit:
    """One row of ITU Radio Regulations Article 21, Table 21-4: flat to 5 deg, a ramp to 25 deg, flat above."""

    lower_mhz: float
    upper_mhz: float
    low_dbw_m2: float
    high_dbw_m2: float
    bandwidth_hz: float
    read: str

    @property
    def rise_db(self) -> float:
        return self.high_dbw_m2 - self.low_dbw_m2 if np.isfinite(self.low_dbw_m2) else 0.0

    def at(self, elevation_deg):
        """The limit at the angle of arrival [dB(W/m2) in `bandwidth_hz`]."""
        ramp = np.clip((np.asarray(elevation_deg, dtype=float) - 5.0) / 20.0, 0.0, 1.0)
        return self.low_dbw_m2 + ramp * self.rise_db


# Rows "second-hand" were read in public copies; rows "memory" were not read, so confirm them first.
TABLE_21_4 = (
    FluxLimit(1525, 1530, -154, -144, 4e3, "memory"),
    FluxLimit(1670, 1700, -133, -133, 1.5e6, "memory"),
    FluxLimit(2200, 2300, -154, -144, 4e3, "second-hand"),
    FluxLimit(3400, 4200, -152, -142, 4e3, "memory"),
    FluxLimit(7250, 7750, -152, -142, 4e3, "memory"),
    FluxLimit(8025, 8500, -150, -140, 4e3, "second-hand"),
    FluxLimit(25_250, 27_500, -115, -105, 1e6, "second-hand"),
    FluxLimit(31_800, 32_300, -120, -105, 1e6, "memory"),
)


# Where this table holds no row no limit is tested, which does not mean that none applies.
NO_ROW = FluxLimit(0.0, np.inf, np.inf, np.inf, 4e3, "no row")


def flux_limit(frequency_mhz: float) -> FluxLimit:
    """The row for a carrier; NO_ROW, with an infinite limit in 4 kHz, where the table holds none."""
    return next((row for row in TABLE_21_4 if row.lower_mhz <= frequency_mhz <= row.upper_mhz), NO_ROW)


def share_in_bandwidth(bandwidth_hz: float, symbol_rate_baud: float, roll_off: float) -> float:
    """Largest share of the power that falls into any `bandwidth_hz` of a raised-cosine spectrum, 0 to 1.

    Root-raised-cosine shaping at both ends: the emitted power spectrum is the raised cosine, flat in the middle,
    of width symbol rate x (1 + roll-off) in all. The densest window is the one around the carrier.
    """
    half = bandwidth_hz / (2 * symbol_rate_baud)  # in symbol rates, from the carrier
    flat, edge = (1 - roll_off) / 2, (1 + roll_off) / 2
    if half >= edge:
        return 1.0
    if half <= flat:
        return 2 * half
    x = half - flat
    return float(2 * flat + x + roll_off / np.pi * np.sin(np.pi * x / roll_off))


def flux_density_dbw_m2(eirp_dbw, range_km, share: float = 1.0):
    """Power flux-density [dB(W/m2)] of `share` of the power, spread over the sphere at `range_km`; a clear path."""
    return eirp_dbw - decibel_of_power(4 * np.pi * (np.asarray(range_km) * 1e3) ** 2) + decibel_of_power(share)
