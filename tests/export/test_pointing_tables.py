"""Pointing tables against astropy, the refusal of old elements, and what their header says."""

import csv
import io
from dataclasses import replace
from datetime import datetime, timedelta

import astropy.units as u
import numpy as np
import pytest
from astropy.coordinates import ITRS, AltAz, CartesianRepresentation, EarthLocation
from astropy.time import Time
from astropy.utils import iers

from planner.errors import InputError
from planner.export.pointing import pointing_files, pointing_tables, useful_until

# Azimuth, elevation and range come from the same Earth-fixed position, so only the printed digits may differ.
PRINTED_DEG, PRINTED_KM = 0.0006, 0.0006
# Range rate against the slope of the printed ranges over two seconds: half a metre of print, and curvature.
SLOPE_KM_S = 0.001


def table(data: bytes):
    lines = data.decode().splitlines()
    header = [line[2:] for line in lines if line.startswith("# ")]
    rows = list(csv.DictReader(io.StringIO("\n".join(line for line in lines if not line.startswith("#")))))
    return header, {name: np.array([row[name] for row in rows]) for name in rows[0]}


def numbers(columns, name):
    return columns[name].astype(float)


def test_angles_and_range_agree_with_astropy(mission, sky, session):
    [data] = pointing_files(mission, sky, [session], step_s=30.0, refracted=False, force=True).values()
    _, columns = table(data)
    station = mission.station(session.station)
    iers.conf.auto_download = False
    place = EarthLocation.from_geodetic(
        station.longitude_deg * u.deg, station.latitude_deg * u.deg, station.altitude_m * u.m
    )
    moments = [datetime.fromisoformat(text) for text in columns["time_utc"][1:-1]]
    position_km, _ = sky.track(session.satellite).at(np.array([sky.clock.seconds(moment) for moment in moments]))
    when = Time(moments)
    from_place = CartesianRepresentation(position_km.T * u.km) - place.get_itrs().cartesian
    seen = ITRS(from_place, obstime=when, location=place).transform_to(AltAz(obstime=when, location=place))
    assert numbers(columns, "azimuth_deg")[1:-1] == pytest.approx(seen.az.deg, abs=PRINTED_DEG)
    assert numbers(columns, "elevation_deg")[1:-1] == pytest.approx(seen.alt.deg, abs=PRINTED_DEG)
    assert numbers(columns, "range_km")[1:-1] == pytest.approx(seen.distance.to_value(u.km), abs=PRINTED_KM)


def test_range_rate_and_doppler_follow_from_the_ranges(mission, sky, session):
    [data] = pointing_files(mission, sky, [session], step_s=1.0, force=True).values()
    _, columns = table(data)
    range_km, rate_km_s = numbers(columns, "range_km")[1:-1], numbers(columns, "range_rate_km_s")[1:-1]
    assert rate_km_s[1:-1] == pytest.approx((range_km[2:] - range_km[:-2]) / 2, abs=SLOPE_KM_S)
    light_km_s, printed_hz = 299_792.458, 0.2
    for mhz in (2245, 26250):
        shift_hz = numbers(columns, f"doppler_at_{mhz}_mhz_hz")[1:-1]
        assert shift_hz == pytest.approx(-rate_km_s / light_km_s * mhz * 1e6, abs=printed_hz)
        assert shift_hz[0] > 0 > shift_hz[-1]  # it comes, then it goes


def test_rows_stand_on_whole_steps_between_aos_and_los(mission, sky, session):
    [data] = pointing_files(mission, sky, [session], step_s=10.0, force=True).values()
    _, columns = table(data)
    row = np.flatnonzero(sky.passes.pass_id == session.pass_id)[0]
    assert columns["time_utc"][0] == sky.clock.iso(sky.passes.aos_s[row])
    assert columns["time_utc"][-1] == sky.clock.iso(sky.passes.los_s[row])
    assert {text[-6:] for text in columns["time_utc"][1:-1]} == {"0.000Z"}


def test_refracted_tables_say_so_and_can_be_undone(mission, sky, session):
    tables = [
        table(*pointing_files(mission, sky, [session], step_s=10.0, refracted=refracted, force=True).values())
        for refracted in (True, False)
    ]
    (header, lifted), (plain_header, plain) = tables
    lift = numbers(lifted, "refraction_deg")
    assert numbers(lifted, "elevation_deg") - lift == pytest.approx(
        numbers(plain, "elevation_deg"), abs=2 * PRINTED_DEG
    )
    assert lift[0] > 0.05
    assert any("elevation lifted by refraction (ITU-R P.834)" in line for line in header)
    assert any("geometric, no refraction" in line for line in plain_header)


def test_the_header_tells_epoch_and_latest_useful_time(mission, sky, session):
    [data] = pointing_files(mission, sky, [session], force=True).values()
    header, _ = table(data)
    epoch = mission.satellites[0].elements.epoch
    until = useful_until(mission, sky, session)
    assert until > epoch
    expected = f"element epoch: {epoch:%Y-%m-%dT%H:%M:%S}.000Z, useful until: {until:%Y-%m-%dT%H:%M}"
    assert any(line.startswith(expected) for line in header)
    assert sum(line.startswith("caution: ") for line in header) == 2


@pytest.fixture
def aged(mission):
    """The same mission as of elements four days older."""
    satellite = mission.satellites[0]
    elements = satellite.elements.model_copy(update={"epoch": satellite.elements.epoch - timedelta(days=4)})
    return mission.model_copy(update={"satellites": (satellite.model_copy(update={"elements": elements}),)})


def test_old_elements_are_refused_for_k_band_unless_forced(aged, sky, session):
    with pytest.raises(InputError) as told:
        pointing_files(aged, sky, [session])
    [fault] = told.value.faults
    assert fault.startswith(
        f"{session.pass_id} K high rate: elements of epoch 2026-12-02T18:00:00.000Z point this dish"
    )
    assert fault.endswith("take newer elements, or force")
    [data] = pointing_files(aged, sky, [session], force=True).values()
    assert b"# ELEMENTS TOO OLD for this beam" in data


def test_old_elements_still_serve_an_s_band_beam(aged, sky, session):
    low_rate = replace(session, mode="S low rate")
    [data] = pointing_files(aged, sky, [low_rate], step_s=60.0).values()
    assert b"TOO OLD" not in data


def test_a_dish_that_follows_the_signal_has_no_limit(aged, sky, session):
    stations = tuple(
        station.model_copy(update={"antenna": station.antenna.model_copy(update={"autotrack": True})})
        for station in aged.stations
    )
    follows = aged.model_copy(update={"stations": stations})
    [data] = pointing_files(follows, sky, [session], step_s=60.0).values()
    assert b"useful until: no limit, the dish follows the signal" in data


def test_every_stale_contact_is_told_up_to_twenty(aged, sky, session):
    with pytest.raises(InputError) as told:
        pointing_files(aged, sky, [replace(session, tx_off_s=session.tx_off_s - k) for k in range(30)])
    assert len(told.value.faults) == 21
    assert told.value.faults[-1] == "and 10 more contacts"


def test_unknown_pass_and_silly_step_are_told(mission, sky, session):
    with pytest.raises(InputError, match="nowhere: must be a pass in the span of the mission"):
        pointing_files(mission, sky, [replace(session, pass_id="nowhere")])
    with pytest.raises(InputError, match=r"step_s must be from 0\.01 s to 600 s, got 0"):
        pointing_files(mission, sky, [session], step_s=0.0)


def test_tables_are_made_as_they_are_asked_for_and_faults_told_before(mission, sky, session):
    asked = pointing_tables(mission, sky, [session, session], step_s=60.0, force=True, issue="0a1b2c3d")
    (first, data), (second, again) = asked
    assert second == f"{first.removesuffix('.csv')}_2.csv"
    assert data == again
    assert b"# schedule issue: 0a1b2c3d\n" in data
    with pytest.raises(InputError, match="step_s"):
        pointing_tables(mission, sky, [session], step_s=0.0)


def test_a_carriers_digits_all_stand_in_the_columns_name(mission, sky, session):
    satellite = mission.satellites[0]
    craft = satellite.spacecraft
    near = tuple(
        mode.model_copy(update={"frequency_mhz": mhz})
        for mode, mhz in zip(craft.transmitter, (26250.0125, 26250.0), strict=True)
    )
    satellite = satellite.model_copy(update={"spacecraft": craft.model_copy(update={"transmitter": near})})
    [data] = pointing_files(
        mission.model_copy(update={"satellites": (satellite,)}), sky, [session], step_s=60.0, force=True
    ).values()
    header, columns = table(data)
    assert {"doppler_at_26250_mhz_hz", "doppler_at_26250.0125_mhz_hz"} <= set(columns)
    assert any("26250.0125 MHz" in line for line in header)


def test_the_header_tells_when_the_azimuth_crosses_north(mission, sky, session):
    told = {}
    for pass_id, station in zip(sky.passes.pass_id[:40], sky.passes.station[:40], strict=True):
        here = replace(session, pass_id=str(pass_id), station=str(station))
        [data] = pointing_files(mission, sky, [here], step_s=1.0, force=True).values()
        header, columns = table(data)
        azimuth_deg = numbers(columns, "azimuth_deg")
        [*jumps] = np.flatnonzero(np.abs(np.diff(azimuth_deg)) > 180)
        lines = [line for line in header if "crosses north" in line]
        assert len(lines) == len(jumps)
        for k, line in zip(jumps, lines, strict=True):
            over = "east, 360 to 0" if azimuth_deg[k] > 180 else "west, 0 to 360"
            assert line.startswith(f"azimuth crosses north over {over}, at ")
            crossed = datetime.fromisoformat(line.rpartition(" at ")[2])
            assert abs(crossed - datetime.fromisoformat(columns["time_utc"][k])) <= timedelta(seconds=2)
        told[str(pass_id)] = len(lines)
    assert set(told.values()) == {0, 1}


# OWASP, "CSV Injection" (from memory): a cell that begins with = + - @ is run; commas and semicolons begin cells.
@pytest.mark.parametrize("name", ["A,=1+1", "A, @SUM(1)", "A;-2", "=1,+2"])
def test_names_in_the_header_begin_no_formula(mission, sky, session, name):
    stations = tuple(
        station.model_copy(update={"name": name}) if station.name == session.station else station
        for station in mission.stations
    )
    renamed = mission.model_copy(update={"stations": stations})
    [data] = pointing_files(renamed, sky, [replace(session, station=name)], step_s=60.0, force=True).values()
    header = [line for line in data.decode().splitlines() if line.startswith("#")]
    cells = [cell for line in header for comma in line.split(",") for cell in comma.split(";")]
    assert not [cell for cell in cells if cell.lstrip().startswith(("=", "+", "-", "@"))]
