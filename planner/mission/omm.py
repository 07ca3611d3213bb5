"""Orbit mean-elements messages (OMM, CCSDS 502.0-B-3) as keyword lines, XML, JSON and CSV."""

import csv
import difflib
import io
import json
from xml.etree import ElementTree

from planner.mission.base import is_name
from planner.mission.ccsds import NO_UNIT, date, keyword_lines, quantity
from planner.mission.numbers import number as number_of
from planner.mission.orbit import ElementSet
from planner.mission.table import MAYBE_DECIMAL_COMMAS, separator_fault, with_content
from planner.mission.text import decimals, shown

NUMBERS = {
    "MEAN_MOTION": "mean_motion_rev_day",
    "ECCENTRICITY": "eccentricity",
    "INCLINATION": "inclination_deg",
    "RA_OF_ASC_NODE": "ra_of_asc_node_deg",
    "ARG_OF_PERICENTER": "arg_of_pericenter_deg",
    "MEAN_ANOMALY": "mean_anomaly_deg",
}
OPTIONAL_NUMBERS = {
    "BSTAR": "bstar",
    "MEAN_MOTION_DOT": "mean_motion_dot",
    "MEAN_MOTION_DDOT": "mean_motion_ddot",
}
# The only values SGP4 can work with. Bare rows of CSV and JSON may leave the keyword out.
ONLY = {
    "CENTER_NAME": ("EARTH",),
    "REF_FRAME": ("TEME", "TEME OF DATE", "TEME OF EPOCH"),
    "TIME_SYSTEM": ("UTC",),
    "MEAN_ELEMENT_THEORY": ("SGP4", "SGP/SGP4"),
}
# The standard's units, table 4-3, the only ones that may stand behind a number
UNITS = {
    "MEAN_MOTION": "rev/day",
    "ECCENTRICITY": NO_UNIT,
    "INCLINATION": "deg",
    "RA_OF_ASC_NODE": "deg",
    "ARG_OF_PERICENTER": "deg",
    "MEAN_ANOMALY": "deg",
    "BSTAR": "1/ER",
    "MEAN_MOTION_DOT": "rev/day**2",
    "MEAN_MOTION_DDOT": "rev/day**3",
}
NOT_OF_THE_MESSAGE = ("COMMENT", "userDefinedParameters", "omm")  # XML elements: the user's own, or another message
REQUIRED = ("OBJECT_NAME", "OBJECT_ID", *ONLY, "EPOCH", *NUMBERS)
LARGEST_DEG = {"INCLINATION": 180.0, "RA_OF_ASC_NODE": 360.0, "ARG_OF_PERICENTER": 360.0, "MEAN_ANOMALY": 360.0}

Parsed = tuple[list[ElementSet], list[str]]


def parse_keywords(text: str, path: str) -> Parsed:
    """Messages as `KEYWORD = value`, each opened by CCSDS_OMM_VERS."""
    messages: list[tuple[str, dict[str, str]]] = []
    faults = []
    for number, keyword, value in keyword_lines(text):
        if keyword == "CCSDS_OMM_VERS":
            messages.append((f"{path}: message at line {number}", {}))
        elif not keyword:
            faults.append(f"{path}: line {number}: must be KEYWORD = value, got {value!r}")
        elif keyword in messages[-1][1]:
            faults.append(f"{path}: line {number}: {keyword} must stand once in a message, got it again")
        else:
            messages[-1][1][keyword] = value
    return _gathered(messages, faults, REQUIRED)


def parse_xml(text: str, path: str) -> Parsed:
    """Messages as <omm> elements, alone or inside <ndm>. A document type is refused, so no entity is ever expanded."""
    if "<!DOCTYPE" in text.upper() or "<!ENTITY" in text.upper():
        return [], [f"{path}: must not declare a document type or entities, got a <!DOCTYPE or <!ENTITY"]
    try:
        root = ElementTree.fromstring(text.encode("utf-8"))
    except (ElementTree.ParseError, LookupError, ValueError) as error:
        return [], [f"{path}: must be well-formed XML in UTF-8, got {error}"]
    messages: list[tuple[str, dict[str, str]]] = []
    faults: list[str] = []
    for index, message in enumerate((e for e in root.iter() if _tag(e) == "omm"), 1):
        where = f"{path}: message {index}"
        messages.append((where, _once(where, map(_keyword, _leaves(message)), faults)))
    return _gathered(messages, faults, REQUIRED)


def _leaves(message):
    """The elements that hold a value of this message, in order."""
    waiting = list(message)[::-1]
    while waiting:
        element = waiting.pop()
        if _tag(element) in NOT_OF_THE_MESSAGE:
            continue
        if not len(element):
            yield element
        waiting.extend(list(element)[::-1])


def _keyword(element) -> tuple[str, str]:
    """An element as keyword and value, with its unit as keyword lines have it."""
    value, unit = (element.text or "").strip(), element.get("units")
    return _tag(element), f"{value} [{unit}]" if unit else value


def _once(where: str, pairs, faults: list[str]) -> dict[str, str]:
    """The pairs by keyword; a fault for each keyword that stands again."""
    values: dict[str, str] = {}
    for keyword, value in pairs:
        if keyword in values:
            again = f"{shown(values[keyword])} and {shown(value)}"
            faults.append(f"{where}: {shown(keyword)} must stand once in a message, got {again}")
        values.setdefault(keyword, value)
    return values


def _tag(element) -> str:
    return element.tag.rpartition("}")[2]


class _Pairs(list):
    """A JSON object as (keyword, value) pairs, in which a keyword that stands twice still does."""


def parse_json(text: str, path: str) -> Parsed:
    """One object, or a list of objects."""
    try:
        rows = json.loads(text, object_pairs_hook=_Pairs)
    except (ValueError, RecursionError) as error:
        return [], [f"{path}: must be JSON, got {error}"]
    rows = [rows] if isinstance(rows, _Pairs) or not isinstance(rows, list) else rows
    messages: list[tuple[str, dict[str, str]]] = []
    faults: list[str] = []
    for index, row in enumerate(rows, 1):
        where = f"{path}: message {index}"
        if isinstance(row, _Pairs) and not any(isinstance(value, list) for _, value in row):
            pairs = ((keyword, str(value)) for keyword, value in row if value is not None)
            messages.append((where, _once(where, pairs, faults)))
        else:
            got = dict(row) if isinstance(row, _Pairs) else row
            faults.append(f"{where}: must be an object of keywords and plain values, got {str(got)[:60]}")
    return _gathered(messages, faults, _bare())


def parse_csv(text: str, path: str) -> Parsed:
    """One row a message under a header of keywords."""
    try:
        rows = list(with_content(enumerate(csv.reader(io.StringIO(text, newline="")), 1)))
    except csv.Error as error:
        return [], [f"{path}: must be CSV: {error}"]
    (first, header), *rows = rows or [(1, [])]
    header = [keyword.strip().upper() for keyword in header]
    twice = sorted({keyword for keyword in header if keyword and header.count(keyword) > 1})
    if fault := separator_fault(header) or (f"columns must differ, got {shown(twice)} again" if twice else ""):
        return [], [f"{path}: row {first}: {fault}"]
    messages, faults = [], []
    for number, row in rows:
        if len(row) == len(header):
            messages.append((f"{path}: row {number}", dict(zip(header, map(str.strip, row), strict=True))))
        else:
            faults.append(
                f"{path}: row {number}: must have {len(header)} columns as the header, got {len(row)}"
                + (MAYBE_DECIMAL_COMMAS if len(row) > len(header) else "")
            )
    return _gathered(messages, faults, _bare())


def _bare() -> tuple[str, ...]:
    return tuple(keyword for keyword in REQUIRED if keyword not in (*ONLY, "OBJECT_ID"))


def _misspelt(keyword: str, values) -> str:
    """What stands in place of a keyword: one like it that is none, or nothing."""
    close = difflib.get_close_matches(keyword, [other for other in values if other not in REQUIRED], n=1, cutoff=0.8)
    return repr(close[0]) if close else "none"


def _gathered(messages, faults: list[str], required) -> Parsed:
    sets = []
    for where, values in messages:
        values = {keyword: value for keyword, value in values.items() if value != ""}
        found = [
            f"{where}: {keyword} must be given, got {_misspelt(keyword, values)}"
            for keyword in required
            if keyword not in values
        ]
        element_set, more = _element_set(where, values) if not found else (None, [])
        sets += [element_set] if element_set else []
        faults = faults + found + more
    return sets, faults


def _element_set(where: str, values: dict[str, str]) -> tuple[ElementSet | None, list[str]]:
    faults = [
        f"{where}: {keyword} must be {' or '.join(allowed)}, got {values[keyword]!r}"
        for keyword, allowed in ONLY.items()
        if values.get(keyword, allowed[0]).upper() not in allowed
    ]
    if values.get("EPHEMERIS_TYPE") == "4":
        faults.append(f"{where}: EPHEMERIS_TYPE must be 0 (SGP4), got '4' (SGP4-XP, which is not public)")

    def converted(keyword: str, convert, default=None):
        if keyword not in values:
            return default
        try:
            return convert(values[keyword])
        except ValueError as error:
            faults.append(f"{where}: {keyword} {error}, got {values[keyword]!r}{decimals(values[keyword])}")
            return default

    numbers = {field: converted(keyword, _number(keyword)) for keyword, field in NUMBERS.items()}
    numbers |= {field: converted(keyword, _number(keyword), 0.0) for keyword, field in OPTIONAL_NUMBERS.items()}
    epoch = converted("EPOCH", date)
    name, number = values["OBJECT_NAME"], values.get("NORAD_CAT_ID", "")
    if not is_name(name):
        faults.append(f"{where}: OBJECT_NAME must be one printable line of 1 to 80 characters, got {name!r}")
    revolution = converted("REV_AT_EPOCH", _whole, 0)
    if faults:
        return None, faults
    return ElementSet(
        name=name,
        catalog_number=number,
        international_designator=values.get("OBJECT_ID", ""),
        epoch=epoch,
        rev_at_epoch=revolution,
        source="OMM",
        **numbers,
    ), []


def _number(keyword: str):
    largest_deg = LARGEST_DEG.get(keyword)

    def convert(text: str) -> float:
        value = quantity(text, UNITS[keyword])
        if not abs(value) < 1e6:
            raise ValueError("must be below a million")
        if keyword == "ECCENTRICITY" and not 0 <= value < 1:
            raise ValueError("must be at least 0 and below 1")
        if largest_deg is not None and not 0 <= value <= largest_deg:
            raise ValueError(f"must be from 0 to {largest_deg:g} deg")
        return value

    return convert


def _whole(text: str) -> int:
    try:
        return int(number_of(text))
    except (ValueError, OverflowError):
        raise ValueError("must be a whole number") from None
