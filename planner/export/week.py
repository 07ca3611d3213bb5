"""What `week` leaves in its folder: tables, calendars and the picture, all from one plan."""

from collections.abc import Sequence
from pathlib import Path

from planner.charts.week import week_figure
from planner.export.calendar import calendar_files
from planner.export.contacts import battery_csv, contacts_csv, passes_csv, recorder_csv, table_csv
from planner.export.folder import ClaimedFolder, verify_set
from planner.export.render import png_bytes
from planner.mission.models import Mission

CALENDAR = "week.ics"


def write_week(folder: ClaimedFolder, mission: Mission, plan, run_log: dict, *, before: Path | None = None) -> None:
    """Replace the week in a claimed folder by this plan; the calendars cancel what only the issue before had.

    Parameters
    ----------
    folder : from `claim_folder`
    plan : has `.contacts`, `.passes`, `.battery`, `.recorder` (DataFrames) and `.summary` (dict)
    run_log : timings and machine, the only file that may differ between two runs
    before : folder of the issue before; where the claimed one holds an issue too, the later of each event counts

    Raises
    ------
    MachineError : the machine does not let us write; the week before is in place
    """
    folders = {folder.path, folder.path if before is None else before}
    issued = [calendar for one in sorted(folders) if (calendar := issued_calendar(one)) is not None]
    folder.write(week_files(mission, plan, issued), plan.summary, run_log=run_log)


def week_files(mission: Mission, plan, issued: Sequence[bytes] = ()) -> dict[str, bytes]:
    """Every file of the week but its index, by name."""
    prices = getattr(plan, "prices", None)
    return {
        "contacts.csv": contacts_csv(plan.contacts),
        "passes.csv": passes_csv(plan.passes),
        "battery.csv": battery_csv(plan.battery),
        "recorder.csv": recorder_csv(plan.recorder),
        **calendar_files(mission, plan.contacts, issued),
        **({} if prices is None else {"prices.csv": table_csv(prices)}),
        "week.png": png_bytes(week_figure(mission, plan)),
    }


def issued_calendar(folder: Path) -> bytes | None:
    """The calendar of the week that the folder holds, if it holds a whole one."""
    calendar = folder / CALENDAR
    return calendar.read_bytes() if not verify_set(folder) and calendar.is_file() else None
