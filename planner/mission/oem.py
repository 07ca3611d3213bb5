"""Orbit ephemeris messages (OEM, CCSDS 502.0-B-3) as keyword lines."""

import math
from datetime import datetime

from planner.mission.base import is_name
from planner.mission.ccsds import date, keyword_lines
from planner.mission.interpolation import farthest_apart_km, velocity_misfits
from planner.mission.numbers import number as number_of
from planner.mission.orbit import Ephemeris, Segment, iso, two_body
from planner.mission.text import decimals
from planner.units import EARTH_GM_KM3_S2

FRAMES = {"TEME": "TEME", "EME2000": "EME2000", "GCRF": "GCRF"}  # and every ITRF realisation
METHODS = ("HERMITE", "LAGRANGE", "LINEAR")
REQUIRED = ("OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME", "TIME_SYSTEM", "START_TIME", "STOP_TIME")
DEFAULT_DEGREE = 7
FARTHEST_OFF_KM = 10.0  # more than a second of flight in low orbit: no pass time would hold to what is promised
APART_KM = 1.0
VELOCITY_SHARE = 0.01  # more than the burns of small satellites, and four times what a Molniya orbit shows at 600 s
MORE_STATES = "give states closer together"
LOWEST_KM, HIGHEST_KM = 6350.0, 5e5  # from the Earth's centre: the poles' ground; a semi-major axis beyond the Moon's


def parse_oem(text: str, path: str) -> tuple[list[Ephemeris], list[str]]:
    """One ephemeris per satellite of the message, and every fault, told with file, line and rule."""
    reader = _Reader(path)
    for number, keyword, value in keyword_lines(text):
        reader.take(number, keyword, value)
    reader.close_segment()
    messages = []
    for name in dict.fromkeys(name for name, *_ in reader.segments):
        mine = [(object_id, segment) for owner, object_id, segment in reader.segments if owner == name]
        mine.sort(key=lambda each: each[1].usable_from)
        reader.faults += _overlap_faults(f"{path}: {name}", [segment for _, segment in mine])
        epoch = reader.created or mine[0][1].moment[0]
        messages.append(
            Ephemeris(name=name, international_designator=mine[0][0], epoch=epoch, segment=tuple(s for _, s in mine))
        )
    return messages, reader.faults


def _overlap_faults(where: str, segments: list[Segment]) -> list[str]:
    """Where segments, in order of their beginnings, contradict each other."""
    faults, held = [], segments[0]
    for segment in segments[1:]:
        begin, end = segment.usable_from, min(held.usable_to, segment.usable_to)
        span = f"from {iso(begin)} to {iso(end)}; end the first there with USEABLE_STOP_TIME, or leave one of them out"
        if begin < end and held.frame != segment.frame:
            faults.append(f"{where}: segments that overlap must be in one frame, got two {span}")
        elif begin < end:
            most_km = APART_KM + held.interval_errors_km.max() + segment.interval_errors_km.max()
            apart_km = farthest_apart_km(held, segment, begin, end)
            if apart_km > most_km:
                faults.append(
                    f"{where}: segments that overlap must agree within {most_km:.2g} km, got {apart_km:.4g} km {span}"
                )
        held = max(held, segment, key=lambda each: each.usable_to)
    return faults


def _state_faults(where: str, segment: Segment) -> list[str]:
    """What the states say of each other: too far apart to interpolate, or with velocities that are not theirs."""
    errors_km = segment.interval_errors_km
    worst = int(errors_km.argmax())
    if not errors_km[worst] <= FARTHEST_OFF_KM:
        method = segment.interpolation
        by = method if method == "LINEAR" else f"{method} of degree {segment.degree}"
        return [
            f"{where}: {by} must give positions within {FARTHEST_OFF_KM:g} km between the states, got about"
            f" {errors_km[worst]:.3g} km off between {iso(segment.moment[worst])} and {iso(segment.moment[worst + 1])},"
            f" judged by leaving states out; {MORE_STATES}"
            + ("" if method == "HERMITE" else " or INTERPOLATION = HERMITE of degree 7")
        ]
    misfit = velocity_misfits(segment)
    worst = int(misfit.argmax())
    if misfit[worst] <= VELOCITY_SHARE:
        return []
    return [
        f"{where}: velocities must be the rates of the positions within {100 * VELOCITY_SHARE:g} % of circular speed,"
        f" got {100 * misfit[worst]:.3g} % at {iso(segment.moment[worst])}; are they in km/s and in REF_FRAME?"
    ]


class _Reader:
    """Goes through the lines once: header, then metadata and states by turns; covariances are passed over."""

    def __init__(self, path: str):
        self.path = path
        self.faults: list[str] = []
        self.created: datetime | None = None
        self.segments: list[tuple[str, str, Segment]] = []
        self.meta: dict[str, tuple[int, str]] = {}
        self.rows: list[tuple[datetime, tuple[float, ...]]] = []
        self.part = "header"

    def fault(self, number: int, rule: str, value: str):
        self.faults.append(f"{self.path}: line {number}: {rule}, got {value!r}{decimals(value)}")

    def take(self, number: int, keyword: str, value: str):
        if value == "META_START":
            self.close_segment()
            self.part = "metadata"
        elif value == "META_STOP":
            self.part = "states"
        elif value in ("COVARIANCE_START", "COVARIANCE_STOP"):
            self.part = "covariance" if value == "COVARIANCE_START" else "states"
        elif self.part == "metadata" and keyword in self.meta:
            self.fault(number, f"{keyword} must stand once in the metadata of a segment", f"{keyword} = {value}")
        elif self.part == "metadata" and keyword:
            self.meta[keyword] = (number, value)
        elif self.part == "states":
            self.take_state(number, f"{keyword} = {value}" if keyword else value)
        elif self.part == "header" and keyword == "CREATION_DATE":
            if self.created:
                self.fault(number, "CREATION_DATE must stand once", value)
            self.created = self.dated(number, value)

    def dated(self, number: int, value: str) -> datetime | None:
        try:
            return date(value)
        except ValueError as error:
            self.fault(number, str(error), value)
            return None

    def take_state(self, number: int, line: str):
        words = line.split()
        try:
            state = tuple(map(number_of, words[1:]))[:6]
            moment = date(words[0])
        except ValueError:
            state, moment = (), None
        if moment is None or len(words) not in (7, 10) or not all(abs(x) < 1e7 for x in state):
            self.fault(number, "must be a date and six or nine numbers: x y z [km], vx vy vz [km/s], ...", line)
        elif self.rows and moment <= self.rows[-1][0]:
            self.fault(number, "must be later than the state before", words[0])
        elif not (half_s := self.half_revolution_s(state)):
            self.fault(number, "must be a state of an orbit about the Earth that stays above the ground", line)
        else:
            gap_s = (moment - self.rows[-1][0]).total_seconds() if self.rows else 0.0
            if gap_s > half_s:
                rule = f"must follow the state before within half a revolution, {half_s / 60:.0f} min"
                self.faults.append(f"{self.path}: line {number}: {rule}, got {gap_s / 60:.0f} min; {MORE_STATES}")
            self.rows.append((moment, state))

    def half_revolution_s(self, state: tuple[float, ...]) -> float:
        """Half the period of the state's orbit [s], 0 where that is none about the Earth."""
        if math.hypot(*state[:3]) < LOWEST_KM:
            return 0.0
        frame = "ITRF" if self.meta.get("REF_FRAME", (0, ""))[1].upper().startswith("ITRF") else ""
        x, y, z, vx, vy, vz = state
        axis_km, eccentricity, _ = two_body((x, y, z, vx, vy, vz), frame)
        bound = axis_km * (1 - eccentricity) > LOWEST_KM and 0 < axis_km < HIGHEST_KM
        return math.pi * math.sqrt(axis_km**3 / EARTH_GM_KM3_S2) if bound else 0.0

    def close_segment(self):
        """What has been read since META_START becomes a segment, or faults."""
        meta, rows, self.meta, self.rows = self.meta, self.rows, {}, []
        if not meta:
            return
        first = min(number for number, _ in meta.values())
        before = len(self.faults)
        for keyword in REQUIRED:
            if keyword not in meta:
                self.faults.append(f"{self.path}: metadata at line {first}: {keyword} must be given, got none")
        number, name = meta.get("OBJECT_NAME", (first, "not given"))
        if not is_name(name):
            self.fault(number, "OBJECT_NAME must be one printable line of 1 to 80 characters", name)
        for keyword, allowed in (("CENTER_NAME", ("EARTH",)), ("TIME_SYSTEM", ("UTC",)), ("INTERPOLATION", METHODS)):
            number, value = meta.get(keyword, (first, allowed[0]))
            if value.upper() not in allowed:
                self.fault(number, f"{keyword} must be {' or '.join(allowed)}", value)
        frame = self.frame(*meta.get("REF_FRAME", (first, "TEME")))
        degree = self.degree(*meta.get("INTERPOLATION_DEGREE", (first, str(DEFAULT_DEGREE))))
        usable = [
            self.dated(*meta.get(f"USEABLE_{edge}", meta.get(edge, (first, ""))))
            for edge in ("START_TIME", "STOP_TIME")
        ]
        if len(rows) < 3:
            self.faults.append(f"{self.path}: segment at line {first}: must hold three states or more, got {len(rows)}")
        if len(self.faults) > before:
            return
        segment = Segment(
            frame=frame,
            interpolation=meta.get("INTERPOLATION", (0, "LAGRANGE"))[1].upper(),
            degree=degree,
            usable_from=max(usable[0], rows[0][0]),
            usable_to=min(usable[1], rows[-1][0]),
            moment=tuple(moment for moment, _ in rows),
            state=tuple(state for _, state in rows),
        )
        self.segments.append((meta["OBJECT_NAME"][1], meta["OBJECT_ID"][1], segment))
        if not self.faults:  # a state left out for its fault leaves a gap
            self.faults += _state_faults(f"{self.path}: segment at line {first}", segment)

    def frame(self, number: int, value: str) -> str:
        value = value.upper()
        if value.startswith("ITRF"):
            return "ITRF"
        if value not in FRAMES:
            self.fault(number, "REF_FRAME must be TEME, ITRF, EME2000 or GCRF", value)
        return FRAMES.get(value, "TEME")

    def degree(self, number: int, value: str) -> int:
        if value.isascii() and value.isdigit() and 1 <= int(value) <= 25:
            return int(value)
        self.fault(number, "INTERPOLATION_DEGREE must be from 1 to 25", value)
        return DEFAULT_DEGREE
