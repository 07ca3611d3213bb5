"""What changed between two issues of a week: contacts gained, lost and moved, megabits, lowest charge, inputs."""

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

import pandas as pd

from planner.errors import InputError
from planner.export.contacts import utc_text
from planner.export.folder import INDEX, verify_set
from planner.mission.table import read_table

COMPARED = ("pass_id", "satellite", "station", "mode", "tx_on_utc", "tx_off_utc", "volume_mbit")
HEADINGS = ("change", "pass", "station", "mode", "on air", "Mbit")


@dataclass(frozen=True)
class Flight:
    """A planned contact, as far as a comparison needs it."""

    pass_id: str
    station: str
    mode: str
    tx_on: datetime
    tx_off: datetime
    volume_mbit: float

    @property
    def on_air(self) -> str:
        return f"{self.tx_on:%d %b %H:%M:%S}–{self.tx_off:%H:%M:%S}Z"


@dataclass(frozen=True)
class Comparison:
    """`moved` pairs (before, after); figures as (before, after), None where a summary lacks them."""

    gained: tuple[Flight, ...]
    lost: tuple[Flight, ...]
    moved: tuple[tuple[Flight, Flight], ...]
    unchanged: int
    volume_mbit: tuple[float, float]
    soc_min_pct: tuple[float | None, float | None]
    inputs: tuple[str, ...]  # files that were read for one week and not, or not with the same content, for the other

    @property
    def is_same(self) -> bool:
        """The operator has nothing to do anew."""
        return not (self.gained or self.lost or self.moved)

    def headline(self) -> str:
        """The difference in one line."""
        if self.is_same:
            return f"no contact changed: all {self.unchanged} stand" + self._charge()
        counts = (
            f"{len(self.gained)} gained, {len(self.lost)} lost, {len(self.moved)} moved, {self.unchanged} unchanged"
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
            row = _row("moved", after, f"{after.volume_mbit - before.volume_mbit:+.0f}", on_air)
            rows.append((after.tx_on, row))
        return [row for _, row in sorted(rows)]

    def _charge(self) -> str:
        before, after = self.soc_min_pct
        return "" if before is None or after is None else f"; lowest charge {before:.1f} to {after:.1f} %"


def compare_sets(old_folder, new_folder) -> Comparison:
    """Compare the sets that two folders hold.

    Raises
    ------
    InputError : a folder holds no whole set (each fault told), or contacts that cannot be read
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
    common = [(before[key], after[key]) for key in before if key in after]
    moved = tuple((a, b) for a, b in common if (a.tx_on, a.tx_off) != (b.tx_on, b.tx_off))
    return Comparison(
        gained=tuple(flight for key, flight in after.items() if key not in before),
        lost=tuple(flight for key, flight in before.items() if key not in after),
        moved=moved,
        unchanged=len(common) - len(moved),
        volume_mbit=(_total_mbit(before.values()), _total_mbit(after.values())),
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


def _changed_inputs(old, new) -> tuple[str, ...]:
    old, new = dict(old), dict(new)
    return tuple(sorted(name for name in {*old, *new} if old.get(name) != new.get(name)))


def _read_set(folder: Path) -> tuple[list[Flight], Mapping]:
    rows = [row for _, row in read_table(folder / "contacts.csv", COMPARED)]
    return _flights(pd.DataFrame(rows, columns=list(COMPARED))), json.loads((folder / INDEX).read_bytes())


def _flights(contacts: pd.DataFrame) -> list[Flight]:
    try:
        on, off = (
            [datetime.fromisoformat(text) for text in utc_text(contacts[key])] for key in ("tx_on_utc", "tx_off_utc")
        )
        volumes = contacts["volume_mbit"].astype(float)
    except ValueError as fault:
        raise InputError(f"contacts: times and volumes must be as this tool writes them: {fault}") from None
    columns = (contacts["pass_id"], contacts["station"], contacts["mode"], on, off, volumes)
    return [Flight(*row) for row in zip(*columns, strict=True)]


def _row(change: str, flight: Flight, mbit: str, on_air: str = "") -> tuple[str, ...]:
    return (change, flight.pass_id, flight.station, flight.mode, on_air or flight.on_air, mbit)
