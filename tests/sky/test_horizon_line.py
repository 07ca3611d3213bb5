"""Passes cut by a horizon's line, against a scan ten times a second."""

import numpy as np
import pytest
from sky_examples import clock_of, elements_of, station

from planner.sky.passes import find_passes
from planner.sky.sites import look, mask_deg
from planner.sky.track import track_elements

TEN_MILLISECONDS = 0.010
SCAN_S = 0.1
LINES = {
    "a mast": ((0.0, 5.0), (118.0, 5.0), (120.0, 40.0), (122.0, 5.0)),
    "teeth": tuple((float(azimuth), 5.0 if azimuth % 20 else 30.0) for azimuth in range(0, 360, 10)),
    "a wall across north": ((20.0, 5.0), (21.0, 2.0), (330.0, 2.0), (331.0, 25.0)),
    "a valley": ((0.0, 25.0), (80.0, 25.0), (90.0, 3.0), (100.0, 25.0)),
}


@pytest.mark.parametrize("line", LINES.values(), ids=LINES)
def test_pieces_are_those_of_a_fine_scan(line):
    clock = clock_of(2.0)
    site = station(60.0, 10.0, horizon=line, min_elevation_deg=3.0)
    track = track_elements(clock, "t", elements_of("marshlight"))
    passes = find_passes(clock, [track], [site])
    time_s = np.arange(0, clock.span_s, SCAN_S)
    view = look(*track.at(time_s), site)
    above = view.elevation_deg > mask_deg(site, view.azimuth_deg)
    rises, sets = time_s[1:][above[1:] & ~above[:-1]], time_s[1:][~above[1:] & above[:-1]]
    long = passes.take(passes.duration_s > SCAN_S)
    assert len(rises) >= len(passes.take(passes.duration_s > 2 * SCAN_S))
    for rise_s, set_s in zip(rises, sets, strict=True):
        near = np.argmin(np.abs(long.aos_s - rise_s))
        assert rise_s - SCAN_S - TEN_MILLISECONDS <= long.aos_s[near] <= rise_s + TEN_MILLISECONDS
        assert set_s - SCAN_S - TEN_MILLISECONDS <= long.los_s[near] <= set_s + TEN_MILLISECONDS
        inside = (time_s >= long.aos_s[near]) & (time_s <= long.los_s[near])
        assert view.elevation_deg[inside].max() <= long.max_elevation_deg[near] + 1e-6


def test_the_line_and_the_minimum_elevation_hold_together():
    track = track_elements(clock_of(2.0), "t", elements_of("marshlight"))
    level = ((0.0, 3.0), (180.0, 3.0))
    plain, lined = (
        find_passes(clock_of(2.0), [track], [station(60.0, 10.0, min_elevation_deg=8.0, horizon=line)])
        for line in ((), level)
    )
    assert list(lined.aos_s) == pytest.approx(list(plain.aos_s), abs=TEN_MILLISECONDS)
    assert list(lined.pass_id) == list(plain.pass_id)


def test_a_level_line_is_a_minimum_elevation():
    track = track_elements(clock_of(2.0), "t", elements_of("low_inclination"))
    level = ((0.0, 8.0), (120.0, 8.0), (240.0, 8.0))
    plain, lined = (
        find_passes(clock_of(2.0), [track], [each])
        for each in (
            station(45.0, 10.0, min_elevation_deg=8.0),
            station(45.0, 10.0, min_elevation_deg=0.0, horizon=level),
        )
    )
    assert list(lined.los_s) == pytest.approx(list(plain.los_s), abs=TEN_MILLISECONDS)
    assert list(lined.max_elevation_deg) == pytest.approx(list(plain.max_elevation_deg), abs=1e-6)


def test_stations_with_and_without_a_line_do_not_disturb_each_other():
    track = track_elements(clock_of(2.0), "t", elements_of("marshlight"))
    lined, plain = station(60.0, 10.0, name="a", horizon=LINES["teeth"]), station(60.0, 10.0, name="b")
    both = find_passes(clock_of(2.0), [track], [lined, plain])
    for index, site in enumerate((lined, plain)):
        alone = find_passes(clock_of(2.0), [track], [site])
        assert list(both.take(both.station_index == index).pass_id) == list(alone.pass_id)
