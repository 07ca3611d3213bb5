"""Orbits as the user gives them: a file of element sets (TLE, OMM) or an ephemeris message (OEM)."""

import re
from datetime import UTC, datetime
from pathlib import Path

from planner.errors import InputError
from planner.mission import oem, omm, tle
from planner.mission.orbit import ElementSet, Ephemeris, iso
from planner.mission.text import read_text
from planner.units import HOUR_S

EMPTY_CELLS = ' ,;\t"'
SEPARATOR_LINE = re.compile(r'"?sep=', re.IGNORECASE)
CSV_HEADER = re.compile(r'MEAN_MOTION"?\s*[,;\t]|[,;\t]\s*"?MEAN_MOTION', re.IGNORECASE)
TLE_LINE = re.compile(r"1 [ 0-9A-Z]{5}[A-Z ] [^,<]{40}")
FOR_SGP4 = (*omm.NUMBERS.values(), "bstar")
MOST_NESTED = 5_000_000  # a tree takes many times the memory of its text
__all__ = ["ElementSet", "Ephemeris", "read_elements", "which_set"]


def read_elements(path, at: datetime) -> dict[str, ElementSet | Ephemeris]:
    """Every satellite of a file by name, each with its newest set at or before `at`, else with its oldest.

    TLE, OMM as keyword lines, XML, JSON or CSV, or OEM as keyword lines: told apart by how the text begins.
    How many sets there were stands in `sets_in_file`; `which_set` says it in words.

    Raises
    ------
    InputError : all faults of the file at once, each with file, line or message, rule and the value received; also for
        a set that SGP4 refuses, a file over 50 MB, or a naive `at`
    """
    if at.tzinfo is None:
        raise InputError(f"at must carry a time zone, got {at!r}; if it is UTC, write {at.isoformat()}+00:00")
    text = read_text(Path(path))
    parse = _parser(text)
    if parse in (omm.parse_xml, omm.parse_json) and len(text) > MOST_NESTED:
        raise InputError(f"{path}: must be at most {MOST_NESTED} characters as XML or JSON, got {len(text)}")
    sets, faults = parse(text, str(path))
    if not sets and not faults:
        faults = [f"{path}: must hold at least one element set or ephemeris, got none"]
    by_name: dict[str, list] = {}
    for one in sets:
        by_name.setdefault(one.name, []).append(one)
    faults = faults + _name_faults(by_name, path)
    chosen = {name: _newest_before(candidates, at) for name, candidates in by_name.items()}
    for name, one in chosen.items():
        faults = faults + _epoch_faults(one, by_name[name], path) + _sgp4_faults(one, path)
    if faults:
        raise InputError(*faults)
    return chosen


def which_set(elements: ElementSet | Ephemeris, at: datetime) -> str:
    """Which set is used, as "element set of epoch 2026-12-06T18:00:00Z, 6.0 h old at the start; 3 in the file"."""
    hours = (at - elements.epoch).total_seconds() / HOUR_S
    age = f"{abs(hours):.1f} h" if abs(hours) < 48 else f"{abs(hours) / 24:.1f} days"
    kind = "ephemeris" if elements.source == "OEM" else "element set"
    when = elements.epoch.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
    side = "old at" if hours >= 0 else "younger than"
    return f"{kind} of epoch {when}, {age} {side} the start; {elements.sets_in_file} in the file"


def _parser(text: str):
    """The reader for a text, by how it begins."""
    begin = text.lstrip()[:4000]
    lines = [line for line in begin.splitlines() if line.strip(EMPTY_CELLS) and not SEPARATOR_LINE.match(line)]
    if any(TLE_LINE.match(line) for line in lines[1:2]):  # whatever the name in the line above begins with
        return tle.parse_tle
    if begin.startswith("<"):
        return omm.parse_xml
    if begin.startswith(("{", "[")):
        return omm.parse_json
    if lines and CSV_HEADER.search(lines[0]):
        return omm.parse_csv
    if begin.startswith("CCSDS_OEM_VERS"):
        return oem.parse_oem
    if begin.startswith("CCSDS_OMM_VERS"):
        return omm.parse_keywords
    return tle.parse_tle


def _newest_before(sets: list, at: datetime):
    by_epoch = sorted(sets, key=lambda one: one.epoch)
    usable = [one for one in by_epoch if one.epoch <= at] or by_epoch[:1]
    newer = None if usable[-1] is by_epoch[-1] else by_epoch[-1].epoch
    return usable[-1].model_copy(update={"sets_in_file": len(sets), "newer_epoch": newer})


def _name_faults(by_name: dict[str, list], path) -> list[str]:
    """One name must mean one satellite."""
    numbers = {name: sorted({one.catalog_number for one in candidates}) for name, candidates in by_name.items()}
    return [
        f"{path}: {name}: one name must stand for one satellite, got catalogue numbers {', '.join(found)}"
        for name, found in numbers.items()
        if len(found) > 1
    ]


def _epoch_faults(chosen, candidates: list, path) -> list[str]:
    """One epoch must mean one orbit, where that epoch is the one taken."""
    if isinstance(chosen, Ephemeris):
        return []
    for other in candidates:
        differ = [field for field in FOR_SGP4 if getattr(other, field) != getattr(chosen, field)]
        if (other.epoch, other.catalog_number) == (chosen.epoch, chosen.catalog_number) and differ:
            values = " and ".join(f"{getattr(one, differ[0])!r}" for one in (other, chosen))
            return [
                f"{path}: {chosen.name}: element sets of one epoch must be alike, got two of {iso(chosen.epoch)} whose"
                f" {differ[0]} are {values}; leave one of them in the file"
            ]
    return []


def _sgp4_faults(one, path) -> list[str]:
    if isinstance(one, Ephemeris):
        return []
    try:
        one.sgp4_model()
    except InputError as error:
        return [f"{path}: {fault}" for fault in error.faults]
    return []
