"""What changed between two issues of a week: contacts gained, lost, moved, sent otherwise; megabits, charge, inputs."""

import json
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

import numpy as np
import pandas as pd

from planner.errors import InputError
from planner.export.contacts import plain_number, utc_text
from planner.export.folder import INDEX, verify_set
from planner.mission.table import read_table
from planner.mission.text import read_bytes, shown

CARRIER = ("frequency_mhz", "symbol_rate_mbaud", "polarisation")
COMPARED = ("pass_id", "station", "mode", "tx_on_utc", "tx_off_utc", "volume_mbit", "modcods", *CARRIER)
MOST_PCT = 1e6  # no charge is that high; beyond it no figure is worth printing
HEADINGS = ("change", "pass", "station", "mode", "on air", "Mbit")


@dataclass(frozen=True)
class Flight:
    """A planned contact, as far as a comparison needs it; what is sent is None where a table does not say."""

    pass_id: str
    station: str
    mode: str
    tx_on: datetime
    tx_off: datetime
    volume_mbit: float
    modcods: str | None  # each with the moment from which it is on air
    carrier: str | None

    @property
    def on_air(self) -> str:
        return f"{self.tx_on:%d %b %H:%M:%S}–{self.tx_off:%H:%M:%S}Z"


@dataclass(frozen=True)
class Comparison:
    """`moved` and `sent_otherwise` pair (before, after); figures as (before, after), None where a summary lacks them.

    Sent otherwise is what stands at its time while the station's receiver must be set anew: MODCODs, carrier, rate or
    polarisation. Flown is what ended before the new week starts; the volume before is without it.
    """

    gained: tuple[Flight, ...]
    lost: tuple[Flight, ...]
    moved: tuple[tuple[Flight, Flight], ...]
    sent_otherwise: tuple[tuple[Flight, Flight], ...]
    flown: tuple[Flight, ...]
    unchanged: int
    volume_mbit: tuple[float, float]
    soc_min_pct: tuple[float | None, float | None]
    inputs: tuple[str, ...]  # files that were read for one week and not, or not with the same content, for the other

    @property
    def is_same(self) -> bool:
        """The operator has nothing to do anew."""
        return not (self.gained or self.lost or self.moved or self.sent_otherwise)

    def headline(self) -> str:
        """The difference in one line."""
        flown = f"; {len(self.flown)} ended before the new start" if self.flown else ""
        if self.is_same:
            return f"no contact changed: all {self.unchanged} stand" + flown + self._charge()
        otherwise = f"{len(self.sent_otherwise)} sent otherwise, " if self.sent_otherwise else ""
        counts = (
            f"{len(self.gained)} gained, {len(self.lost)} lost, {len(self.moved)} moved,"
            f" {otherwise}{self.unchanged} unchanged{flown}"
        )
        before, after = self.volume_mbit
        return f"{counts}; {before:.0f} to {after:.0f} Mbit ({after - before:+.0f})" + self._charge()

    def rows(self) -> list[tuple[str, ...]]:
        """A row of texts under `HEADINGS` for every contact that changed, in order of time."""
        rows = [(flight.tx_on, _row("gained", flight, f"{flight.volume_mbit:+.0f}")) for flight in self.gained]
        rows += [(flight.tx_on, _row("lost", flight, f"{-flight.volume_mbit:+.0f}")) for flight in self.lost]
        for before, after in self.moved:
            shifts = (after.tx_on - before.tx_on, after.tx_off - before.tx_off)
            on_s, off_s = (f"{shift.total_seconds():+.0f} s" for shift in shifts)
            by = f"both {on_s}" if on_s == off_s else f"on {on_s}, off {off_s}"
            on_air = f"{before.on_air} → {after.on_air} ({by})"
            rows.append((after.tx_on, _row("moved", after, _difference(before, after), on_air)))
        for before, after in self.sent_otherwise:
            on_air = f"{after.on_air}: {_settings(before, after)} → {_settings(after, before)}"
            rows.append((after.tx_on, _row("sent otherwise", after, _difference(before, after), on_air)))
        return [row for _, row in sorted(rows)]

    def _charge(self) -> str:
        before, after = self.soc_min_pct
        return "" if before is None or after is None else f"; lowest charge {before:.1f} to {after:.1f} %"


def compare_sets(old_folder, new_folder) -> Comparison:
    """Compare the sets that two folders hold.

    Raises
    ------
    InputError : a folder holds no whole set (each fault told), or contacts or a summary that cannot be read
    """
    folders = old_folder, new_folder
    faults = [
        f"{folder}: no such folder; `week` replaces the issue in its folder, so copy that before planning anew"
        for folder in folders
        if not Path(folder).is_dir()
    ] or [fault for folder in folders for fault in verify_set(folder)]
    if faults:
        raise InputError(*faults)
    (old, old_summary), (new, new_summary) = (_read_set(Path(folder)) for folder in (old_folder, new_folder))
    return _compare(old, new, old_summary, new_summary)


def compare_plans(old, new) -> Comparison:
    """The same for two plans in memory, each with `.contacts` and `.summary`."""
    return _compare(_flights(old.contacts), _flights(new.contacts), old.summary, new.summary)


def _compare(old: Iterable[Flight], new: Iterable[Flight], old_summary: Mapping, new_summary: Mapping) -> Comparison:
    before, after = _by_key(old), _by_key(new)
    start = datetime.fromisoformat(new_summary["start"]) if "start" in new_summary else None
    gone = [flight for key, flight in before.items() if key not in after]
    flown = tuple(flight for flight in gone if start is not None and flight.tx_off <= start)
    common = [(before[key], after[key]) for key in before if key in after]
    standing = [(a, b) for a, b in common if (a.tx_on, a.tx_off) == (b.tx_on, b.tx_off)]
    otherwise = tuple((a, b) for a, b in standing if _settings(a, b) != _settings(b, a))
    return Comparison(
        gained=tuple(flight for key, flight in after.items() if key not in before),
        lost=tuple(flight for flight in gone if start is None or flight.tx_off > start),
        moved=tuple((a, b) for a, b in common if (a.tx_on, a.tx_off) != (b.tx_on, b.tx_off)),
        sent_otherwise=otherwise,
        flown=flown,
        unchanged=len(standing) - len(otherwise),
        volume_mbit=(_total_mbit(before.values()) - _total_mbit(flown), _total_mbit(after.values())),
        soc_min_pct=(old_summary.get("soc_min_pct"), new_summary.get("soc_min_pct")),
        inputs=_changed_inputs(old_summary.get("inputs", {}), new_summary.get("inputs", {})),
    )


def _by_key(flights: Iterable[Flight]) -> dict[tuple[str, str, int], Flight]:
    """By pass, mode, and which of its sessions in that mode."""
    keyed: dict[tuple[str, str, int], Flight] = {}
    for flight in sorted(flights, key=lambda flight: flight.tx_on):
        ordinal = sum(key[:2] == (flight.pass_id, flight.mode) for key in keyed)
        keyed[flight.pass_id, flight.mode, ordinal] = flight
    return keyed


def _total_mbit(flights: Iterable[Flight]) -> float:
    return float(sum(flight.volume_mbit for flight in flights))


def _settings(flight: Flight, other: Flight) -> str:
    """What a receiver is set to for one flight, as far as it is not the same for the other."""
    pairs = (_codings(flight), _codings(other)), (flight.carrier, other.carrier)
    return ", ".join(own for own, its in pairs if own is not None is not its and own != its)


def _codings(flight: Flight) -> str | None:
    return None if flight.modcods is None else " ".join(map(_coding, flight.modcods.split()))


def _coding(segment: str) -> str:
    """`8PSK_3/4@2026-12-07T01:01:40.000Z` as `8PSK_3/4@01:01:40Z`; anything else as it is."""
    name, at, since = segment.rpartition("@")
    return f"{name}@{since[11:19]}Z" if at and len(since) == len("2026-12-07T01:01:40.000Z") else segment


def _changed_inputs(old: Mapping, new: Mapping) -> tuple[str, ...]:
    return tuple(sorted(_printable(name) for name in {*old, *new} if old.get(name) != new.get(name)))


def _read_set(folder: Path) -> tuple[list[Flight], Mapping]:
    path = folder / "contacts.csv"
    rows = [row for _, row in read_table(path, COMPARED)]
    try:
        summary = json.loads(read_bytes(folder / INDEX))
        faults = [f"{folder / INDEX}: {fault}" for fault in _summary_faults(summary)]
    except RecursionError:
        faults = [f"{folder / INDEX}: is nested too deeply"]
    if faults:
        raise InputError(*faults)
    return _flights(pd.DataFrame(rows, columns=list(COMPARED)), str(path)), summary


def _summary_faults(summary: Mapping) -> Iterator[str]:
    """What of a summary read from disk is not as this tool writes it, of what is compared."""
    lowest, inputs, start = summary.get("soc_min_pct"), summary.get("inputs", {}), summary.get("start")
    if lowest is not None and not (type(lowest) in (int, float) and abs(lowest) < MOST_PCT):
        yield f"soc_min_pct: must be a number of percent, got {shown(lowest)}"
    if not (isinstance(inputs, dict) and all(isinstance(digest, str) for digest in inputs.values())):
        yield f"inputs: must be a table of file names and their SHA-256, got {shown(inputs)}"
    if "start" in summary and not _is_moment(start):
        yield f"start: must be a time with a zone, such as 2026-12-07T00:00:00+00:00, got {shown(start)}"


def _is_moment(text) -> bool:
    try:
        return datetime.fromisoformat(text).tzinfo is not None
    except (TypeError, ValueError):
        return False


def _flights(contacts: pd.DataFrame, place: str = "contacts") -> list[Flight]:
    try:
        on, off = (
            [datetime.fromisoformat(text) for text in utc_text(contacts[key])] for key in ("tx_on_utc", "tx_off_utc")
        )
        volumes = _finite(contacts["volume_mbit"])
        modcods, carriers = _sent(contacts)
    except (ValueError, OverflowError) as fault:
        raise InputError(f"{place}: times and figures must be as this tool writes them: {fault}") from None
    columns = (contacts["pass_id"], contacts["station"], contacts["mode"], on, off, volumes, modcods, carriers)
    return [Flight(*row) for row in zip(*columns, strict=True)]


def _sent(contacts: pd.DataFrame) -> tuple[Iterable[str | None], Iterable[str | None]]:
    """MODCODs and carrier of each contact; None for each where the table, a sketch, is without them."""
    if not {"modcods", *CARRIER} <= set(contacts.columns):
        return (None,) * len(contacts), (None,) * len(contacts)
    settings = zip(*(_finite(contacts[name]) for name in CARRIER[:2]), contacts[CARRIER[2]], strict=True)
    carriers = [f"{plain_number(mhz)} MHz {plain_number(mbaud)} Mbaud {turn}" for mhz, mbaud, turn in settings]
    return contacts["modcods"], carriers


def _finite(column: pd.Series) -> list[float]:
    figures = column.astype(float)
    if not np.isfinite(figures).all():
        raise ValueError(f"{column.name} must be finite numbers")
    return figures.tolist()


def _difference(before: Flight, after: Flight) -> str:
    return f"{after.volume_mbit - before.volume_mbit:+.0f}"


def _row(change: str, flight: Flight, mbit: str, on_air: str = "") -> tuple[str, ...]:
    texts = (change, flight.pass_id, flight.station, flight.mode, on_air or flight.on_air, mbit)
    return tuple(map(_printable, texts))


def _printable(text: str) -> str:
    """Names may come from a file that somebody changed: what would steer a terminal is escaped."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)
