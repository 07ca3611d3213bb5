"""From files to a Mission: everything read, everything checked, all faults told at once."""

from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Annotated, Any, TypeVar

from pydantic import AfterValidator, AwareDatetime, Field, ValidationError

from planner.errors import InputError
from planner.mission.base import Described, FileName, Name
from planner.mission.elements import read_elements
from planner.mission.models import Mission, Policy, Satellite, Spacecraft, StartState
from planner.mission.names import alike
from planner.mission.pattern import read_pattern
from planner.mission.station import Station
from planner.mission.text import faults_of, nearest, read_toml, sha256
from planner.units import DAY_S

DEFAULT_MISSION = Path("missions/marshlight.toml")
FIRST_YEAR, LAST_YEAR = 1957, 2049  # what two-digit years of element sets and the Sun's ephemeris both cover
MOST_SATELLITES, MOST_STATIONS = 100, 500
MOST_STATION_DAYS = 5_000  # satellites x stations x days: some 25 000 passes, whose table fits in 1 GB
Model = TypeVar("Model", bound=Described)


def _in_known_years(moment: datetime) -> datetime:
    if not FIRST_YEAR <= moment.year <= LAST_YEAR:
        raise ValueError(f"must be in the years {FIRST_YEAR} to {LAST_YEAR}")
    return moment


class SatelliteTable(Described):
    """`[[satellite]]`: what one satellite has of its own."""

    name: Name
    spacecraft: FileName | None = None
    start_state: StartState | None = None


class MissionTables(Described):
    """The mission file's own keys; the spacecraft's tables stand beside them."""

    name: Name
    elements: FileName
    stations: Annotated[tuple[FileName, ...], Field(min_length=1, max_length=MOST_STATIONS)]
    start: Annotated[AwareDatetime, AfterValidator(_in_known_years)]
    days: Annotated[float, Field(gt=0, le=60)]
    policy: Policy
    start_state: StartState | None = None
    satellite: tuple[SatelliteTable, ...] = ()


KINDS: dict[type[Described], str] = {MissionTables: "mission", Station: "station", Spacecraft: "spacecraft"}
ONLY_A_MISSION_HAS = {"elements", "stations"}


class _MissionFile(MissionTables, Spacecraft):
    """All keys a mission file may hold, for "did you mean"."""


class _Reader:
    """Reads file after file, keeps the faults and the names of the files read."""

    def __init__(self, folder: Path):
        self.folder = folder
        self.faults: list[str] = []
        self.read: dict[str, Path] = {}

    def attempt(self, call: Callable, *arguments: Any) -> Any:
        try:
            return call(*arguments)
        except InputError as error:
            self.faults.extend(error.faults)
            return None

    def path(self, name: str) -> Path:
        self.read[name] = self.folder / name
        return self.read[name]

    def model(self, kind: type[Model], raw: dict[str, Any], path: Path, known: type | None = None) -> Model | None:
        try:
            return kind.model_validate(raw)
        except ValidationError as error:
            self.faults.extend(faults_of(path, error, raw, known or kind))
            return None

    def stop_on_faults(self) -> None:
        if self.faults:
            raise InputError(*dict.fromkeys(self.faults))


def load_mission(path: str | Path = DEFAULT_MISSION) -> Mission:
    """Read a mission file and every file it names.

    Raises
    ------
    InputError : with every fault of every file, each naming file, key, rule and value
    """
    path = Path(path)
    reader = _Reader(path.parent)
    raw = reader.attempt(_read_kind, reader.path(path.name), MissionTables)
    reader.stop_on_faults()
    own = {key: value for key, value in raw.items() if key not in Spacecraft.model_fields}
    shared = {key: value for key, value in raw.items() if key in Spacecraft.model_fields}
    tables = reader.model(MissionTables, own, path, _MissionFile)
    spacecraft = _spacecraft(reader, shared, path) if shared or not own.get("satellite") else None
    orbits = _orbits(reader, own)
    read = [_station(reader, name) for name in _file_names(own.get("stations"))[:MOST_STATIONS]]
    reader.stop_on_faults()
    assert tables is not None  # what could not be read is a fault
    stations = [station for station in read if station is not None]
    _check_size(reader, tables, len(orbits), path)
    reader.stop_on_faults()
    satellites = _satellites(reader, tables, orbits, spacecraft, path)
    _check_names(reader, stations, "stations", path)
    reader.stop_on_faults()
    return Mission(
        name=tables.name,
        start=tables.start,
        days=tables.days,
        satellites=tuple(satellites),
        stations=tuple(stations),
        policy=tables.policy,
        inputs=tuple((name, sha256(file)) for name, file in sorted(reader.read.items())),
    )


def _file_names(value: Any) -> list[str]:
    """The file names in what may be no list of them, so that these files can be checked beside it."""
    return [text for text in value if isinstance(text, str) and text.isprintable()] if isinstance(value, tuple) else []


def _orbits(reader: _Reader, own: dict[str, Any]) -> dict[str, Any]:
    """Read even where other keys are at fault, so that all faults can be told at once."""
    names, start = _file_names((own.get("elements"),)), own.get("start")
    at = start if isinstance(start, datetime) and start.tzinfo else datetime(FIRST_YEAR, 1, 1, tzinfo=UTC)
    found = [reader.attempt(read_elements, reader.path(name), at) for name in names]
    return found[0] if found and found[0] else {}


def _check_size(reader: _Reader, tables: MissionTables, satellites: int, path: Path) -> None:
    if satellites > MOST_SATELLITES:
        reader.faults.append(
            f"{path.parent / tables.elements}: must hold at most {MOST_SATELLITES} satellites, got {satellites}"
        )
    station_days = satellites * len(tables.stations) * tables.days
    if station_days > MOST_STATION_DAYS:
        reader.faults.append(
            f"{path}: satellites x stations x days must be at most {MOST_STATION_DAYS},"
            f" got {satellites} x {len(tables.stations)} x {tables.days:g} = {station_days:g}"
        )


def _station(reader: _Reader, name: str) -> Station | None:
    path = reader.path(name)
    raw = reader.attempt(_read_kind, path, Station)
    return None if raw is None else reader.model(Station, raw, path)


def _read_kind(path: Path, wanted: type[Described]) -> dict[str, Any]:
    """The file's tables; InputError where they have keys of one other kind of file and none of the wanted one's."""
    raw = read_toml(path)
    has = [kind for kind in KINDS if raw.keys() & (kind.model_fields.keys() - {"name"})]
    if raw.keys() & ONLY_A_MISSION_HAS:  # beside which the spacecraft's tables stand
        has = [kind for kind in has if kind is not Spacecraft]
    if len(has) == 1 and has[0] is not wanted:
        raise InputError(f"{path}: must be a {KINDS[wanted]} file, got a {KINDS[has[0]]} file")
    return raw


def _spacecraft(reader: _Reader, raw: dict[str, Any], path: Path) -> Spacecraft | None:
    """The spacecraft's tables, with each measured antenna pattern read into its samples."""
    transmitters = raw.get("transmitter")
    if isinstance(transmitters, tuple):
        raw = raw | {"transmitter": tuple(_with_pattern(reader, transmitter) for transmitter in transmitters)}
    return reader.model(Spacecraft, raw, path)


def _own_spacecraft(reader: _Reader, name: str) -> Spacecraft | None:
    path = reader.path(name)
    raw = reader.attempt(_read_kind, path, Spacecraft)
    return None if raw is None else _spacecraft(reader, raw, path)


def _with_pattern(reader: _Reader, transmitter: Any) -> Any:
    antenna = transmitter.get("antenna") if isinstance(transmitter, dict) else None
    if (
        not isinstance(antenna, dict)
        or antenna.get("kind") != "measured pattern"
        or not isinstance(antenna.get("file"), str)
    ):
        return transmitter
    samples = reader.attempt(read_pattern, reader.path(antenna["file"])) or ()
    return transmitter | {"antenna": antenna | {"samples": samples}}


def _satellites(
    reader: _Reader, tables: MissionTables, orbits: dict[str, Any], shared: Spacecraft | None, path: Path
) -> list[Satellite]:
    _check_names(reader, list(tables.satellite), "satellite", path)
    own = {table.name: table for table in tables.satellite}
    reader.faults.extend(
        f"{path}: satellite.name: must be a satellite of {tables.elements}, got {name!r}{nearest(name, orbits)}"
        for name in own
        if name not in orbits
    )
    satellites = []
    for name, elements in orbits.items():
        table = own.get(name, SatelliteTable(name=name))
        spacecraft = shared if table.spacecraft is None else _own_spacecraft(reader, table.spacecraft)
        start_state = table.start_state or tables.start_state
        if start_state is None:
            reader.faults.append(f"{path}: start_state: is required, for {name}")
        if spacecraft is None and table.spacecraft is None:
            reader.faults.append(f"{path}: transmitter, battery, panel and recorder: are required, for {name}")
        _check_age(reader, name, elements, tables, path)
        if spacecraft and start_state:
            _check_references(reader, spacecraft, start_state, tables.policy, path)
            satellites.append(Satellite(name=name, elements=elements, spacecraft=spacecraft, start_state=start_state))
    _check_names(reader, satellites, "satellites", path)
    return satellites


def _check_age(reader: _Reader, name: str, elements: Any, tables: MissionTables, path: Path) -> None:
    age_days = (tables.start - elements.epoch).total_seconds() / DAY_S
    limit_days = tables.policy.elements_max_age_days
    if abs(age_days) > limit_days:
        age, mend = ("old", "newer") if age_days > 0 else ("after it", "older")
        reader.faults.append(
            f"{path.parent / tables.elements}: {name}: epoch {elements.epoch:%Y-%m-%dT%H:%M:%SZ} must be within"
            f" policy.elements_max_age_days = {limit_days:g} of the start, got {abs(age_days):.1f} days {age};"
            f" fetch {mend} elements"
        )


def _check_references(
    reader: _Reader, spacecraft: Spacecraft, start_state: StartState, policy: Policy, path: Path
) -> None:
    """Names and figures that stand in one table and must fit another."""
    modes = [transmitter.mode for transmitter in spacecraft.transmitter]
    for name in policy.daily_contact_modes:
        if name not in modes:
            reader.faults.append(
                f"{path}: policy.daily_contact_modes: must name modes of {modes}, got {name!r}{nearest(name, modes)}"
            )
    for entry in policy.keep:
        mode = entry.partition(":")[2]
        if mode not in modes:
            reader.faults.append(
                f"{path}: policy.keep: must be PASS:MODE with a mode of {modes}, got {entry!r}{nearest(mode, modes)}"
            )
    if start_state.stored_mbit > spacecraft.recorder.usable_mbit:
        reader.faults.append(
            f"{path}: start_state.stored_mbit: must fit the recorder's {spacecraft.recorder.usable_mbit:g} Mbit"
            f" (capacity less reserve), got {start_state.stored_mbit:g}"
        )


def _check_names(reader: _Reader, described: list, what: str, path: Path) -> None:
    reader.faults.extend(
        f"{path}: {what}: names must differ in their letters and digits, got {first!r} and {second!r}"
        for first, second in alike(thing.name for thing in described)
    )
