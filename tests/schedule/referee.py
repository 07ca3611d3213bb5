"""A second opinion on a written week: every constraint, from the files and the mission alone, by arithmetic of its own.

Nothing of planner's rooms is used but the description of the mission. Each function yields what is wrong, in words.
"""

import csv
import hashlib
import json
from datetime import UTC, datetime, timedelta
from itertools import combinations, pairwise
from pathlib import Path

A_MILLISECOND = 0.0011  # times in the files have milliseconds; differences of two of them may miss by one
ROUNDED_PCT = 0.002  # charge in the files has three decimals
CURRENT_PCT = 0.01  # of charge: current has four decimals, which over an hour is up to 0.007 % of these packs
POWER_W = 0.004 + 0.002  # watts have three decimals, volts and amperes four: at 14 V and 5 A some milliwatts
MBIT = 0.01  # volumes have three decimals, and some are sums of twenty
CENT_DB = 0.0051  # margins have two decimals
NAMES_OF_DAYS = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")


class WrittenWeek:
    """The files of a folder."""

    def __init__(self, folder: Path, mission):
        self.folder, self.mission = folder, mission
        self.contacts, self.passes, self.battery, self.recorder = (
            list(csv.DictReader((folder / f"{name}.csv").read_text().splitlines()))
            for name in ("contacts", "passes", "battery", "recorder")
        )
        self.summary = json.loads((folder / "summary.json").read_text())
        for row in self.contacts:
            row["on"], row["off"] = moment(row["tx_on_utc"]), moment(row["tx_off_utc"])
            row["craft"] = mission.satellite(row["satellite"]).spacecraft
            row["setting"] = row["craft"].mode(row["mode"])

    def of(self, satellite: str) -> list[dict]:
        return sorted((row for row in self.contacts if row["satellite"] == satellite), key=lambda row: row["on"])

    def series(self, table: list[dict], satellite: str) -> list[dict]:
        return [row for row in table if row["satellite"] == satellite]


def moment(text: str) -> datetime:
    return datetime.strptime(text, "%Y-%m-%dT%H:%M:%S.%fZ").replace(tzinfo=UTC)


def seconds(later: datetime, earlier: datetime) -> float:
    return (later - earlier).total_seconds()


def wrong(folder: Path, mission) -> list[str]:
    """All that is wrong with a written week."""
    week = WrittenWeek(folder, mission)
    checks = (windows, lengths, hours, apart, policies, commands, charge, power, storage, totals)
    return [f"{check.__name__}: {fault}" for check in checks for fault in check(week)]


def windows(week):
    passes = {row["pass_id"]: row for row in week.passes}
    for row in week.contacts:
        name = row["contact_id"]
        if not (own := passes.get(row["pass_id"])):
            yield f"{name}: no such pass"
            continue
        if any(own[key] != row[key] for key in ("satellite", "station", "aos_utc", "los_utc")):
            yield f"{name}: not as its pass"
        if own["verdict"] != "planned":
            yield f"{name}: its pass is {own['verdict']}"
        if seconds(row["on"], moment(own["aos_utc"])) < -A_MILLISECOND:
            yield f"{name}: on air before AOS"
        if seconds(moment(own["los_utc"]), row["off"]) < -A_MILLISECOND:
            yield f"{name}: on air after LOS"
        if seconds(row["on"], week.mission.start) < 0 or seconds(row["off"], week.mission.end) > 0:
            yield f"{name}: outside the span"
        if float(row["min_margin_db"]) < week.mission.policy.link_margin_db - CENT_DB:
            yield f"{name}: margin {row['min_margin_db']}"
    planned = {row["pass_id"] for row in week.passes if row["verdict"] == "planned"}
    if planned != {row["pass_id"] for row in week.contacts}:
        yield "passes marked planned are not those of the contacts"


def lengths(week):
    for row in week.contacts:
        length_s = seconds(row["off"], row["on"])
        if abs(length_s - float(row["duration_s"])) > A_MILLISECOND:
            yield f"{row['contact_id']}: duration {row['duration_s']} of {length_s}"
        if length_s < week.mission.policy.min_session_s - A_MILLISECOND:
            yield f"{row['contact_id']}: shorter than the policy's"
        if row["setting"].longest_on_s and length_s > row["setting"].longest_on_s + A_MILLISECOND:
            yield f"{row['contact_id']}: longer than the mode's"
        if abs(seconds(row["on"], moment(row["power_on_utc"])) - row["setting"].warmup_s) > A_MILLISECOND:
            yield f"{row['contact_id']}: power_on is not a warm-up before tx_on"


def hours(week):
    """Each second of each contact, against the station's clock."""
    for row in week.contacts:
        rules = week.mission.station(row["station"]).hours
        for k in range(int(seconds(row["off"], row["on"]))):
            now = row["on"] + timedelta(seconds=k + 0.5)
            if any(begin <= now < end for begin, end in rules.maintenance) or not _open(rules, now):
                yield f"{row['contact_id']}: {row['station']} is closed at {now}"
                break


def _open(rules, now: datetime) -> bool:
    today, yesterday = (NAMES_OF_DAYS[(now - timedelta(days=d)).weekday()] in rules.days for d in (0, 1))
    if not rules.open:
        return today
    for opens, closes in rules.open:
        if opens < closes and today and opens <= now.time() < closes:
            return True
        if closes <= opens and ((today and now.time() >= opens) or (yesterday and now.time() < closes)):
            return True
    return False


def apart(week):
    """Any two contacts that share a satellite or an antenna."""
    for first, second in combinations(sorted(week.contacts, key=lambda row: row["on"]), 2):
        same_craft, same_dish = (first[key] == second[key] for key in ("satellite", "station"))
        together = (
            first["pass_id"] == second["pass_id"]
            and first["mode"] != second["mode"]
            and second["mode"] in first["setting"].together_with
            and first["mode"] in second["setting"].together_with
        )
        if not (same_craft or same_dish) or together:
            continue
        pause_s = seconds(moment(second["power_on_utc"]), first["off"])
        least_s = week.mission.policy.turnaround_s
        if same_craft and first["mode"] == second["mode"]:
            least_s = max(least_s, first["setting"].cooldown_s)
        if pause_s < least_s - A_MILLISECOND:
            yield f"{first['contact_id']} and {second['contact_id']}: {pause_s:.1f} s apart, {least_s:g} s asked"


def policies(week):
    policy, mission = week.mission.policy, week.mission
    first_midnight = mission.start.astimezone(UTC).replace(hour=0, minute=0, second=0, microsecond=0)
    for satellite in mission.satellites:
        own = week.of(satellite.name)
        for day in range(int(mission.days) + 2):
            begin = first_midnight + timedelta(days=day)
            today = [row for row in own if begin <= row["on"] < begin + timedelta(days=1)]
            whole = begin >= mission.start and begin + timedelta(days=1) <= mission.end
            if policy.max_sessions_per_day is not None and len(today) > policy.max_sessions_per_day:
                yield f"{satellite.name}: {len(today)} sessions on {begin:%Y-%m-%d}"
            if whole and policy.daily_contact_modes and not any(r["mode"] in policy.daily_contact_modes for r in today):
                yield f"{satellite.name}: no daily contact on {begin:%Y-%m-%d}"
        if policy.longest_gap_h is not None:
            ends = [mission.start, *(row["off"] for row in own)]
            begins = [*(row["on"] for row in own), mission.end]
            for end, begin in zip(ends, begins, strict=True):
                if seconds(begin, end) > policy.longest_gap_h * 3600 + A_MILLISECOND:
                    yield f"{satellite.name}: {seconds(begin, end) / 3600:.2f} h without contact from {end}"
    if policy.cost_budget is not None:
        costs = [(mission.station(row["station"]).cost, seconds(row["off"], row["on"]) / 60) for row in week.contacts]
        cost = sum(one.per_pass + one.per_minute * minutes for one, minutes in costs)
        if cost > policy.cost_budget + 1e-6:
            yield f"station cost {cost:.3f}"
    modes = {(row["pass_id"], row["mode"]) for row in week.contacts}
    yield from (f"{wish} is not kept" for wish in policy.keep if tuple(wish.split(":", 1)) not in modes)
    yield from (f"{row['contact_id']} is dropped" for row in week.contacts if row["pass_id"] in policy.drop)


def commands(week):
    policy, mission = week.mission.policy, week.mission
    if policy.upload_lead_h is None:
        return
    for satellite in mission.satellites:
        until = satellite.start_state.commands_aboard_until or mission.start + timedelta(days=1)
        for row in week.of(satellite.name):
            if row["off"] <= until:
                continue
            carriers = [
                other["contact_id"]
                for other in week.of(satellite.name)
                if other["setting"].uplink
                and mission.station(other["station"]).uplink
                and seconds(row["on"], other["off"]) >= policy.upload_lead_h * 3600 - A_MILLISECOND
                and seconds(row["off"], other["on"]) <= policy.upload_reach_h * 3600 + A_MILLISECOND
            ]
            if row["commands_from"] not in carriers:
                yield f"{row['contact_id']}: commands from {row['commands_from'] or 'nowhere'}"


def charge(week):
    """Floors, the cell's voltages, and charge added up again from the current."""
    policy = week.mission.policy
    for satellite in week.mission.satellites:
        rows, battery = week.series(week.battery, satellite.name), satellite.spacecraft.battery
        lowest = min(float(row["soc_worst_pct"]) for row in rows)
        if lowest < policy.soc_floor_pct - ROUNDED_PCT:
            yield f"{satellite.name}: charge {lowest} below the floor"
        if float(rows[-1]["soc_worst_pct"]) < policy.soc_end_pct - ROUNDED_PCT:
            yield f"{satellite.name}: charge {rows[-1]['soc_worst_pct']} at the end"
        for row in rows:
            if float(row["soc_worst_pct"]) > float(row["soc_pct"]) + ROUNDED_PCT:
                yield f"{satellite.name}: the pessimistic charge is above the nominal at {row['time_utc']}"
            if not battery.cell_min_v - 1e-4 <= float(row["worst_cell_v"]) <= battery.cell_max_v + 1e-4:
                yield f"{satellite.name}: {row['worst_cell_v']} V at {row['time_utc']}"
        yield from _counted(satellite, rows, battery)


def _counted(satellite, rows, battery):
    """Coulombs, with the mission's efficiency in charge and self-discharge; a row's current holds until the next."""
    capacity_as = battery.cell_capacity_ah * battery.health * 3600
    soc = float(rows[0]["soc_pct"])
    for row, after in pairwise(rows):
        step_s, cell_a = seconds(moment(after["time_utc"]), moment(row["time_utc"])), float(row["cell_a"])
        stored_a = cell_a * (battery.coulombic_efficiency if cell_a > 0 else 1.0)
        leak = battery.self_discharge_pct_month * step_s / (30 * 86_400)
        soc += 100 * stored_a * step_s / capacity_as - leak
        if abs(soc - float(after["soc_pct"])) > CURRENT_PCT:
            yield f"{satellite.name}: counted {soc:.3f} %, stated {after['soc_pct']} % at {after['time_utc']}"
        soc = float(after["soc_pct"])


def power(week):
    """Array = load + spill + battery, row by row; and in each transmission the load holds the transmitter."""
    for satellite in week.mission.satellites:
        rows, craft = week.series(week.battery, satellite.name), satellite.spacecraft
        for row in rows[:-1]:
            battery_w = float(row["bus_v"]) * float(row["cell_a"]) * craft.battery.cells_parallel
            left_w = float(row["array_w"]) - float(row["load_w"]) - float(row["spill_w"]) - battery_w
            if abs(left_w) > POWER_W:
                yield f"{satellite.name}: {left_w:.4f} W unaccounted for at {row['time_utc']}"
        steady = [load for load in craft.load if load.when == "always"]
        least_w = sum(load.power_w * load.duty / load.converter_efficiency for load in steady)
        for contact in week.of(satellite.name):
            on_air = [r for r in rows if contact["on"] <= moment(r["time_utc"]) < contact["off"]]
            asked_w = least_w + contact["setting"].dc_power_w / contact["setting"].converter_efficiency
            if not on_air or min(float(row["load_w"]) for row in on_air) < asked_w - POWER_W:
                yield f"{contact['contact_id']}: the transmitter's {asked_w:.2f} W are not drawn"


def storage(week):
    for satellite in week.mission.satellites:
        rows, recorder = week.series(week.recorder, satellite.name), satellite.spacecraft.recorder
        for row in rows:
            stored, produced, delivered, lost = (
                float(row[f"{key}_mbit"]) for key in ("stored", "produced", "delivered", "lost")
            )
            if abs(float(rows[0]["stored_mbit"]) + produced - delivered - lost - stored) > MBIT:
                yield f"{satellite.name}: bits unaccounted for at {row['time_utc']}"
            if not -MBIT <= stored <= recorder.capacity_mbit - recorder.reserve_mbit + MBIT:
                yield f"{satellite.name}: {stored} Mbit stored at {row['time_utc']}"
        volume = sum(float(row["volume_mbit"]) for row in week.of(satellite.name))
        if abs(volume - float(rows[-1]["delivered_mbit"])) > MBIT:
            yield f"{satellite.name}: contacts bring {volume:.3f} Mbit, the recorder gave {rows[-1]['delivered_mbit']}"


def totals(week):
    volume = sum(float(row["volume_mbit"]) for row in week.contacts)
    if abs(volume - week.summary["volume_mbit"]) > MBIT:
        yield f"volume {week.summary['volume_mbit']} of {volume:.3f} Mbit"
    if week.summary["upper_bound_mbit"] < volume - MBIT:
        yield f"volume {volume:.3f} above its bound {week.summary['upper_bound_mbit']}"
    if week.summary["contacts"] != len(week.contacts) or week.summary["passes"] != len(week.passes):
        yield "counts in the summary"
    for name, digest in week.summary["files"].items():
        if hashlib.sha256((week.folder / name).read_bytes()).hexdigest() != digest:
            yield f"{name} is not what the summary's hash says"
