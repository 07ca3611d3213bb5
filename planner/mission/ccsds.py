"""What the orbit data messages of CCSDS 502.0-B-3 share: keyword = value lines, and dates."""

import re
from datetime import UTC, datetime, timedelta

from planner.mission.numbers import number as number_of

NO_UNIT = "n/a"  # as the standard's tables have it
DATE = re.compile(r"(\d{4})-(?:(\d\d)-(\d\d)|(\d{3}))T(\d\d):(\d\d):(\d\d)(\.\d+)?Z?", re.ASCII)


def date(text: str) -> datetime:
    """A UTC date as the standard writes it (6.5.9: year, month and day, or year and day of year).

    Raises ValueError, worded to stand behind the keyword.
    """
    match = DATE.fullmatch(text.strip())
    if not match:
        raise ValueError("must be a date as 2026-12-06T18:00:00.000 or 2026-340T18:00:00.000")
    month, day, day_of_year = match[2], match[3], match[4]
    year, hour, minute, second = (int(part) for part in match.group(1, 5, 6, 7))
    fraction = timedelta(microseconds=round(float(match[8] or 0) * 1e6))
    if second == 60:
        raise ValueError("must not be a leap second; write the second before it or after")
    try:
        if day_of_year is None:
            return datetime(year, int(month), int(day), hour, minute, second, tzinfo=UTC) + fraction
        moment = datetime(year, 1, 1, hour, minute, second, tzinfo=UTC) + timedelta(days=int(day_of_year) - 1)
        if moment.year != year:
            raise ValueError("day of year must be from 001 to 365 or 366")
        return moment + fraction
    except (ValueError, OverflowError) as error:
        raise ValueError(f"must be a date that exists ({error})") from None


def keyword_lines(text: str):
    """(line number, keyword, value) of each line with content but comments; "" for a keyword without an equals sign."""
    for number, line in enumerate(text.splitlines(), 1):
        line = line.strip()
        if not line or line.split()[0] == "COMMENT":
            continue
        keyword, equals, value = line.partition("=")
        yield (number, keyword.strip(), value.strip()) if equals else (number, "", line)


def quantity(text: str, unit: str) -> float:
    """The number of a value as "97.5544" or "97.5544 [deg]"; ValueError for another unit and for what is no number."""
    value, bracket, stated = text.strip().removesuffix("]").partition("[")
    if bracket and "".join(stated.split()).casefold() != unit.casefold():
        raise ValueError("must be without a unit" if unit == NO_UNIT else f"must be in {unit}")
    return number_of(value)
