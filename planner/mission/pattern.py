"""A measured antenna pattern from CSV: two columns, off_axis_deg and gain_dbi."""

from pathlib import Path

from planner.errors import InputError
from planner.mission.numbers import number
from planner.mission.table import read_table
from planner.mission.text import decimals, shown

COLUMNS = ("off_axis_deg", "gain_dbi")


def read_pattern(path: Path) -> tuple[tuple[float, float], ...]:
    """((off_axis_deg, gain_dbi), …), rising in angle from 0; InputError names the line of each fault."""
    rows: list[tuple[float, float]] = []
    faults: list[str] = []
    for line, row in read_table(path, COLUMNS):
        try:
            angle_deg, gain_dbi = (number(row[column]) for column in COLUMNS)
        except ValueError:
            faults.append(
                f"{path}: line {line}: off_axis_deg and gain_dbi must be numbers,"
                f" got {shown(row['off_axis_deg'])} and {shown(row['gain_dbi'])}"
                + decimals(f"{row['off_axis_deg']} {row['gain_dbi']}")
            )
            continue
        if not 0 <= angle_deg <= 180 or not -200 <= gain_dbi <= 100:
            faults.append(
                f"{path}: line {line}: must be 0..180 deg and -200..100 dBi, got {angle_deg:g} and {gain_dbi:g}"
            )
        elif rows and angle_deg <= rows[-1][0]:
            faults.append(f"{path}: line {line}: off_axis_deg must rise, got {angle_deg:g} after {rows[-1][0]:g}")
        else:
            rows.append((angle_deg, gain_dbi))
    if not faults and (len(rows) < 2 or rows[0][0] != 0):
        faults.append(f"{path}: must have two rows or more and begin at off_axis_deg 0, got {len(rows)} rows")
    if faults:
        raise InputError(*faults)
    return tuple(rows)
