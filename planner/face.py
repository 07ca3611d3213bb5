"""A door of the Python face that belongs to no room of its own."""

import pandas as pd

from planner.mission.models import Mission
from planner.sky import observe


def find_passes(mission: Mission) -> pd.DataFrame:
    """Every pass of the mission's span: one row a pass, the columns of the `passes` command.

    Raises
    ------
    InputError : SGP4 refuses an element set
    """
    sky = observe(mission)
    return sky.passes.frame(sky.clock)
