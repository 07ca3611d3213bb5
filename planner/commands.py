"""What each command does once its words are understood: call, then print."""

import json
import os
import platform
import time
from datetime import UTC, datetime
from pathlib import Path

from planner import printing
from planner.errors import InputError
from planner.mission.models import Mission, Satellite
from planner.printing import Tell

DONE, NO = 0, 1
MOST_STALE_SHOWN = 12


def check(mission: Mission) -> int:
    """Print what was understood."""
    printing.say(f"{mission.name}: {mission.days:g} days from {mission.start.astimezone(UTC):%Y-%m-%dT%H:%M:%SZ}")
    printing.say("")
    printing.table(
        [("station", "left"), ("latitude", "right"), ("longitude", "right"), ("above", "right"), ("dish", "right"),
         ("bands", "left"), ("open", "left")],
        [(s.name, f"{s.latitude_deg:.2f} deg", f"{s.longitude_deg:.2f} deg", f"{s.min_elevation_deg:g} deg",
          f"{s.antenna.diameter_m:g} m", " ".join(b for r in s.receiver for b in r.bands), _hours(s))
         for s in mission.stations],
    )  # fmt: skip
    for satellite in mission.satellites:
        _check_satellite(mission, satellite)
    printing.say("")
    printing.table([("policy", "left"), ("", "left")], [(k, str(v)) for k, v in mission.policy.model_dump().items()])
    printing.say("")
    printing.table([("file read, from the mission's folder", "left"), ("SHA-256", "left")],
                   [(name, digest[:16] + "…") for name, digest in mission.inputs])  # fmt: skip
    printing.say(f"{len(mission.inputs)} files read, no fault found.")
    return DONE


def _hours(station) -> str:
    opened = ", ".join(f"{a:%H:%M}-{b:%H:%M}" for a, b in station.hours.open) or "always"
    days = "" if len(station.hours.days) == 7 else " " + " ".join(station.hours.days)
    return opened + days + (f", {len(station.hours.maintenance)} closures" if station.hours.maintenance else "")


def _check_satellite(mission: Mission, satellite: Satellite) -> None:
    craft, battery = satellite.spacecraft, satellite.spacecraft.battery
    age_days = (mission.start - satellite.elements.epoch).total_seconds() / 86_400
    printing.say("")
    printing.say(
        f"{satellite.name}: elements of {satellite.elements.epoch:%Y-%m-%dT%H:%M:%SZ} ({age_days:.2f} days before the"
        f" start), {battery.cells_series}S{battery.cells_parallel}P {battery.chemistry}"
        f" {battery.cells_parallel * battery.cell_capacity_ah:g} Ah, recorder {craft.recorder.usable_mbit:g} Mbit,"
        f" {len(craft.panel)} panels, {len(craft.load)} loads, charge {satellite.start_state.soc_pct:g} %"
        f" ± {satellite.start_state.soc_error_pct:g}"
    )
    printing.table(
        [("mode", "left"), ("carrier", "right"), ("RF", "right"), ("DC", "right"), ("symbols", "right"),
         ("MODCODs", "left"), ("antenna", "left"), ("commands up", "left")],
        [(t.mode, f"{t.frequency_mhz:g} MHz", f"{t.rf_power_w:g} W", f"{t.dc_power_w:g} W",
          f"{t.symbol_rate_mbaud:g} Mbaud", f"{len(t.modcods)}, {t.modcod_choice}", t.antenna.kind,
          "yes" if t.uplink else "no") for t in craft.transmitter],
    )  # fmt: skip


def passes(mission: Mission, csv: str | None, tell: Tell) -> int:
    """Print every pass, or write the table."""
    from planner.face import find_passes

    tell("passes")
    found = find_passes(mission)
    if csv is not None:
        from planner.export.contacts import passes_csv
        from planner.export.folder import write_file

        write_file(csv, passes_csv(found))
        printing.say(f"{len(found)} passes written to {csv}")
        return DONE
    printing.table(
        [("pass_id", "left"), ("station", "left"), ("aos_utc", "left"), ("los_utc", "left"), ("duration", "right"),
         ("max el.", "right"), ("range", "right"), ("sunlit", "right")],
        [(p["pass_id"], p["station"], p["aos_utc"][:19] + "Z", p["los_utc"][:19] + "Z", f"{p['duration_s']:.0f} s",
          f"{p['max_elevation_deg']:.1f} deg", f"{p['tca_range_km']:.0f} km", f"{100 * p['sunlit_fraction']:.0f} %")
         for p in found.to_dict("records")],
    )  # fmt: skip
    printing.say(f"{len(found)} passes")
    return DONE


def week(mission: Mission, arguments, freeze_until: datetime | None, tell: Tell) -> int:
    """Plan the week, write it whole or not at all, and say what it comes to."""
    from planner.export.folder import claim_folder
    from planner.export.week import write_week
    from planner.schedule.result import plan_week

    began = time.perf_counter()
    with claim_folder(arguments.out) as folder:
        printing.fault(folder.mended)
        plan = plan_week(
            mission,
            keep=arguments.keep,
            drop=arguments.drop,
            previous=arguments.previous,
            freeze_until=freeze_until,
            time_limit_s=arguments.time_limit,
            progress=tell,
        )
        if arguments.explain:
            plan = plan.explained(tell)
        if arguments.prices:
            plan = plan.priced(tell)
        tell("tables and the picture")
        log = {
            "finished_utc": datetime.now(UTC).isoformat(timespec="seconds"),
            "seconds": {name: round(seconds, 3) for name, seconds in plan.plan.seconds.items()},
            "seconds_to_plan": round(time.perf_counter() - began, 3),
            "machine": platform.platform(),
            "processors": os.cpu_count(),
        }
        write_week(folder, mission, plan, log)
    _say_week(plan, Path(arguments.out), arguments.quiet, time.perf_counter() - began)
    if arguments.previous is not None:
        _say_changes(mission, arguments.previous, plan)
    return DONE


def _say_week(plan, folder: Path, quiet: bool, seconds: float) -> None:
    s = plan.summary
    verdicts = plan.passes["verdict"].value_counts()
    if not quiet:
        printing.table(
            [("day", "left"), ("contacts", "right"), ("Mbit", "right"), ("minutes on air", "right"),
             ("lowest charge", "right")],
            _days(plan.contacts),
        )  # fmt: skip
        printing.say("")
    printing.say(
        f"{s['contacts']} contacts on {verdicts.get('planned', 0)} of {s['passes']} passes"
        f" ({verdicts.get('left out', 0)} left out, {verdicts.get('unusable', 0)} unusable,"
        f" {verdicts.get('dropped', 0)} dropped)"
    )
    printing.say(
        f"{s['volume_mbit']:.0f} Mbit at {s['policy']['availability_pct']:g} % availability; nothing better than"
        f" {s['upper_bound_mbit']:.0f} Mbit exists (gap {s['gap_pct']:.2f} %, solver gap {s['solver_gap_pct']:.3f} %)"
    )
    printing.say(
        f"lowest charge {s['soc_min_pct']:.1f} % against the floor {s['soc_floor_pct']:g} %, at the end"
        f" {s['soc_end_pct']:.1f} % (pessimistic corner); {s['lost_mbit']:.0f} Mbit lost to a full recorder"
    )
    if s["status"] != "optimal":
        printing.say(f"the solver stopped early: {s['status']}")
    if not quiet:
        for caution in s["cautions"]:
            printing.say(f"caution: {caution}")
    printing.say(f"written to {folder} in {seconds:.1f} s")


def _say_changes(mission: Mission, previous: str, plan) -> None:
    """What the re-plan changed against the contacts it was given."""
    from planner.export.compare import HEADINGS, compare_plans
    from planner.schedule.flown import Flown
    from planner.schedule.result import GivenWeek
    from planner.schedule.wishes import sessions_of

    known = [
        s for s in sessions_of(previous, mission) if s.pass_id in plan.flown.week.row_of and plan.flown.week.reaches(s)
    ]
    found = compare_plans(GivenWeek(Flown(plan.flown.week, tuple(known))), plan)
    printing.say(f"against {previous}: {found.headline()}")
    if not found.is_same:
        printing.table([(heading, "left") for heading in HEADINGS], found.rows())


def _days(contacts):
    for day, group in contacts.groupby(contacts["tx_on_utc"].str[:10]):
        yield (day, str(len(group)), f"{group['volume_mbit'].sum():.0f}", f"{group['duration_s'].sum() / 60:.1f}",
               f"{group['soc_min_pct'].min():.1f} %")  # fmt: skip


def show_audit(mission: Mission, contacts: str, as_json: bool, tell: Tell) -> int:
    """Print every broken rule and stale figure; the exit status is the verdict."""
    from planner.schedule.audit import audit

    tell("passes, links and power")
    verdict = audit(mission, contacts)
    if as_json:
        printing.say(json.dumps(verdict.as_dict(), indent=2))
        return DONE if verdict.safe else NO
    for text in verdict.texts():
        printing.say(f"BROKEN  {text}")
    for figure in verdict.stale[:MOST_STALE_SHOWN]:
        printing.say(f"stale   {figure.text}")
    if len(verdict.stale) > MOST_STALE_SHOWN:
        printing.say(f"stale   and {len(verdict.stale) - MOST_STALE_SHOWN} more figures (--json lists all)")
    count = len(verdict.flown.sessions)
    if verdict.safe:
        printing.say(
            f"{count} contacts keep every limit" + (f"; {len(verdict.stale)} stale figures" if verdict.stale else "")
        )
        return DONE
    printing.say(f"UNSAFE: {len(verdict.faults)} rules broken by {count} contacts")
    return NO


def show_affordability(
    mission: Mission, pass_id: str, mode: str, contacts: str | None, as_json: bool, tell: Tell
) -> int:
    """Print the go or no-go for one session; the exit status is the answer."""
    from planner.schedule.afford import afford

    answer = afford(mission, pass_id, mode, contacts, progress=tell)
    if as_json:
        printing.say(json.dumps(answer.as_dict(), indent=2))
        return DONE if answer.affordable else NO
    verdict = "YES, affordable" if answer.affordable else "NO, not affordable"
    printing.say(f"{verdict}: {answer.mode} on {answer.pass_id} ({answer.satellite} over {answer.station})")
    printing.say(answer.reason)
    if answer.duration_s is not None:
        printing.table([("", "left"), ("", "left")], list(_answer_rows(answer)))
    return DONE if answer.affordable else NO


def _answer_rows(answer):
    yield "whole usable window", f"{answer.tx_on_utc} to {answer.tx_off_utc}, {answer.duration_s:.0f} s"
    yield "volume", f"{answer.volume_mbit:.0f} Mbit"
    yield (
        "energy at the battery",
        f"{answer.energy_wh:.2f} Wh" + (f", {answer.joule_per_mbit:.3f} J/Mbit" if answer.joule_per_mbit else ""),
    )
    yield "charge before, after", f"{answer.soc_before_pct:.1f} %, {answer.soc_after_pct:.1f} % (pessimistic corner)"
    yield "lowest charge from then on", f"{answer.soc_lowest_pct:.1f} % at {answer.soc_lowest_utc}"
    yield "lowest cell voltage", f"{answer.lowest_cell_v:.3f} V"
    yield "charge is back", answer.recovered_utc or "not within the span"
    yield (
        "longest affordable",
        (f"{answer.longest_s:.0f} s, best from {answer.longest_tx_on_utc}" if answer.longest_s else "none"),
    )
    if answer.binding_limit:
        yield "binding limit", f"{answer.binding_limit}, missing {answer.missing:.2f} {answer.missing_unit}"
        yield "would have to give way", ", ".join(answer.give_way) or "giving up contacts does not help"
    for conflict in answer.conflicts:
        yield "also in conflict", conflict


def show_comparison(old: str, new: str) -> int:
    """Print what changed."""
    from planner.export.compare import HEADINGS, compare_sets

    found = compare_sets(old, new)
    printing.say(found.headline())
    if not found.is_same:
        printing.table([(heading, "left") for heading in HEADINGS], found.rows())
    for name in found.inputs:
        printing.say(f"input changed: {name}")
    return DONE


def write_pointing(mission: Mission, arguments, tell: Tell) -> int:
    """Pointing tables for every contact of a file."""
    from planner.export.folder import write_set
    from planner.export.pointing import pointing_files
    from planner.schedule.result import prepared
    from planner.schedule.wishes import sessions_of

    sessions = sessions_of(Path(arguments.contacts), mission)
    tell("passes, links and power")
    sky = prepared(mission).sky
    tell("pointing tables")
    files = pointing_files(
        mission, sky, sessions, step_s=arguments.step, refracted=arguments.refracted, force=arguments.force
    )
    printing.fault(
        write_set(arguments.out, files, {"mission": mission.name, "tables": len(files)}, index="pointing.json")
    )
    printing.say(f"{len(files)} pointing tables written to {arguments.out}")
    return DONE


def write_cards(mission: Mission, contacts: Path, out: Path, tell: Tell) -> int:
    """A card for every contact of a file, and the week sheet."""
    from planner.export.cards import card_files
    from planner.export.folder import write_set
    from planner.export.sheet import sheet_files
    from planner.schedule.audit import audit
    from planner.schedule.result import GivenWeek

    tell("checking the contacts")
    verdict = audit(mission, contacts)
    if not verdict.safe:
        raise InputError(f"{contacts}: cards are made only of contacts that keep every limit", *verdict.texts())
    given = GivenWeek(verdict.flown)
    files: dict[str, bytes] = {}
    for name, content in card_files(mission, verdict.flown.week.sky, given.contacts):
        tell(f"card {len(files) // 2 + 1} of {len(given.contacts)}")
        files[name] = content
    tell("the week sheet")
    files |= sheet_files(mission, given)
    printing.fault(write_set(out, files, {"mission": mission.name, "cards": len(given.contacts)}, index="cards.json"))
    printing.say(f"{len(given.contacts)} cards and the week sheet written to {out}")
    return DONE
