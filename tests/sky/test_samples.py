"""Samples of passes: where they lie, what they carry, and what is lost to the mount and to the Sun."""

import numpy as np
import pytest
from sky_examples import FIVE_SITES, clock_of, element_set, elements_of, station

from planner.sky.beam import least_sun_separation_deg, sun_in_beam_s
from planner.sky.passes import find_passes
from planner.sky.samples import doppler_hz, doppler_rate_hz_s, sample_passes
from planner.sky.sites import look, station_position_km
from planner.sky.sun import sun_position_km
from planner.sky.track import track_elements
from planner.units import C_M_S

STEP_S = 10.0
# Gravity's flattening, neglected in the range's acceleration, is 1e-3 of it: of at most 0.12 km/s2 of range.
NEGLECTED_KM_S2 = 1.5e-4
A_SCAN_STEP_S = 0.05


@pytest.fixture(scope="module")
def week():
    clock = clock_of(3.0)
    tracks = [track_elements(clock, e.name, e) for e in map(elements_of, ("marshlight", "low_inclination"))]
    passes = find_passes(clock, tracks, FIVE_SITES)
    return clock, tracks, passes, sample_passes(clock, tracks, FIVE_SITES, passes, STEP_S)


def test_each_pass_owns_its_samples_from_aos_through_tca_to_los(week):
    _, _, passes, samples = week
    assert len(samples.offsets) == len(passes) + 1
    assert samples.offsets[-1] == len(samples)
    for k in range(len(passes)):
        time_s = samples.time_s[samples.of(k)]
        assert (samples.pass_index[samples.of(k)] == k).all()
        assert time_s[0] == pytest.approx(passes.aos_s[k])
        assert time_s[-1] == pytest.approx(passes.los_s[k])
        assert np.abs(time_s - passes.tca_s[k]).min() == pytest.approx(0.0, abs=1e-9)
        assert np.diff(time_s).min() > 0
        assert np.diff(time_s).max() <= STEP_S + 1e-9


def test_angles_and_range_are_those_of_a_look(week):
    _, tracks, passes, samples = week
    for k in (0, 17, len(passes) - 1):
        part = samples.of(k)
        states = tracks[passes.satellite_index[k]].at(samples.time_s[part])
        view = look(*states, FIVE_SITES[passes.station_index[k]])
        assert np.array_equal(samples.position_km[part], states[0])
        assert samples.azimuth_deg[part] == pytest.approx(view.azimuth_deg)
        assert samples.elevation_deg[part] == pytest.approx(view.elevation_deg)
        assert samples.range_rate_km_s[part] == pytest.approx(view.range_rate_km_s)
        assert samples.elevation_deg[part].max() == pytest.approx(passes.max_elevation_deg[k])


def test_the_ranges_acceleration_is_the_slope_of_its_rate(week):
    _, tracks, passes, samples = week
    site = np.array([station_position_km(each) for each in FIVE_SITES])[passes.station_index[samples.pass_index]]
    rates = []
    for shift_s in (-0.5, 0.5):
        rate = np.empty(len(samples))
        for index, track in enumerate(tracks):
            mine = passes.satellite_index[samples.pass_index] == index
            position, velocity = track.at(samples.time_s[mine] + shift_s)
            away = position - site[mine]
            rate[mine] = (away * velocity).sum(axis=1) / np.linalg.norm(away, axis=1)
        rates.append(rate)
    assert np.abs(samples.range_acceleration_km_s2 - (rates[1] - rates[0])).max() < NEGLECTED_KM_S2


def test_doppler_is_positive_on_approach_and_falls_through_zero():
    assert doppler_hz(-7.0, 26_250.0) == pytest.approx(7e3 / C_M_S * 26_250e6)  # 613 kHz (computed)
    assert doppler_hz(np.array([1.0, 0.0]), 2200.0)[1] == 0.0
    assert doppler_rate_hz_s(0.1, 2200.0) == pytest.approx(-100 / C_M_S * 2200e6)


def test_the_doppler_curve_of_a_pass_falls_all_along(week):
    _, _, passes, samples = week
    k = int(np.argmax(passes.max_elevation_deg))
    shift = doppler_hz(samples.range_rate_km_s[samples.of(k)], 8200.0)
    assert (np.diff(shift) < 0).all()
    assert 150e3 < shift[0] < 220e3  # 6 to 7.5 km/s at X band
    assert (doppler_rate_hz_s(samples.range_acceleration_km_s2[samples.of(k)], 8200.0) < 0).all()


# --- the mount -------------------------------------------------------------------------------------------------------


def sampled(site, days=7.0, kind="marshlight"):
    clock = clock_of(days)
    track = track_elements(clock, "t", elements_of(kind))
    passes = find_passes(clock, [track], [site])
    return track, passes, sample_passes(clock, [track], [site], passes, STEP_S)


def test_a_fast_mount_loses_nothing():
    fast = station(antenna={"max_azimuth_rate_deg_s": 1e4, "max_elevation_rate_deg_s": 1e3})
    _, _, samples = sampled(fast)
    assert samples.trackable.all()
    assert not samples.lost_s.any()


@pytest.mark.parametrize("rate_deg_s", [1.0, 3.0, 10.0])
def test_seconds_lost_are_those_of_a_follower_stepped_through_the_pass(rate_deg_s):
    site = station(60.0, 10.0, antenna={"max_azimuth_rate_deg_s": rate_deg_s})
    track, passes, samples = sampled(site)
    checked = 0
    for k in np.argsort(passes.max_elevation_deg)[-12:]:
        time_s = np.arange(passes.aos_s[k], passes.los_s[k], A_SCAN_STEP_S)
        azimuth = np.unwrap(look(*track.at(time_s), site).azimuth_deg, period=360.0)
        mount, lost = azimuth[0], 0
        for angle in azimuth[1:]:
            mount += np.clip(angle - mount, -rate_deg_s * A_SCAN_STEP_S, rate_deg_s * A_SCAN_STEP_S)
            lost += abs(angle - mount) > 1e-6
        assert samples.lost_s[k] == pytest.approx(lost * A_SCAN_STEP_S, abs=1.5)  # two points of the coarser search
        checked += lost > 0
    assert checked
    assert (~samples.trackable).any()


def test_lost_seconds_lie_around_the_top_and_are_not_trackable():
    site = station(60.0, 10.0, antenna={"max_azimuth_rate_deg_s": 2.0})
    _, passes, samples = sampled(site)
    lost = samples.lost_s > 0
    assert lost.any()
    assert not lost.all()
    assert (samples.lost_from_s[lost] < passes.tca_s[lost]).all()
    assert (samples.lost_to_s[lost] > passes.tca_s[lost]).all()
    assert passes.max_elevation_deg[lost].min() > passes.max_elevation_deg[~lost].max() - 1.0
    inside = (samples.time_s >= samples.lost_from_s[samples.pass_index]) & (
        samples.time_s < samples.lost_to_s[samples.pass_index]
    )
    assert np.array_equal(samples.trackable, ~inside)


# --- the Sun in the beam ---------------------------------------------------------------------------------------------


def test_the_suns_seconds_in_a_beam_are_those_of_a_scan():
    clock = clock_of(20.0)
    site = station(20.0, 30.0, min_elevation_deg=5.0)
    track = track_elements(clock, "t", elements_of("marshlight"))
    passes = find_passes(clock, [track], [site])
    samples = sample_passes(clock, [track], [site], passes, STEP_S)
    half_deg = 8.0
    seconds = sun_in_beam_s(clock, [track], [site], passes, samples, half_deg)
    assert np.count_nonzero(seconds) >= 3
    assert seconds.shape == (len(passes),)
    for k in range(len(passes)):
        time_s = np.arange(passes.aos_s[k], passes.los_s[k], A_SCAN_STEP_S)
        axis = track.at(time_s)[0] - station_position_km(site)
        sun = sun_position_km(clock, time_s) - station_position_km(site)
        cosine = (axis * sun).sum(axis=1) / np.linalg.norm(axis, axis=1) / np.linalg.norm(sun, axis=1)
        assert seconds[k] == pytest.approx(
            np.count_nonzero(cosine > np.cos(np.radians(half_deg))) * A_SCAN_STEP_S, abs=0.4
        )
    assert (
        least_sun_separation_deg(passes, samples)[seconds == 0] > half_deg - 9.0
    ).all()  # ten seconds of a pass turn up to 9 deg
    assert np.array_equal(
        sun_in_beam_s(clock, [track], [site], passes, samples, np.full(len(passes), half_deg)), seconds
    )


def test_a_geostationary_satellite_meets_the_sun_near_the_equinox_only():
    """Common practice, no source: Sun outages come around the equinoxes, and last minutes."""
    from datetime import UTC, datetime

    from planner.sky.clock import Clock

    outages = {}
    for month in (3, 6):
        start = datetime(2027, month, 1, tzinfo=UTC)
        clock = Clock(start, 12 * 86_400.0)
        elements = element_set(
            mean_motion_rev_day=1.00271, inclination_deg=0.05, eccentricity=0.0002, epoch=start, mean_anomaly_deg=100.0
        )
        track = track_elements(clock, "g", elements)
        site = station(50.0, float(np.degrees(np.arctan2(*track.at(0.0)[0][1::-1]))), min_elevation_deg=5.0)
        passes = find_passes(clock, [track], [site])
        samples = sample_passes(clock, [track], [site], passes, 120.0)
        outages[month] = sun_in_beam_s(clock, [track], [site], passes, samples, 0.5)
    assert outages[3].max() > 60.0
    assert outages[3].max() < 600.0
    assert not outages[6].any()


def test_no_passes_no_samples():
    clock = clock_of(1.0)
    site = station(80.0, 0.0)
    track = track_elements(clock, "t", element_set(inclination_deg=5.0))
    passes = find_passes(clock, [track], [site])
    samples = sample_passes(clock, [track], [site], passes)
    assert len(samples) == 0
    assert list(samples.offsets) == [0]
    assert least_sun_separation_deg(passes, samples).size == 0
    assert sun_in_beam_s(clock, [track], [site], passes, samples, 1.0).size == 0
