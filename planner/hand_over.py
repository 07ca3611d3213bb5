"""The commands that make files for stations and operators from contacts, and the one that compares two issues."""

from collections.abc import Iterable, Iterator, Mapping
from datetime import datetime
from pathlib import Path
from typing import TYPE_CHECKING

from planner import printing
from planner.errors import InputError
from planner.mission.models import Mission
from planner.mission.table import read_table
from planner.printing import Tell

if TYPE_CHECKING:
    from planner.mission.contacts import Session
    from planner.schedule.flown import Flown
    from planner.schedule.trial import TrialWeek

DONE, NO = 0, 1
MOST_TOLD = 20


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
    """Pointing tables for the contacts of a file; those whose elements are too old get none and are told."""
    from planner.export.contacts import file_issue
    from planner.export.folder import claim_folder
    from planner.export.pointing import pointing_tables, too_old
    from planner.schedule.result import prepared
    from planner.schedule.wishes import sessions_of

    contacts = Path(arguments.contacts)
    sessions = sessions_of(contacts, mission)
    with claim_folder(arguments.out) as folder:
        printing.fault(folder.mended)
        tell("passes, links and power")
        sky = prepared(mission).sky
        refused = {} if arguments.force else too_old(mission, sky, sessions)
        if refused and len(refused) == len(sessions):
            raise InputError(*list(refused.values())[:MOST_TOLD], "no table is written; those there stay")
        tables = pointing_tables(
            mission,
            sky,
            [session for session in sessions if session not in refused],
            step_s=arguments.step,
            refracted=arguments.refracted,
            force=arguments.force,
            issue=file_issue(contacts.read_bytes()),
        )
        files = dict(_counted(tables, tell, "pointing table", len(sessions) - len(refused)))
        folder.write(files, {"mission": mission.name, "tables": len(files)}, index="pointing.json")
    printing.fault(refused.values())
    printing.say(f"{len(files)} pointing tables written to {arguments.out}")
    _say_cautions(mission)
    if refused:
        printing.say(f"no table for {len(refused)} contacts: take newer elements, or --force")
    return NO if refused else DONE


def write_cards(mission: Mission, contacts: Path, out: Path, freeze_until: datetime | None, tell: Tell) -> int:
    """A card for every contact of a file, and the week sheet; contacts before the freeze are not judged."""
    from planner.export.cards import card_files, outdated_contacts
    from planner.export.contacts import file_issue
    from planner.export.folder import claim_folder
    from planner.export.sheet import sheet_files
    from planner.schedule.audit import audit

    with claim_folder(out) as folder:
        printing.fault(folder.mended)
        tell("checking the contacts")
        verdict = audit(mission, contacts, freeze_until=freeze_until)
        if not verdict.safe:
            raise InputError(f"{contacts}: cards are made only of contacts that keep every limit", *verdict.texts())
        given = week_shown(verdict.flown, contacts, freeze_until, verdict.commanded)
        count = len(given.contacts)
        issue = file_issue(contacts.read_bytes())
        sky = verdict.flown.week.sky
        cards = card_files(mission, sky, given.contacts, issue)
        files = dict(_counted(cards, tell, "file of cards", 2 * count))
        tell("the week sheet")
        files |= sheet_files(mission, given, issue, outdated_contacts(mission, sky, given.contacts))
        folder.write(files, {"mission": mission.name, "cards": count}, index="cards.json")
    printing.say(f"{count} cards and the week sheet written to {out}")
    _say_cautions(mission)
    say_boxes(mission)
    return DONE


def week_shown(
    flown: "Flown",
    contacts: Path,
    freeze_until: datetime | None = None,
    commanded: Mapping["Session", str] | None = None,
) -> "TrialWeek":
    """The week of a contacts file; its passes tell those that no mode can use and those dropped, as `week` tells them.

    Dropped are the passes of the mission's own list, and those of the passes.csv beside the contacts; `commanded` are
    the MODCOD commands of contacts that are aboard.
    """
    import pandas as pd

    from planner.schedule.candidates import find_candidates
    from planner.schedule.trial import TrialWeek
    from planner.schedule.wishes import Wishes, freeze_s, read_wishes

    week = flown.week
    dropped = read_wishes(week, (), (), None, None).drop | _dropped_beside(contacts)
    wishes = Wishes(drop=dropped, freeze_until_s=freeze_s(week.mission, freeze_until))
    found, refused = find_candidates(week, wishes)
    why = {week.sky.passes.pass_id[one.row]: (one.verdict, one.reason) for one in refused}
    for candidate in found:
        why.pop(candidate.pass_id, None)
    rows = [(pass_id, *verdict) for pass_id, verdict in why.items()]
    told = pd.DataFrame(rows, columns=["pass_id", "verdict", "reason"])
    return TrialWeek(flown, told, dropped, commanded=commanded or {})


def _dropped_beside(contacts: Path) -> frozenset[str]:
    """The passes dropped in the passes.csv of the same folder; none where there is no such table."""
    try:
        rows = read_table(contacts.parent / "passes.csv", ("pass_id", "verdict"))
    except InputError:
        return frozenset()
    return frozenset(row["pass_id"] for _, row in rows if row["verdict"] == "dropped")


def _say_cautions(mission: Mission) -> None:
    from planner.schedule.cautions import input_cautions

    for caution in input_cautions(mission):
        printing.say(f"caution: {caution}")


def say_boxes(mission: Mission) -> None:
    """Names that the one font which ships with the tool cannot draw whole."""
    from planner.charts.style import boxed

    modes = [mode.mode for satellite in mission.satellites for mode in satellite.spacecraft.transmitter]
    satellites, stations = ([thing.name for thing in things] for things in (mission.satellites, mission.stations))
    if missing := boxed([mission.name, *satellites, *stations, *modes]):
        names = ", ".join(missing)
        printing.say(f"caution: PDF and pictures show boxes for letters of {names}; HTML, CSV and calendars have them")


def _counted(files: Iterable[tuple[str, bytes]], tell: Tell, what: str, count: int) -> Iterator[tuple[str, bytes]]:
    """The files, each told before it is made."""
    tell(f"{what} 1 of {count}")
    for number, file in enumerate(files, 2):
        yield file
        tell(f"{what} {min(number, count)} of {count}")
