"""Orbit messages read back by the project's own readers and by `sgp4.omm`."""

import io
from datetime import timedelta

import numpy as np
import pytest
from sgp4 import omm
from sgp4.api import Satrec

from planner.errors import InputError
from planner.export.orbits import oem_keywords, omm_keywords, omm_xml
from planner.mission.elements import read_elements
from planner.sky.track import track_satellite

# States between the track's points are good to half a metre, and so are those that the reader makes between the OEM's;
# the track made of them interpolates a third time.
THREE_TIMES_HALF_A_METRE_KM = 3 * 5e-4
A_MILLIMETRE_KM = 1e-6


@pytest.mark.parametrize("write", [omm_keywords, omm_xml])
def test_an_omm_reads_back_as_the_same_elements(mission, tmp_path, write):
    satellite = mission.satellites[0]
    path = tmp_path / "elements.omm"
    path.write_bytes(write(satellite))
    [read] = read_elements(path, mission.start).values()
    for key in (
        "name", "catalog_number", "epoch", "mean_motion_rev_day", "eccentricity", "inclination_deg",
        "ra_of_asc_node_deg", "arg_of_pericenter_deg", "mean_anomaly_deg", "bstar",
    ):  # fmt: skip
        assert getattr(read, key) == getattr(satellite.elements, key), key


def test_sgp4_reads_the_omm_and_flies_the_same_orbit(mission):
    elements = mission.satellites[0].elements
    [fields] = omm.parse_xml(io.StringIO(omm_xml(mission.satellites[0]).decode()))
    theirs = Satrec()
    omm.initialize(theirs, fields)
    ours = elements.sgp4_model()
    for minutes in (0.0, 1440.0):
        assert theirs.sgp4_tsince(minutes)[1] == pytest.approx(ours.sgp4_tsince(minutes)[1], abs=A_MILLIMETRE_KM)
    assert fields["OBJECT_ID"] == "2026-901A"


# CCSDS 502.0-B-3, tables 4-1 to 4-3 and 5-2, 5-3: obligatory keywords (second-hand).
def test_obligatory_keywords_are_there(mission, sky):
    satellite = mission.satellites[0]
    keywords = [line.partition(" = ")[0] for line in omm_keywords(satellite).decode().splitlines()]
    assert keywords[:16] == [
        "CCSDS_OMM_VERS", "CREATION_DATE", "ORIGINATOR", "OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME",
        "TIME_SYSTEM", "MEAN_ELEMENT_THEORY", "EPOCH", "MEAN_MOTION", "ECCENTRICITY", "INCLINATION", "RA_OF_ASC_NODE",
        "ARG_OF_PERICENTER", "MEAN_ANOMALY",
    ]  # fmt: skip
    assert "OBJECT_ID = 2026-901A" in oem_keywords(satellite, sky, 600.0).decode().splitlines()
    oem = [line.partition(" = ")[0] for line in oem_keywords(satellite, sky, 600.0).decode().splitlines()[:14]]
    assert oem == [
        "CCSDS_OEM_VERS", "CREATION_DATE", "ORIGINATOR", "META_START", "OBJECT_NAME", "OBJECT_ID", "CENTER_NAME",
        "REF_FRAME", "TIME_SYSTEM", "START_TIME", "STOP_TIME", "INTERPOLATION", "INTERPOLATION_DEGREE", "META_STOP",
    ]  # fmt: skip


def test_an_oem_reads_back_as_the_same_track(mission, sky, tmp_path):
    satellite = mission.satellites[0]
    path = tmp_path / "states.oem"
    path.write_bytes(oem_keywords(satellite, sky))
    [ephemeris] = read_elements(path, mission.start).values()
    assert ephemeris.epoch == satellite.elements.epoch
    again = track_satellite(sky.clock, satellite.model_copy(update={"elements": ephemeris}))
    time_s = np.linspace(120.0, sky.clock.span_s - 120.0, 5000)
    away_km = again.at(time_s)[0] - sky.track(satellite.name).at(time_s)[0]
    assert np.abs(away_km).max() < THREE_TIMES_HALF_A_METRE_KM


def test_the_same_orbit_gives_the_same_bytes(mission, sky):
    satellite = mission.satellites[0]
    assert oem_keywords(satellite, sky, 600.0) == oem_keywords(satellite, sky, 600.0)


def test_an_ephemeris_has_no_mean_elements_and_a_step_has_bounds(mission, sky, tmp_path):
    satellite = mission.satellites[0]
    path = tmp_path / "states.oem"
    path.write_bytes(oem_keywords(satellite, sky, 60.0))
    [ephemeris] = read_elements(path, mission.start + timedelta(days=1)).values()
    with pytest.raises(
        InputError, match="MARSHLIGHT-1: an OMM needs mean elements, but its orbit was given as an ephe"
    ):
        omm_keywords(satellite.model_copy(update={"elements": ephemeris}))
    with pytest.raises(InputError, match="step_s must be from 1 s to 600 s, got 0"):
        oem_keywords(satellite, sky, 0.0)
