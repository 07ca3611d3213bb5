"""The commands: parse, call, print. `python -m planner COMMAND --help` shows an example of each."""

import argparse
import json
import sys
from datetime import datetime
from pathlib import Path

from planner import completion, printing
from planner.errors import InputError, MachineError, NoWeekError
from planner.mission.files import DEFAULT_MISSION, load_mission
from planner.mission.models import Mission
from planner.printing import Tell

DONE, NO, WRONG_INPUT, MACHINE, INTERRUPTED = 0, 1, 2, 3, 130
WEEK = ("contacts.csv", "passes.csv", "battery.csv", "recorder.csv", "week.ics", "week.png")  # in every week's folder
FLOWN_HELP = "contacts that power on before have flown: newer elements do not judge them"
BEFORE_HELP = "contacts issued before --freeze-until: those aboard by then must stand, others need an uplink later"
KEEP_HELP = "fly this pass in this mode, as PASS:MODE (may be repeated)"


def main(argv: list[str] | None = None) -> int:
    """Run one command; its exit status."""
    printing.open_streams()
    try:
        return _status(argv)
    finally:
        printing.settle_streams()


def _status(argv: list[str] | None) -> int:
    parser = _parser()
    completion.offer(parser)
    arguments = parser.parse_args(argv)
    try:
        with printing.stages(arguments.quiet, arguments.verbose) as tell:
            return arguments.run(arguments, tell)
    except InputError as error:
        printing.fault(error.faults)
        return WRONG_INPUT
    except NoWeekError as error:
        printing.fault(str(error).splitlines())
        return NO
    except MachineError as error:
        printing.fault([str(error)])
        return MACHINE
    except MemoryError:
        printing.fault(["the machine's memory does not hold this mission; plan fewer days, stations or satellites"])
        return MACHINE
    except OSError as error:
        printing.fault([f"{error.filename or 'the machine'}: {error.strerror or error}"])
        return MACHINE
    except KeyboardInterrupt:
        printing.fault(["interrupted; nothing was written"])
        return INTERRUPTED


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="python -m planner",
        description="Plan a week of downlink sessions that a small satellite's battery can pay for.",
        epilog="Exit status: 0 done; 1 the answer is no; 2 wrong input; 3 the machine could not; 130 interrupted.",
    )
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")
    add = _Adder(commands)
    add("check", _check, "read and validate everything, print what was understood", "check missions/marshlight.toml")
    passes = add("passes", _passes, "every pass in the span", "passes --csv passes.csv")
    passes.add_argument("--csv", metavar="FILE", help="write the table to FILE instead of the screen")
    _link_options(add("link", _link, "one link budget, line by line",
                      'link --station "Dry Pan" --mode "K high rate" --elevation 30'))  # fmt: skip
    _week_options(add("week", _week, "plan the week and write it into a folder", "week --out week"))
    audit = add(
        "audit", _audit, "check any contacts file against every limit", "audit week/contacts.csv", contacts=True
    )
    audit.add_argument("--freeze-until", metavar="UTC", help=FLOWN_HELP)
    audit.add_argument("--from", dest="previous", metavar="FILE", help=BEFORE_HELP)
    audit.add_argument("--json", action="store_true", help="print the verdict as JSON")
    afford = add("afford", _afford, "can the battery pay for this one session?",
                 'afford --pass PASS_ID --mode "K high rate" --contacts week/contacts.csv')  # fmt: skip
    afford.add_argument("--pass", dest="pass_id", metavar="ID", required=True, help="pass id, as in passes.csv")
    afford.add_argument("--mode", required=True, help="mode of the session")
    afford.add_argument("--contacts", metavar="FILE", help="accepted contacts; without it the week is planned first")
    afford.add_argument("--json", action="store_true", help="print the answer as JSON")
    compare = add("compare", _compare, "what changed between two written weeks", "compare week_old week", mission=False)
    compare.add_argument("old", metavar="OLD_DIR")
    compare.add_argument("new", metavar="NEW_DIR")
    _hand_over_options(add)
    return parser


class _Adder:
    """Adds a command with what all of them share."""

    def __init__(self, commands):
        self._commands = commands

    def __call__(self, name, run, text, example, *, mission=True, contacts=False) -> argparse.ArgumentParser:
        command = self._commands.add_parser(
            name,
            help=text,
            description=text[0].upper() + text[1:] + ("" if text.endswith("?") else "."),
            epilog=f"Example: python -m planner {example}",
        )
        if contacts:
            command.add_argument("files", nargs="+", metavar="[MISSION] CONTACTS.csv",
                                 help=f"mission file (default {DEFAULT_MISSION}) and contacts")  # fmt: skip
        elif mission:
            command.add_argument("mission", nargs="?", default=str(DEFAULT_MISSION), metavar="MISSION",
                                 help=f"mission file (default {DEFAULT_MISSION})")  # fmt: skip
        command.add_argument("--quiet", action="store_true", help="say only the answer")
        command.add_argument("--verbose", action="store_true", help="log each stage and decision to standard error")
        command.set_defaults(run=run)
        return command


def _link_options(link: argparse.ArgumentParser) -> None:
    link.add_argument("--station", required=True)
    link.add_argument("--mode", required=True)
    where = link.add_mutually_exclusive_group(required=True)
    where.add_argument("--elevation", type=float, metavar="DEG", help="at this elevation of a circular orbit")
    where.add_argument("--pass", dest="pass_id", metavar="ID", help="at the highest moment of this pass")
    link.add_argument("--satellite", metavar="N", help="needed where the mission has several")
    link.add_argument("--modcod", metavar="NAME", help="instead of the fastest that holds")
    link.add_argument("--availability", type=float, metavar="PCT", help="instead of the policy's")
    link.add_argument("--json", action="store_true", help="print the budget as JSON")


def _week_options(week: argparse.ArgumentParser) -> None:
    week.add_argument("--out", default="week", metavar="DIR", help="folder for the files, default week; replaced whole")
    week.add_argument("--keep", action="append", default=[], metavar="PASS:MODE", help=KEEP_HELP)
    week.add_argument("--drop", action="append", default=[], metavar="PASS", help="do not fly this pass (repeatable)")
    week.add_argument("--from", dest="previous", metavar="CONTACTS.csv", help="change as few of these as possible")
    week.add_argument("--freeze-until", metavar="UTC", help="contacts of --from that begin before stay as they are")
    week.add_argument("--explain", action="store_true", help="also what keeping each left-out pass costs (minutes)")
    week.add_argument("--prices", action="store_true", help="also what a further Wh, W, dB or station is worth")
    week.add_argument("--time-limit", type=float, metavar="S", help="best plan found in S seconds, its gap told")


def _hand_over_options(add: _Adder) -> None:
    pointing = add("pointing", _pointing, "pointing tables for the stations",
                   "pointing --contacts week/contacts.csv --out pointing")  # fmt: skip
    cards = add("cards", _cards, "a one-page card per contact, and the week sheet",
                "cards --contacts week/contacts.csv --out cards")  # fmt: skip
    for command in (pointing, cards):
        command.add_argument("--contacts", required=True, metavar="FILE")
        command.add_argument("--out", required=True, metavar="DIR")
    cards.add_argument("--freeze-until", metavar="UTC", help=FLOWN_HELP)
    pointing.add_argument("--step", type=float, default=1.0, metavar="S", help="seconds between rows (default 1)")
    pointing.add_argument("--refracted", action="store_true", help="angles as seen through the air (ITU-R P.834)")
    pointing.add_argument("--force", action="store_true", help="also where elements are too old for the beam")


def _mission(path: str) -> Mission:
    """The mission, its modes checked against what the link can compute; faults name the file."""
    from planner.link import check_modes

    if path == str(DEFAULT_MISSION) and not DEFAULT_MISSION.exists():
        raise InputError(f"{path}: no such file here; name your mission file after the command")
    mission = load_mission(path)
    try:
        check_modes(mission)
    except InputError as error:
        raise InputError(*(f"{path}: {fault}" for fault in error.faults)) from None
    return mission


def _mission_apart(arguments, index: str, files: tuple[str, ...] = ()) -> Mission:
    """The mission of a command that fills a folder: none that it is read from, and none that holds something else.

    `index` tells the set that is replaced, `files` what of the new one is known.
    """
    from planner.export.folder import check_ours

    _named("--out", "a folder", arguments.out)
    mission, folder = _mission(arguments.mission), Path(arguments.out).resolve()
    inside = next((path for path in _read_for(mission, arguments) if path.resolve().parent == folder), None)
    if inside is not None or folder.parent == folder:
        why = "is the root of the disk" if inside is None else f"holds {inside}, which the mission is read from"
        raise InputError(f"--out must be a folder of its own, got {arguments.out}, which {why}")
    check_ours(arguments.out, index, files)
    return mission


def _named(option: str, what: str, given: str) -> None:
    if not given.strip():
        raise InputError(f"{option} must be the name of {what}, got nothing; is a variable of the shell not set?")


def _read_for(mission: Mission, arguments) -> list[Path]:
    """Every file that the mission is read from."""
    return [Path(arguments.mission).parent / name for name, _ in mission.inputs]


def _check(arguments, tell: Tell) -> int:
    from planner.understood import check

    return check(_mission(arguments.mission))


def _passes(arguments, tell: Tell) -> int:
    from planner.commands import passes

    if arguments.csv is None:
        return passes(_mission(arguments.mission), None, tell)
    _named("--csv", "a file", arguments.csv)
    mission, csv = _mission(arguments.mission), Path(arguments.csv)
    if any(csv.exists() and csv.samefile(path) for path in _read_for(mission, arguments)):
        raise InputError(f"--csv must be a file of its own, got {csv}, which the mission is read from")
    return passes(mission, arguments.csv, tell)


def _link(arguments, tell: Tell) -> int:
    from planner import link_budget

    tell("the link")
    budget = link_budget(
        _mission(arguments.mission),
        arguments.station,
        arguments.mode,
        elevation_deg=arguments.elevation,
        pass_id=arguments.pass_id,
        satellite=arguments.satellite,
        modcod=arguments.modcod,
        availability_pct=arguments.availability,
    )
    printing.say(json.dumps(budget.as_dict(), indent=2) if arguments.json else str(budget))
    return DONE


def _week(arguments, tell: Tell) -> int:
    from planner.commands import week
    from planner.export.folder import INDEX

    freeze = _freeze(arguments)
    if arguments.time_limit is not None and not 0 < arguments.time_limit < 1e6:
        raise InputError(f"--time-limit must be above 0 s and below 1e6 s, got {arguments.time_limit:g}")
    return week(_mission_apart(arguments, INDEX, WEEK), arguments, freeze, tell)


def _freeze(arguments) -> datetime | None:
    text = arguments.freeze_until
    if text is None:
        return None
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        raise InputError(f"--freeze-until must be a time such as 2026-12-08T06:00:00Z, got {text!r}") from None
    if moment.tzinfo is None:
        raise InputError(f"--freeze-until must carry a time zone (append Z for UTC), got {text!r}")
    return moment


def _audit(arguments, tell: Tell) -> int:
    from planner.commands import show_audit

    if len(arguments.files) > 2:
        raise InputError(f"audit takes a mission file and a contacts file, got {len(arguments.files)} files")
    mission, contacts = [str(DEFAULT_MISSION), *arguments.files][-2:]
    if contacts.endswith(".toml"):
        raise InputError(f"audit takes the mission file first, then the contacts, got {contacts} last")
    return show_audit(_mission(mission), contacts, arguments.json, (_freeze(arguments), arguments.previous), tell)


def _afford(arguments, tell: Tell) -> int:
    from planner.commands import show_affordability

    return show_affordability(
        _mission(arguments.mission), arguments.pass_id, arguments.mode, arguments.contacts, arguments.json, tell
    )


def _compare(arguments, tell: Tell) -> int:
    from planner.hand_over import show_comparison

    return show_comparison(arguments.old, arguments.new)


def _pointing(arguments, tell: Tell) -> int:
    from planner.hand_over import write_pointing

    return write_pointing(_mission_apart(arguments, "pointing.json"), arguments, tell)


def _cards(arguments, tell: Tell) -> int:
    from planner.hand_over import write_cards

    return write_cards(
        _mission_apart(arguments, "cards.json"), Path(arguments.contacts), Path(arguments.out), _freeze(arguments), tell
    )


if __name__ == "__main__":
    sys.exit(main())
