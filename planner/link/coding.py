"""Modulation and coding: information bits per symbol, and the Es/N0 that each row needs.

Every row counts what is left after its own framing, so that symbol rate x bits per symbol is the rate of the bits
handed to the layer above. Es/N0 and Eb/N0 are per symbol sent and per information bit of the code.
"""

from dataclasses import dataclass, replace

import numpy as np

from planner.errors import InputError
from planner.link.names import look_up
from planner.mission.transmitter import OwnModcod, Transmitter
from planner.units import decibel_of_power


@dataclass(frozen=True)
class Modcod:
    """One row. `code_rate_bits` is bits per symbol before the frame's marker: what Eb/N0 is counted by."""

    name: str
    bits_per_symbol: float
    required_esn0_db: float
    code_rate_bits: float
    source: str

    @property
    def required_ebn0_db(self) -> float:
        return float(self.required_esn0_db - decibel_of_power(self.code_rate_bits))


DVB_S2_SOURCE = "ETSI EN 302 307-1 Table 13, normal frames, packet error 1e-7, pilots off (second-hand)"
PILOT_FACTOR = 1440 / 1476  # 36 pilot symbols after every 16 slots of 90, EN 302 307-1 (from memory)
# name, spectral efficiency with the physical-layer header, ideal Es/N0 [dB]
DVB_S2 = (
    ("QPSK 1/4", 0.490243, -2.35), ("QPSK 1/3", 0.656448, -1.24), ("QPSK 2/5", 0.789412, -0.30),
    ("QPSK 1/2", 0.988858, 1.00), ("QPSK 3/5", 1.188304, 2.23), ("QPSK 2/3", 1.322253, 3.10),
    ("QPSK 3/4", 1.487473, 4.03), ("QPSK 4/5", 1.587196, 4.68), ("QPSK 5/6", 1.654663, 5.18),
    ("QPSK 8/9", 1.766451, 6.20), ("QPSK 9/10", 1.788612, 6.42),
    ("8PSK 3/5", 1.779991, 5.50), ("8PSK 2/3", 1.980636, 6.62), ("8PSK 3/4", 2.228124, 7.91),
    ("8PSK 5/6", 2.478562, 9.35), ("8PSK 8/9", 2.646012, 10.69), ("8PSK 9/10", 2.679207, 10.98),
    ("16APSK 2/3", 2.637201, 8.97), ("16APSK 3/4", 2.966728, 10.21), ("16APSK 4/5", 3.165623, 11.03),
    ("16APSK 5/6", 3.300184, 11.61), ("16APSK 8/9", 3.523143, 12.89), ("16APSK 9/10", 3.567342, 13.13),
    ("32APSK 3/4", 3.703295, 12.73), ("32APSK 4/5", 3.951571, 13.64), ("32APSK 5/6", 4.119540, 14.28),
    ("32APSK 8/9", 4.397854, 15.69), ("32APSK 9/10", 4.453027, 16.05),
)  # fmt: skip

# name, information bits and code symbols (one bit each) of a frame, marker symbols, required Eb/N0 [dB], source.
# Uncoded and convolutional rows carry frames of 1115 octets; a marker of 32 bits (CCSDS 131.0-B) is coded where the
# convolutional code runs over it, and 64 symbols long for the turbo code 1/2.
CCSDS = (
    ("uncoded", 8920, 8920, 32, 10.53, "bit error 1e-6, exact Q function (computed)"),
    ("convolutional 1/2", 8920, 17840, 64, 4.17, "K=7, soft decisions, bit error 1e-5, union bound (computed)"),
    ("convolutional 1/2 + RS(255,223)", 8920, 20400, 64, 2.3,
     "interleaving 5, bit error 2.2e-5, CCSDS 130.1-G-3 fig. 6-7 (second-hand)"),
    ("turbo 1/2", 8920, 17848, 64, 1.0, "8920 information bits, CCSDS 131.0-B (required value from memory)"),
    ("LDPC (8160,7136)", 7136, 8160, 32, 3.9, "CCSDS 131.0-B (required value from memory)"),
)  # fmt: skip
CCSDS_BITS = {"": 2, "BPSK ": 1}  # channel bits per symbol: a bare name is QPSK


def _ccsds_rows() -> list[Modcod]:
    rows = []
    for prefix, channel_bits in CCSDS_BITS.items():
        for name, information, code, marker, ebn0_db, source in CCSDS:
            code_rate_bits = channel_bits * information / code
            rows.append(
                Modcod(
                    name=prefix + name,
                    bits_per_symbol=channel_bits * information / (code + marker),
                    required_esn0_db=float(ebn0_db + decibel_of_power(code_rate_bits)),
                    code_rate_bits=code_rate_bits,
                    source=f"{'BPSK' if prefix else 'QPSK'}, {source}",
                )
            )
    return rows


MODCODS = {name: Modcod(name, bits, esn0_db, bits, DVB_S2_SOURCE) for name, bits, esn0_db in DVB_S2} | {
    row.name: row for row in _ccsds_rows()
}


def shannon_esn0_db(bits_per_symbol):
    """The least Es/N0 for a spectral efficiency [dB]: Es/N0 >= 2^eta - 1, that is Eb/N0 >= (2^eta - 1) / eta."""
    return decibel_of_power(2.0 ** np.asarray(bits_per_symbol) - 1)


def modcods_of(transmitter: Transmitter) -> tuple[Modcod, ...]:
    """The rows a mode may use, in rising rate, those that cost more Es/N0 for less rate left out.

    Raises
    ------
    InputError : an unknown name (with the nearest known one), or a row of the user's own that beats Shannon
    """
    rows = sorted(
        (find_modcod(name, transmitter) for name in transmitter.modcods),
        key=lambda row: (row.bits_per_symbol, -row.required_esn0_db),
    )
    return tuple(
        row
        for k, row in enumerate(rows)
        if all(row.required_esn0_db < faster.required_esn0_db for faster in rows[k + 1 :])
    )


def find_modcod(name: str, transmitter: Transmitter) -> Modcod:
    """The row of that name, the mode's own rows first; InputError with the nearest known name."""
    own = {row.name: _own_row(row, transmitter.mode) for row in transmitter.own_modcods}
    row = look_up("modcod", name, MODCODS | own, f" to mode {transmitter.mode!r}")
    if not transmitter.pilots or row.source != DVB_S2_SOURCE:
        return row
    bits = row.bits_per_symbol * PILOT_FACTOR
    return replace(row, bits_per_symbol=bits, source=row.source.replace("pilots off", "pilots on"))


def _own_row(row: OwnModcod, mode: str) -> Modcod:
    least_db = float(shannon_esn0_db(row.bits_per_symbol))
    if row.required_esn0_db < least_db:
        raise InputError(
            f"own_modcods row {row.name!r} of mode {mode!r}: required_esn0_db must not beat Shannon's limit,"
            f" {least_db:.2f} dB at {row.bits_per_symbol:g} bits per symbol, got {row.required_esn0_db:g}"
        )
    return Modcod(
        row.name, row.bits_per_symbol, row.required_esn0_db, row.bits_per_symbol, "the mission file's own row"
    )


def information_rate_mbps(transmitter: Transmitter, bits_per_symbol):
    """User information [Mbit/s]: after coding, framing, the layers above and the retransmission reserve."""
    kept = (1 - transmitter.upper_layer_overhead_pct / 100) * (1 - transmitter.retransmission_reserve_pct / 100)
    return transmitter.symbol_rate_mbaud * np.asarray(bits_per_symbol) * kept


def esn0_db_of(cn0_dbhz, symbol_rate_mbaud: float):
    """Es/N0 [dB] of a carrier."""
    return cn0_dbhz - decibel_of_power(symbol_rate_mbaud * 1e6)


def ebn0_db_of(esn0_db, modcod: Modcod):
    """Eb/N0 [dB] per information bit of the code."""
    return esn0_db - decibel_of_power(modcod.code_rate_bits)
