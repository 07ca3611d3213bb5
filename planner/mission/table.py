"""A CSV table of the user's: comma-separated, decimal points, a header that names the columns."""

import csv
import io
import re
from collections.abc import Iterable, Iterator
from pathlib import Path

from planner.errors import InputError
from planner.mission.text import nearest, read_text, shown

FORMULA = re.compile(r"'*[=+\-@\t\r]")  # what a spreadsheet would run, behind apostrophes or none
MOST_COLUMNS = 1000
MAYBE_DECIMAL_COMMAS = "; are there decimal commas?"
SEPARATORS = {";": "semicolons", "\t": "tabs"}


def read_table(path: Path, required: tuple[str, ...]) -> list[tuple[int, dict[str, str]]]:
    """Each row as (line number, {column: text}), blank rows left out, one apostrophe before = + - @ undone.

    Raises
    ------
    InputError : required columns are missing, the separator is not a comma, or a row has too few or too many cells
    """
    text = read_text(path)
    header, *rows = list(_rows(path, text)) or [(1, [])]
    if len(header[1]) > MOST_COLUMNS:
        raise InputError(f"{path}: line {header[0]}: must have at most {MOST_COLUMNS} columns, got {len(header[1])}")
    columns = [column.strip() for column in header[1]]
    if fault := separator_fault(columns):
        raise InputError(f"{path}: line {header[0]}: {fault}")
    missing = [name for name in required if name not in columns]
    if missing:
        raise InputError(
            *(f"{path}: line {header[0]}: column {name!r} is required{nearest(name, columns)}" for name in missing)
        )
    if len(set(columns)) < len(columns):
        raise InputError(f"{path}: line {header[0]}: column names must differ, got {shown(columns)}")
    faults = [_width_fault(path, line, cells, columns) for line, cells in rows if len(cells) != len(columns)]
    if faults:
        raise InputError(*faults)
    return [(line, dict(zip(columns, map(_plain, cells), strict=True))) for line, cells in rows]


def separator_fault(columns: list[str]) -> str:
    """What is wrong with a header whose columns are not separated by commas; "" where nothing is."""
    for other, name in SEPARATORS.items():
        if len(columns) == 1 and other in columns[0]:
            return f"columns must be separated by commas, got {name}; save as comma-separated CSV with decimal points"
    return ""


def with_content(rows: Iterable[tuple[int, list[str]]]) -> Iterator[tuple[int, list[str]]]:
    """The rows without those of empty cells, and without the line `sep=,` that spreadsheets put above a header."""
    found = False
    for number, cells in rows:
        if any(cell.strip() for cell in cells):
            if found or not cells[0].strip().casefold().startswith("sep="):
                yield number, cells
            found = True


def _rows(path: Path, text: str) -> Iterator[tuple[int, list[str]]]:
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    try:
        yield from with_content((reader.line_num, cells) for cells in reader)
    except csv.Error as error:
        raise InputError(f"{path}: line {reader.line_num}: must be CSV: {error}") from None


def _width_fault(path: Path, line: int, cells: list[str], columns: list[str]) -> str:
    mend = MAYBE_DECIMAL_COMMAS if len(cells) > len(columns) else ""
    return f"{path}: line {line}: must have {len(columns)} cells, got {len(cells)}{mend}"


def _plain(cell: str) -> str:
    """Undo the one apostrophe that the writer puts before text that a spreadsheet would take for a formula."""
    return cell[1:] if cell.startswith("'") and FORMULA.match(cell) else cell
