"""Contacts with plausible content in every public column."""

from datetime import UTC, datetime, timedelta

import pandas as pd

START = datetime(2026, 12, 7, tzinfo=UTC)
END = START + timedelta(days=7)
EPOCH = START - timedelta(hours=6)


def contact(number: int = 1, **changes) -> dict:
    """One contact of 300 s, `number` hours after the start."""
    on = START + timedelta(hours=number)
    return {
        "contact_id": f"marshlight-1.vardholm.{number:04d}.k-high-rate",
        "pass_id": f"marshlight-1.vardholm.{number:04d}",
        "satellite": "MARSHLIGHT-1",
        "station": "Vardholm",
        "mode": "K high rate",
        "aos_utc": _iso(on - timedelta(seconds=120)),
        "tx_on_utc": _iso(on),
        "tx_off_utc": _iso(on + timedelta(seconds=300)),
        "los_utc": _iso(on + timedelta(seconds=400)),
        "duration_s": 300.0,
        "aos_azimuth_deg": 12.345,
        "los_azimuth_deg": 190.0,
        "max_elevation_deg": 61.5,
        "min_margin_db": 3.21,
        "volume_mbit": 14_000.0,
        "energy_wh": 1.9,
        "soc_start_pct": 92.0,
        "soc_min_pct": 80.0,
        "soc_end_pct": 84.0,
        "max_doppler_khz": 580.0,
        "cautions": "Sun within 0.4 deg of the dish axis",
        "power_on_utc": _iso(on - timedelta(seconds=60)),
        "frequency_mhz": 26250.0,
        "symbol_rate_mbaud": 40.0,
        "polarisation": "RHCP",
        "modcods": f"QPSK_3/4@{_iso(on)} 8PSK_3/4@{_iso(on + timedelta(seconds=100))}",
        "expected_volume_mbit": 15_000.0,
    } | changes


def contacts(*numbers: int) -> pd.DataFrame:
    return pd.DataFrame([contact(number) for number in numbers], columns=list(contact()))


def _iso(moment: datetime) -> str:
    return moment.strftime("%Y-%m-%dT%H:%M:%S.000Z")
