"""Thousands of spoiled files of every kind: what is read is sound, or each fault is told in printable lines.

A share of what is read goes on to passes and link budgets: finite figures without a warning, or a fault told.
`benchmarks/spoil.py` takes such files through every command.

SPOILED_FILES in the environment says how many of each kind (default 2000; 10000 take about five times as long).
"""

import itertools
import json
import os
import shutil
import warnings
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, seed, settings
from hypothesis import strategies as st
from spoiling import spoiled, strained, with_true_checksums

from planner import find_passes, link_budget
from planner.errors import LONGEST_TOLD, MOST_TOLD, InputError
from planner.link import check_modes
from planner.mission.contacts import read_contacts
from planner.mission.elements import Ephemeris, read_elements
from planner.mission.files import load_mission
from planner.mission.pattern import read_pattern

ROOT = Path(__file__).parents[2]
HOW_MANY = int(os.environ.get("SPOILED_FILES", "2000"))
AT = datetime(2026, 12, 7, tzinfo=UTC)
ONE_IN = 8  # of the numbers, those whose mission goes down the river

CONTACTS = b"""pass_id,satellite,station,mode,tx_on_utc,tx_off_utc,volume_mbit
marshlight-1.vardholm.20261207-01,MARSHLIGHT-1,Vardholm,K high rate,2026-12-07T01:00:00.000Z,2026-12-07T01:05:00Z,1.5
marshlight-1.vardholm.20261207-02,MARSHLIGHT-1,Vardholm,S low rate,2026-12-07T02:36:00.000Z,2026-12-07T02:41:00Z,0.5
"""
PATTERN = b"off_axis_deg,gain_dbi\n" + b"".join(b"%d,%.1f\n" % (a, 6 - a / 5) for a in range(0, 181, 20))

thousands = lambda test: seed(8)(  # noqa: E731
    settings(max_examples=HOW_MANY, database=None, deadline=None, suppress_health_check=list(HealthCheck))(
        given(st.integers(0, 2**63))(test)
    )
)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """The demo with one station and a measured pattern, quick to read."""
    folder = tmp_path_factory.mktemp("spoiled")
    for name in ("missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, folder / name)
    mission = folder / "missions" / "marshlight.toml"
    text = mission.read_text()
    begin, _, rest = text.partition("stations = [")
    text = f'{begin}stations = ["../stations/vardholm.toml"]{rest.partition("]")[2]}'
    text = text.replace("days = 7.0", "days = 0.4")
    mission.write_text(text.replace('"patch"\ngain_dbi = 6.0', '"measured pattern"\nfile = "pattern.csv"'))
    (folder / "missions" / "pattern.csv").write_bytes(PATTERN)
    return folder


@pytest.fixture(scope="module")
def mission(folder):
    return load_mission(folder / "missions" / "marshlight.toml")


def worsened(content: bytes, number: int) -> bytes:
    """Spoiled, or of every fourth only the numbers strained, most of which are then read."""
    return strained(content, number) if number // 16 % 4 == 0 else spoiled(content, number)


def go_down_the_river(mission, number: int) -> None:
    """Passes and budgets of a share of missions: every figure finite and no word on the screen, or a fault told."""
    if mission is None or number // 128 % ONE_IN:
        return
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        try:
            passes = find_passes(mission)
            for satellite, station in itertools.product(mission.satellites, mission.stations):
                for mode in satellite.spacecraft.transmitter:
                    budget = link_budget(mission, station.name, mode.mode, elevation_deg=30.0, satellite=satellite.name)
                    json.dumps(budget.as_dict(), allow_nan=False)
        except InputError:
            return
    assert np.isfinite(passes.select_dtypes("number").to_numpy()).all()


def check(read, path: Path, content: bytes):
    """What is read, or None where faults are told."""
    path.write_bytes(content)
    try:
        return read(path)
    except InputError as error:
        faults = error.faults
    assert 0 < len(faults) <= MOST_TOLD + 1
    assert all(fault.replace("\n    ", "").isprintable() for fault in faults)
    assert max(map(len, faults)) <= 2 * LONGEST_TOLD  # escapes are longer than what they stand for
    return None


def read_whole(path: Path):
    mission = load_mission(path)
    check_modes(mission)
    hash(mission)
    return mission


@thousands
def test_mission_files(folder, number):
    path = folder / "missions" / "marshlight.toml"
    whole = path.read_bytes()
    try:
        mission = check(read_whole, path, worsened(whole, number))
    finally:
        path.write_bytes(whole)
    assert mission is None or 0 < mission.span_s <= 60 * 86_400
    go_down_the_river(mission, number)


@thousands
def test_station_files(folder, number):
    path = folder / "stations" / "vardholm.toml"
    whole = path.read_bytes()
    try:
        mission = check(lambda _: read_whole(folder / "missions" / "marshlight.toml"), path, worsened(whole, number))
    finally:
        path.write_bytes(whole)
    assert mission is None or mission.stations[0].antenna.diameter_m > 0
    go_down_the_river(mission, number)


@thousands
def test_pattern_files(folder, number):
    rows = check(read_pattern, folder / "spoiled.csv", worsened(PATTERN, number))
    assert rows is None or (rows[0][0] == 0 and all(a < b for (a, _), (b, _) in itertools.pairwise(rows)))


@thousands
def test_contact_files(folder, marshlight, number):
    contacts = check(lambda path: read_contacts(path, marshlight), folder / "contacts.csv", worsened(CONTACTS, number))
    assert contacts is None or all(contact.session.duration_s > 0 for contact in contacts)


def carrying(mission, elements):
    """The mission with these elements, where they are not too old for it; of an ephemeris its first hour."""
    if abs(elements.epoch - mission.start) > timedelta(days=mission.policy.elements_max_age_days):
        return None
    satellite = mission.satellites[0].model_copy(update={"name": elements.name, "elements": elements})
    short = {"start": AT - timedelta(hours=1.5), "days": 0.05} if isinstance(elements, Ephemeris) else {}
    return mission.model_copy(update={"satellites": (satellite,)} | short)


def check_elements(folder, mission, name: str, number: int, mend=bytes):
    whole = (ROOT / "tle_samples" / name).read_bytes()[:4000]  # of the ephemeris, the first states
    content = mend(worsened(whole, number))
    sets = check(lambda path: read_elements(path, AT), folder / f"spoiled.{name}", content)
    for one in (sets or {}).values():
        assert one.epoch.tzinfo is not None
        assert one.name.isprintable()
        assert isinstance(one, Ephemeris) or one.sgp4_model().error == 0
        go_down_the_river(carrying(mission, one), number)


@thousands
def test_two_line_element_files(folder, mission, number):
    check_elements(folder, mission, "marshlight.tle", number, with_true_checksums if number % 3 else bytes)


@thousands
def test_files_of_several_kinds_of_omm(folder, mission, number):
    names = ("two_satellites.omm", "marshlight.omm.xml", "marshlight.omm.json", "marshlight.omm.csv")
    check_elements(folder, mission, names[number % 4], number)


@thousands
def test_ephemeris_files(folder, mission, number):
    check_elements(folder, mission, "marshlight.oem", number)
