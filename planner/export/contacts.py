"""The public tables as CSV: the contacts, and what stands behind them.

UTF-8 without a byte-order mark, commas, decimal points, lines ended by a line feed alone. The unit at the end of a
column's name says how many decimals it gets, so the same week gives the same bytes. Text that a spreadsheet would take
for a formula gets a leading apostrophe, which the reader of contacts takes off again.
"""

import csv
import hashlib
import io
from collections import Counter
from collections.abc import Iterable

import numpy as np
import pandas as pd

from planner.mission.names import slug
from planner.mission.table import FORMULA

CONTACTS = (
    "contact_id", "pass_id", "satellite", "station", "mode", "aos_utc", "tx_on_utc", "tx_off_utc", "los_utc",
    "duration_s", "aos_azimuth_deg", "los_azimuth_deg", "max_elevation_deg", "min_margin_db", "volume_mbit",
    "energy_wh", "soc_start_pct", "soc_min_pct", "soc_end_pct", "max_doppler_khz", "cautions", "power_on_utc",
    "frequency_mhz", "symbol_rate_mbaud", "polarisation", "modcods", "expected_volume_mbit",
)  # fmt: skip
PASSES = (
    "pass_id", "satellite", "station", "aos_utc", "tca_utc", "los_utc", "duration_s", "aos_azimuth_deg",
    "tca_azimuth_deg", "los_azimuth_deg", "max_elevation_deg", "tca_range_km", "sunlit_fraction",
)  # fmt: skip
VERDICTS = ("verdict", "reason")
BATTERY = (
    "satellite", "time_utc", "soc_pct", "soc_worst_pct", "cell_v", "worst_cell_v", "bus_v", "cell_a", "battery_c",
    "array_w", "load_w", "loss_w", "spill_w", "sunlit", "attitude",
)  # fmt: skip
RECORDER = ("satellite", "time_utc", "stored_mbit", "produced_mbit", "delivered_mbit", "lost_mbit")

DECIMALS = {
    "s": 3, "deg": 3, "km": 3, "db": 2, "mbit": 3, "wh": 4, "pct": 3, "hz": 1, "khz": 3, "mhz": 6, "mbaud": 6,
    "v": 4, "a": 4, "w": 3, "c": 2, "fraction": 4,
    "km_s": 6,
}  # fmt: skip

LONGEST_NAME_BYTES = 90  # of one part of a file name; file systems hold 255 bytes
DIGEST_LETTERS = 8


def contacts_csv(contacts: pd.DataFrame) -> bytes:
    """contacts.csv, one row a contact. Columns beyond the public ones follow them."""
    return table_csv(contacts, CONTACTS)


def passes_csv(passes: pd.DataFrame) -> bytes:
    """passes.csv: of the whole week with verdict and reason, or bare as `passes --csv` writes it."""
    return table_csv(passes, PASSES + (VERDICTS if "verdict" in passes else ()))


def battery_csv(battery: pd.DataFrame) -> bytes:
    """battery.csv: a row's values hold until the next row."""
    return table_csv(battery, BATTERY)


def recorder_csv(recorder: pd.DataFrame) -> bytes:
    """recorder.csv: stored data, and what was produced, delivered and lost since the start."""
    return table_csv(recorder, RECORDER)


def table_csv(frame: pd.DataFrame, first: tuple[str, ...] = ()) -> bytes:
    """A table as CSV bytes: the columns `first`, then the others in their own order.

    Raises
    ------
    KeyError : one of `first` is missing
    """
    names = [*first, *(name for name in frame.columns if name not in first)]
    columns = [_cells(name, frame[name]) for name in names]
    file = io.StringIO()
    writer = csv.writer(file, lineterminator="\n")
    writer.writerow(names)
    writer.writerows(zip(*columns, strict=True))
    return file.getvalue().encode()


def neutral(text: str) -> str:
    """Text that no spreadsheet runs: an apostrophe before a leading = + - @, tab or carriage return."""
    return "'" + text if FORMULA.match(text) else text


def utc_text(moments) -> np.ndarray:
    """ISO 8601 UTC with milliseconds and a Z for datetimes or ISO texts (n,), rounded, '' where there is none."""
    stamps = pd.DatetimeIndex(pd.to_datetime(moments, utc=True, format="ISO8601" if _is_text(moments) else None))
    milliseconds = stamps.tz_localize(None).round("ms").to_numpy().astype("datetime64[ms]")
    return np.where(np.isnat(milliseconds), "", np.char.add(np.datetime_as_string(milliseconds), "Z"))


def as_written(contacts: pd.DataFrame) -> pd.DataFrame:
    """The table with its numbers as contacts.csv holds them, so that what is shown of it agrees to the last digit."""
    numeric = {
        str(name): np.array([float(text or "nan") for text in _cells(str(name), column)])
        for name, column in contacts.items()
        if pd.api.types.is_numeric_dtype(column) and not pd.api.types.is_bool_dtype(column)
    }
    return contacts.assign(**numeric)


def schedule_issue(contacts: pd.DataFrame) -> str:
    """Which schedule this is: the first digits of the SHA-256 of its contacts.csv, as summary.json holds it."""
    return file_issue(contacts_csv(contacts))


def file_issue(contacts_file: bytes) -> str:
    """The same from the bytes of a contacts.csv."""
    return hashlib.sha256(contacts_file).hexdigest()[:DIGEST_LETTERS]


def plain_number(value: float) -> str:
    """A carrier or rate with all its digits, to the millionth, and no trailing zeros: 2245.0125, 26250, 0.25."""
    return f"{value:.6f}".rstrip("0").rstrip(".")


def azimuth_text(azimuth_deg: float, decimals: int) -> str:
    """Rounded on the circle: 359.97 with one decimal is 0.0."""
    return f"{round(azimuth_deg, decimals) % 360:.{decimals}f}"


def clock_text(moment) -> str:
    """HH:MM:SS of UTC for a datetime or an ISO text, to the nearest second."""
    stamp = pd.Timestamp(moment).tz_convert("UTC").round("s")
    return f"{stamp:%H:%M:%S}"


def file_name(*names: str) -> str:
    """A harmless file name, without its ending, for names out of a mission; as they stand in ids.

    A name too long for a file system is cut and told apart by a few digits of its SHA-256.
    """
    return "_".join(_brief(slug(name)) for name in names)


def distinct(names: Iterable[str]) -> list[str]:
    """The names, `_2`, `_3` … behind those that came before: two sessions of one mode on one pass."""
    seen: Counter[str] = Counter()
    told = []
    for name in names:
        seen[name] += 1
        told.append(name if seen[name] == 1 else f"{name}_{seen[name]}")
    return told


def _brief(name: str) -> str:
    octets = name.encode()
    if len(octets) <= LONGEST_NAME_BYTES:
        return name
    digest = hashlib.sha256(octets).hexdigest()[:DIGEST_LETTERS]
    return f"{octets[: LONGEST_NAME_BYTES - DIGEST_LETTERS - 1].decode(errors='ignore')}-{digest}"


def _cells(name: str, column: pd.Series) -> list[str]:
    if name.endswith("_utc"):
        return utc_text(column).tolist()
    if pd.api.types.is_bool_dtype(column):
        return np.where(column, "yes", "no").tolist()
    if pd.api.types.is_numeric_dtype(column):
        values = column.to_numpy(dtype=float)
        return _numbers(values, _decimals(name, column), full_circle=name.endswith("azimuth_deg"))
    return ["" if pd.isna(value) else neutral(" ".join(str(value).splitlines())) for value in column]


def _decimals(name: str, column: pd.Series) -> int:
    """By the unit that the name ends with; the longer unit first."""
    parts = name.split("_")
    unknown = 0 if pd.api.types.is_integer_dtype(column) else 6
    return DECIMALS.get("_".join(parts[-2:]), DECIMALS.get(parts[-1], unknown))


def _numbers(values: np.ndarray, decimals: int, full_circle: bool = False) -> list[str]:
    """Fixed decimals, no negative zero, '' for NaN; on a full circle 360 is 0."""
    rounded = np.round(values, decimals) + 0.0
    rounded = rounded % 360.0 if full_circle else rounded
    return ["" if value != value else f"{value:.{decimals}f}" for value in rounded.tolist()]


def _is_text(column) -> bool:
    return not pd.api.types.is_datetime64_any_dtype(column)
