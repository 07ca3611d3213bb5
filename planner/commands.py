"""The commands about passes, plans and the battery, once their words are understood: call, then print."""

import json
import os
import platform
import time
from collections import defaultdict
from collections.abc import Iterator
from datetime import UTC, datetime, timedelta
from pathlib import Path

from planner import printing
from planner.hand_over import say_boxes
from planner.mission.contacts import Session
from planner.mission.models import Mission
from planner.printing import Tell, counted

DONE, NO = 0, 1
MOST_STALE_SHOWN = 12
FLOWN_ALREADY = "flown already? --freeze-until UTC leaves contacts that power on before unjudged"


def passes(mission: Mission, csv: str | None, tell: Tell) -> int:
    """Print every pass, or write the table."""
    from planner.face import find_passes

    tell("passes")
    found = find_passes(mission)
    if csv is not None:
        from planner.export.contacts import passes_csv
        from planner.export.folder import write_file

        write_file(csv, passes_csv(found))
        printing.say(f"{counted(len(found), 'pass', 'passes')} written to {csv}")
        return DONE
    printing.table(
        [("pass_id", "left"), ("station", "left"), ("aos_utc", "left"), ("los_utc", "left"), ("duration", "right"),
         ("max el.", "right"), ("range", "right"), ("sunlit", "right")],
        [(p["pass_id"], p["station"], p["aos_utc"][:19] + "Z", p["los_utc"][:19] + "Z", f"{p['duration_s']:.0f} s",
          f"{p['max_elevation_deg']:.1f} deg", f"{p['tca_range_km']:.0f} km", f"{100 * p['sunlit_fraction']:.0f} %")
         for p in found.to_dict("records")],
    )  # fmt: skip
    printing.say(counted(len(found), "pass", "passes"))
    return DONE


def week(mission: Mission, arguments, freeze_until: datetime | None, tell: Tell) -> int:
    """Plan the week, write it whole or not at all, and say what it comes to."""
    from planner.export.folder import claim_folder
    from planner.export.week import write_week
    from planner.schedule.result import plan_week
    from planner.schedule.wishes import sessions_of

    began, given = time.perf_counter(), arguments.previous
    previous = None if given is None else sessions_of(given, mission)
    with claim_folder(arguments.out) as folder:
        printing.fault(folder.mended)
        plan = plan_week(
            mission,
            keep=arguments.keep,
            drop=arguments.drop,
            previous=given,
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
        write_week(folder, mission, plan, log, before=None if given is None else Path(given).parent)
    _say_week(plan, Path(arguments.out), arguments.quiet, time.perf_counter() - began)
    if not arguments.quiet:
        say_boxes(mission)
    if previous is not None:
        _say_changes(given, previous, plan)
    return DONE


def _say_week(plan, folder: Path, quiet: bool, seconds: float) -> None:
    s, policy = plan.summary, plan.flown.week.mission.policy
    verdicts = plan.passes["verdict"].value_counts()
    if not quiet:
        printing.table(
            [("day", "left"), ("contacts", "right"), ("Mbit", "right"), ("minutes on air", "right"),
             ("lowest charge", "right")],
            _days(plan.contacts),
        )  # fmt: skip
        printing.say("")
    planned, passes = verdicts.get("planned", 0), counted(s["passes"], "pass", "passes")
    printing.say(
        f"{counted(s['contacts'], 'contact')} on {planned} of {passes}"
        f" ({verdicts.get('left out', 0)} left out, {verdicts.get('unusable', 0)} unusable,"
        f" {verdicts.get('dropped', 0)} dropped)"
    )
    printing.say(
        f"{s['volume_mbit']:.0f} Mbit at {policy.availability_pct:g} % availability; nothing better than"
        f" {s['upper_bound_mbit']:.0f} Mbit exists (gap {s['gap_pct']:.2f} %, solver gap {s['solver_gap_pct']:.3f} %)"
    )
    printing.say(
        f"lowest charge {s['soc_min_pct']:.1f} % against the {policy.floor_words}, at the end"
        f" {s['soc_end_pct']:.1f} % (pessimistic corner); {s['lost_mbit']:.0f} Mbit lost to a full recorder"
    )
    if s["status"] != "optimal":
        printing.say(f"the solver stopped early: {s['status']}")
    if not quiet:
        for caution in s["cautions"]:
            printing.say(f"caution: {caution}")
    printing.say(f"written to {folder} in {seconds:.1f} s")


def _say_changes(given: str, previous: list[Session], plan) -> None:
    """What the re-plan changed against the contacts it was given, which its own may have replaced on disk by now."""
    from planner.export.compare import HEADINGS, compare_plans
    from planner.schedule.flown import Flown
    from planner.schedule.result import GivenWeek

    known = [s for s in previous if s.pass_id in plan.flown.week.row_of and plan.flown.week.reaches(s)]
    found = compare_plans(GivenWeek(Flown(plan.flown.week, tuple(known))), plan)
    printing.say(f"against {given}, valued anew: {found.headline()}")
    if not found.is_same:
        printing.table([(heading, "left") for heading in HEADINGS], found.rows())


def _days(contacts):
    for day, group in contacts.groupby(contacts["tx_on_utc"].str[:10]):
        yield (day, str(len(group)), f"{group['volume_mbit'].sum():.0f}", f"{group['duration_s'].sum() / 60:.1f}",
               f"{group['soc_min_pct'].min():.1f} %")  # fmt: skip


def show_audit(
    mission: Mission, contacts: str, as_json: bool, before: tuple[datetime | None, str | None], tell: Tell
) -> int:
    """Print every broken rule and stale figure; the exit status is the verdict. `before`: the freeze, the old issue."""
    from planner.schedule.audit import audit

    tell("passes, links and power")
    freeze_until, previous = before
    verdict = audit(mission, contacts, freeze_until=freeze_until, previous=previous)
    if as_json:
        printing.say(json.dumps(verdict.as_dict(), indent=2))
        return DONE if verdict.safe else NO
    for text in _broken(verdict):
        printing.say(f"BROKEN  {text}")
    for figure in verdict.stale[:MOST_STALE_SHOWN]:
        printing.say(f"stale   {figure.text}")
    if len(verdict.stale) > MOST_STALE_SHOWN:
        printing.say(f"stale   and {counted(len(verdict.stale) - MOST_STALE_SHOWN, 'more figure')} (--json lists all)")
    count = len(verdict.flown.sessions)
    if verdict.safe:
        stale = f"; {counted(len(verdict.stale), 'stale figure')}" if verdict.stale else ""
        printing.say(f"{counted(count, 'contact')} keep{'s' if count == 1 else ''} every limit{stale}")
        return DONE
    if freeze_until is None and _judged_by_newer_elements(verdict):
        printing.say(f"hint    {FLOWN_ALREADY}")
    printing.say(f"UNSAFE: {counted(len(verdict.faults), 'rule')} broken, {counted(count, 'contact')}")
    return NO


def _broken(verdict) -> Iterator[str]:
    """A line for each fault; a battery's limit that breaks outside contacts again and again gets two in all."""
    alike = defaultdict(list)
    for number, fault in enumerate(verdict.faults):
        by_limit = fault.satellite and fault.session is None
        alike[(fault.satellite, fault.rule) if by_limit else number].append(number)
    texts = verdict.texts()
    for first, *rest in alike.values():
        yield texts[first]
        if rest:
            yield _again([verdict.faults[number] for number in rest], verdict.flown.week.sky.clock.iso)


def _again(rest: list, iso) -> str:
    """How often more one limit breaks, when first and where worst."""
    worst = max(rest, key=lambda fault: abs(fault.value - fault.bound))
    return (
        f"{worst.satellite}: {worst.rule}: {counted(len(rest), 'more time')} (--json lists all), from"
        f" {iso(rest[0].time_s)}; worst {worst.value:.2f} {worst.unit} from {iso(worst.time_s)}"
    )


def _judged_by_newer_elements(verdict) -> bool:
    """Whether every contact at fault ended before the epoch of the elements it is judged by."""
    mission = verdict.flown.week.mission
    broken = [fault.session for fault in verdict.faults if fault.session is not None and not fault.satellite]
    return bool(broken) and all(
        mission.start + timedelta(seconds=session.tx_off_s) < mission.satellite(session.satellite).elements.epoch
        for session in broken
    )


def show_affordability(
    mission: Mission, pass_id: str, mode: str, contacts: str | None, as_json: bool, tell: Tell
) -> int:
    """Print the go or no-go for one session; the exit status is the answer."""
    from planner.schedule.afford import afford

    answer = afford(mission, pass_id, mode, contacts, progress=tell)
    if as_json:
        printing.say(json.dumps(answer.as_dict(), indent=2))
        return DONE if answer.affordable else NO
    printing.say(
        f"{_verdict(answer, mission.policy.min_session_s)}: {answer.mode} on {answer.pass_id}"
        f" ({answer.satellite} over {answer.station})"
    )
    printing.say(answer.reason)
    if answer.duration_s is not None:
        printing.table([("", "left"), ("", "left")], list(_answer_rows(answer, mission.policy.floor_words)))
    return DONE if answer.affordable else NO


def _verdict(answer, shortest_s: float) -> str:
    if answer.affordable:
        return "YES, affordable"
    if answer.longest_s is None or answer.longest_s < shortest_s:
        return "NO, not affordable"
    return f"NO for the whole window of {answer.duration_s:.0f} s, YES for up to {answer.longest_s:.0f} s"


def _answer_rows(answer, floor: str):
    if answer.replaces:
        planned = f"{', '.join(answer.replaces)}, {answer.replaced_s:.0f} s on air"
        yield "in place of, already planned", planned + ("" if answer.affordable else ", which stand as planned")
    yield "whole usable window", f"{answer.tx_on_utc} to {answer.tx_off_utc}, {answer.duration_s:.0f} s"
    yield "volume", f"{answer.volume_mbit:.0f} Mbit; all contacts together {answer.gained_mbit:+.0f} Mbit"
    yield (
        "energy at the battery",
        f"{answer.energy_wh:.2f} Wh" + (f", {answer.joule_per_mbit:.3f} J/Mbit" if answer.joule_per_mbit else ""),
    )
    yield "charge before, after", f"{answer.soc_before_pct:.1f} %, {answer.soc_after_pct:.1f} % (pessimistic corner)"
    yield "lowest charge from then on", f"{answer.soc_lowest_pct:.1f} % at {answer.soc_lowest_utc}, {floor}"
    yield "lowest cell voltage", f"{answer.lowest_cell_v:.3f} V"
    yield "charge is back", answer.recovered_utc or "not within the span"
    yield (
        "longest affordable",
        (f"{answer.longest_s:.0f} s, best from {answer.longest_tx_on_utc}" if answer.longest_s else "none"),
    )
    if answer.only_by_rules:
        yield "the battery alone", "could pay for the whole window"
    elif answer.binding_limit:
        yield "binding limit", answer.binding
        yield "would have to give way", ", ".join(answer.give_way) or "none would do"
    for conflict in answer.conflicts:
        yield "also in conflict", conflict
