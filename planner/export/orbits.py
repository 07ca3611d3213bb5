"""The orbits of a plan as CCSDS orbit data messages (502.0-B-3): OMM as keywords or XML, OEM as keywords.

No clock is read: CREATION_DATE is the epoch of the elements, so the same inputs give the same bytes.
"""

from datetime import UTC, datetime
from xml.etree import ElementTree

import numpy as np

from planner.errors import InputError
from planner.mission.elements import ElementSet
from planner.mission.models import Satellite
from planner.sky import Sky

ORIGINATOR = "DOWNLINK-PLANNER"
VERSION = "3.0"  # of the message formats in CCSDS 502.0-B-3
METADATA = ("OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME", "TIME_SYSTEM", "MEAN_ELEMENT_THEORY")
MEAN_ELEMENTS = (
    "EPOCH", "MEAN_MOTION", "ECCENTRICITY", "INCLINATION", "RA_OF_ASC_NODE", "ARG_OF_PERICENTER", "MEAN_ANOMALY",
)  # fmt: skip
STATE_STEP_S = 60.0


def omm_keywords(satellite: Satellite) -> bytes:
    """The satellite's element set as an OMM of `KEYWORD = value` lines.

    Raises
    ------
    InputError : its orbit was given as an ephemeris, which has no mean elements
    """
    lines = [f"CCSDS_OMM_VERS = {VERSION}", f"CREATION_DATE = {_date(satellite.elements.epoch)}"]
    lines += [f"ORIGINATOR = {ORIGINATOR}", *(f"{key} = {value}" for key, value in _fields(satellite).items())]
    return "\n".join([*lines, ""]).encode()


def omm_xml(satellite: Satellite) -> bytes:
    """The same as XML, in the navigation data message's envelope."""
    fields = _fields(satellite)
    envelope = ElementTree.Element("ndm")
    message = ElementTree.SubElement(envelope, "omm", id="CCSDS_OMM_VERS", version=VERSION)
    header = ElementTree.SubElement(message, "header")
    _children(header, {"CREATION_DATE": _date(satellite.elements.epoch), "ORIGINATOR": ORIGINATOR})
    segment = ElementTree.SubElement(ElementTree.SubElement(message, "body"), "segment")
    _children(ElementTree.SubElement(segment, "metadata"), {key: fields.pop(key) for key in METADATA})
    data = ElementTree.SubElement(segment, "data")
    _children(ElementTree.SubElement(data, "meanElements"), {key: fields.pop(key) for key in MEAN_ELEMENTS})
    _children(ElementTree.SubElement(data, "tleParameters"), fields)
    ElementTree.indent(envelope)
    return ElementTree.tostring(envelope, encoding="UTF-8", xml_declaration=True) + b"\n"


def oem_keywords(satellite: Satellite, sky: Sky, step_s: float = STATE_STEP_S) -> bytes:
    """The satellite's states through the span as an OEM of keyword lines, a state every `step_s` seconds.

    The states are those the plan was computed from: Earth-fixed, velocity relative to the turning Earth. Polar motion,
    under 10 m at the ground, is neglected in them. InputError when `step_s` is not from 1 s to 600 s.
    """
    if not 1 <= step_s <= 600:
        raise InputError(f"step_s must be from 1 s to 600 s, got {step_s:g}")
    time_s = np.append(np.arange(0.0, sky.clock.span_s, step_s), sky.clock.span_s)
    position_km, velocity_km_s = sky.track(satellite.name).at(time_s)
    dates = [text.removesuffix("Z") for text in sky.clock.iso(time_s)]
    metadata = {
        "OBJECT_NAME": satellite.name,
        "OBJECT_ID": _object_id(satellite.elements.international_designator),
        "CENTER_NAME": "EARTH",
        "REF_FRAME": "ITRF2000",
        "TIME_SYSTEM": "UTC",
        "START_TIME": dates[0],
        "STOP_TIME": dates[-1],
        "INTERPOLATION": "HERMITE",
        "INTERPOLATION_DEGREE": "7",
    }
    lines = [f"CCSDS_OEM_VERS = {VERSION}", f"CREATION_DATE = {_date(satellite.elements.epoch)}"]
    lines += [f"ORIGINATOR = {ORIGINATOR}", "META_START", *(f"{key} = {value}" for key, value in metadata.items())]
    lines += [
        "META_STOP",
        "COMMENT kilometres and kilometres a second; polar motion (10 m) and UT1's drift (0.2 s, 100 m) are neglected",
    ]
    for date, place, velocity in zip(dates, position_km.tolist(), velocity_km_s.tolist(), strict=True):
        lines.append(f"{date} " + " ".join([f"{x:.6f}" for x in place] + [f"{v:.9f}" for v in velocity]))
    return "\n".join([*lines, ""]).encode()


def _fields(satellite: Satellite) -> dict[str, str]:
    elements = satellite.elements
    if not isinstance(elements, ElementSet):
        raise InputError(f"{satellite.name}: an OMM needs mean elements, but its orbit was given as an ephemeris (OEM)")
    return {
        "OBJECT_NAME": satellite.name,
        "OBJECT_ID": _object_id(elements.international_designator),
        "CENTER_NAME": "EARTH",
        "REF_FRAME": "TEME",
        "TIME_SYSTEM": "UTC",
        "MEAN_ELEMENT_THEORY": "SGP4",
        "EPOCH": _date(elements.epoch),
        "MEAN_MOTION": _number(elements.mean_motion_rev_day),
        "ECCENTRICITY": _number(elements.eccentricity),
        "INCLINATION": _number(elements.inclination_deg),
        "RA_OF_ASC_NODE": _number(elements.ra_of_asc_node_deg),
        "ARG_OF_PERICENTER": _number(elements.arg_of_pericenter_deg),
        "MEAN_ANOMALY": _number(elements.mean_anomaly_deg),
        "EPHEMERIS_TYPE": "0",
        "CLASSIFICATION_TYPE": "U",
        "NORAD_CAT_ID": elements.catalog_number,
        "ELEMENT_SET_NO": "999",
        "REV_AT_EPOCH": str(elements.rev_at_epoch),
        "BSTAR": _number(elements.bstar),
        "MEAN_MOTION_DOT": _number(elements.mean_motion_dot),
        "MEAN_MOTION_DDOT": _number(elements.mean_motion_ddot),
    }


def _object_id(designator: str) -> str:
    """2026-901A, as the standard writes what a TLE has as 26901A; years from 57 on are of the last century."""
    if len(designator) >= 6 and designator[:5].isdigit():
        return f"{'19' if int(designator[:2]) >= 57 else '20'}{designator[:2]}-{designator[2:]}"
    return designator or "UNKNOWN"


def _number(value: float) -> str:
    """The shortest text that reads back as the same number."""
    return repr(float(value))


def _date(moment: datetime) -> str:
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%S.%f")


def _children(parent: ElementTree.Element, texts: dict[str, str]) -> None:
    for key, text in texts.items():
        ElementTree.SubElement(parent, key).text = text
