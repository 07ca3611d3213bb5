"""Two-line element sets, with or without a name line. Format: CCSDS 502.0-B-3 refers to it; columns from memory."""

import re
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

from planner.mission.orbit import ElementSet
from planner.mission.text import decimals

EXPECTED = {
    1: "1 NNNNNC NNNNNAAA NNNNN.NNNNNNNN +.NNNNNNNN +NNNNN-N +NNNNN-N N NNNNN",
    2: "2 NNNNN NNN.NNNN NNN.NNNN NNNNNNN NNN.NNNN NNN.NNNN NN.NNNNNNNNNNNNNN",
}
LENGTH = 69
COMMENT = "#"
ALPHA5 = "ABCDEFGHJKLMNPQRSTUVWXYZ"  # I and O are left out; A stands for 10


def parse_tle(text: str, path: str) -> tuple[list[ElementSet], list[str]]:
    """Every set of the text but for lines of comment, and every fault, told with file, line and rule."""
    lines = [
        (number, line.rstrip())
        for number, line in enumerate(text.splitlines(), 1)
        if line.strip() and not line.lstrip().startswith(COMMENT)
    ]
    sets, faults = [], []
    k = 0
    while k < len(lines):
        name, start = _name_at(lines, k)
        pair = lines[start : start + 2]
        if len(pair) < 2 or not pair[0][1].startswith("1 ") or not pair[1][1].startswith("2 "):
            number, line = pair[0] if pair else lines[k]
            faults.append(f"{path}: line {number}: must begin a line 1 that a line 2 follows, got {line!r}")
            k = max(start, k + 1)
            continue
        checked = [_LineCheck(path, which, *numbered) for which, numbered in enumerate(pair, 1)]
        found = [fault for check in checked for fault in check.layout_faults()]
        if not found:
            element_set, found = _element_set(name, *checked)
            sets += [element_set] if element_set else []
        faults += found
        k = start + 2
    return sets, faults


def _name_at(lines, k: int) -> tuple[str, int]:
    """The name line at k, if there is one, and where line 1 should stand."""
    follows = lines[k + 1][1] if k + 1 < len(lines) else ""
    if lines[k][1].startswith("1 ") and not follows.startswith("1 "):
        return "", k
    return lines[k][1].removeprefix("0 ").strip(), k + 1


@dataclass
class _LineCheck:
    path: str
    which: int
    number: int
    line: str

    def fault(self, rule: str) -> str:
        """The expected form above the received line."""
        return (
            f"{self.path}: line {self.number}: {rule}"
            f"\n    expected form: {EXPECTED[self.which]}\n    received:      {self.line}"
        )

    def layout_faults(self) -> list[str]:
        if len(self.line) != LENGTH or not self.line.isascii():
            return [self.fault(f"must have {LENGTH} ASCII columns, got {len(self.line)}")]
        total = sum(int(c) if c.isdigit() else c == "-" for c in self.line[:68]) % 10
        if self.line[68] != str(total):
            return [self.fault(f"checksum must be {total}, got {self.line[68]!r}")]
        return []

    def field(self, name: str, first: int, last: int, convert, faults: list[str]):
        """Columns `first` to `last` (from 1) converted; None and a fault when they cannot be."""
        text = self.line[first - 1 : last]
        try:
            return convert(text)
        except ValueError as error:
            faults.append(self.fault(f"columns {first}-{last} ({name}) {error}, got {text!r}{decimals(text)}"))
            return None


def _element_set(name: str, one: _LineCheck, two: _LineCheck) -> tuple[ElementSet | None, list[str]]:
    faults: list[str] = []
    number = one.field("catalogue number", 3, 7, catalog_number, faults)
    number_again = two.field("catalogue number", 3, 7, catalog_number, faults)
    if number != number_again and not faults:
        faults.append(two.fault(f"catalogue number must be that of line 1, {number}, got {number_again}"))
    fields = {
        "epoch": one.field("epoch", 19, 32, _epoch, faults),
        "mean_motion_dot": one.field("rate of mean motion", 34, 43, _number, faults),
        "mean_motion_ddot": one.field("second rate of mean motion", 45, 52, _with_exponent, faults),
        "bstar": one.field("B* drag term", 54, 61, _with_exponent, faults),
        "inclination_deg": two.field("inclination", 9, 16, _within(180), faults),
        "ra_of_asc_node_deg": two.field("right ascension of the ascending node", 18, 25, _within(360), faults),
        "eccentricity": two.field("eccentricity", 27, 33, _fraction, faults),
        "arg_of_pericenter_deg": two.field("argument of perigee", 35, 42, _within(360), faults),
        "mean_anomaly_deg": two.field("mean anomaly", 44, 51, _within(360), faults),
        "mean_motion_rev_day": two.field("mean motion", 53, 63, _number, faults),
        "rev_at_epoch": two.field("revolution number", 64, 68, _whole, faults),
    }
    name = name or str(number)
    if not name.isprintable() or len(name) > 80:
        faults.append(f"{one.path}: line {one.number - 1}: a name must be printable, up to 80 characters, got {name!r}")
    if faults:
        return None, faults
    designator = one.line[9:17].strip()
    return ElementSet(name=name, catalog_number=number, international_designator=designator, **fields), []


def catalog_number(text: str) -> str:
    """Five columns as a decimal number; a letter in front counts ten thousands (alpha-5: A is 10, I and O left out)."""
    digits = text.strip()
    if not re.fullmatch(r"\d{1,5}|[A-Z]\d{4}", digits) or digits[0] in "IO":
        raise ValueError("must be digits, or a letter but I and O and four digits")
    return str(int(digits)) if digits.isdigit() else f"{ALPHA5.index(digits[0]) + 10}{digits[1:]}"


def _epoch(text: str) -> datetime:
    if not re.fullmatch(r"\d\d[ \d]{3}\.\d{8}", text):
        raise ValueError("must be a two-digit year and day of year with eight decimals")
    year, day = int(text[:2]), float(text[2:])
    opening = datetime(year + (1900 if year >= 57 else 2000), 1, 1, tzinfo=UTC)
    moment = opening + timedelta(days=day - 1)
    if moment.year != opening.year:
        raise ValueError("must be a day of that year, from 1 to 365 or 366")
    return moment


def _number(text: str) -> float:
    if not re.fullmatch(r"\s*[-+]?\s*\d*\.\d+\s*", text):
        raise ValueError("must be a decimal number")
    return float(text.replace(" ", ""))


def _with_exponent(text: str) -> float:
    match = re.fullmatch(r"\s*([-+ ]?)(\d{5})([-+ ]\d)\s*", text)
    if not match:
        raise ValueError("must be five digits behind an assumed point and a power of ten, as 12345-4")
    sign, digits, power = match.groups()
    return float(f"{sign.strip()}0.{digits}e{power.strip()}")


def _fraction(text: str) -> float:
    if not re.fullmatch(r"[ \d]*\d", text):
        raise ValueError("must be seven digits behind an assumed point")
    return float("0." + text.replace(" ", "0"))


def _within(largest: float):
    def convert(text: str) -> float:
        value = _number(text)
        if not 0 <= value <= largest:
            raise ValueError(f"must be from 0 to {largest} deg")
        return value

    return convert


def _whole(text: str) -> int:
    if not re.fullmatch(r"[ \d]*", text):
        raise ValueError("must be a whole number")
    return int(text.strip() or 0)
