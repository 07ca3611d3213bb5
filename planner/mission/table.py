"""A CSV table of the user's: comma-separated, decimal points, a header that names the columns."""

import csv
import io
from collections.abc import Iterator
from pathlib import Path

from planner.errors import InputError
from planner.mission.text import nearest, read_text, shown


def read_table(path: Path, required: tuple[str, ...]) -> list[tuple[int, dict[str, str]]]:
    """Each row as (line number, {column: text}), blank rows left out, a leading apostrophe before = + - @ undone.

    Raises
    ------
    InputError : required columns are missing, the separator is not a comma, or a row has too few or too many cells
    """
    text = read_text(path)
    header, *rows = list(_rows(path, text)) or [(1, [])]
    columns = [column.strip() for column in header[1]]
    if len(columns) == 1 and ";" in columns[0]:
        raise InputError(
            f"{path}: line {header[0]}: columns must be separated by commas, got semicolons; save as comma-separated CSV with decimal points"
        )
    missing = [name for name in required if name not in columns]
    if missing:
        raise InputError(
            *(f"{path}: line {header[0]}: column {name!r} is required{nearest(name, columns)}" for name in missing)
        )
    if len(set(columns)) < len(columns):
        raise InputError(f"{path}: line {header[0]}: column names must differ, got {shown(columns)}")
    faults = [_width_fault(path, line, cells, columns) for line, cells in rows if len(cells) != len(columns)]
    if faults:
        raise InputError(*faults[:20])
    return [(line, dict(zip(columns, map(_plain, cells), strict=True))) for line, cells in rows]


def _rows(path: Path, text: str) -> Iterator[tuple[int, list[str]]]:
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells):
                yield reader.line_num, cells
    except csv.Error as error:
        raise InputError(f"{path}: line {reader.line_num}: must be CSV: {error}") from None


def _width_fault(path: Path, line: int, cells: list[str], columns: list[str]) -> str:
    mend = "; are there decimal commas?" if len(cells) > len(columns) else ""
    return f"{path}: line {line}: must have {len(columns)} cells, got {len(cells)}{mend}"


def _plain(cell: str) -> str:
    """Undo the apostrophe that keeps a spreadsheet from taking text for a formula."""
    cell = cell.strip()
    return cell[1:] if len(cell) > 1 and cell[0] == "'" and cell[1] in "=+-@\t\r" else cell
