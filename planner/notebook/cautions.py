"""What must be in view whatever else is: this is a planning aid, and how old the elements are."""

from html import escape

import ipywidgets as widgets

from planner.charts import style
from planner.mission.models import Mission
from planner.notebook.pieces import FULL
from planner.schedule.cautions import input_cautions
from planner.schedule.result import CAUTIONS
from planner.units import DAY_S


def caution_box(mission: Mission) -> widgets.HTML:
    """Every caution, in a frame that stays on the page."""
    first, *others = [*CAUTIONS, *_element_ages(mission), *input_cautions(mission)]
    return widgets.HTML(
        f'<div style="border:1px solid {style.ORANGE};border-left-width:10px;box-sizing:border-box;'
        f'padding:3px 12px;line-height:1.35">'
        f"<b>⚠ {escape(first)}</b> {' '.join(escape(text) for text in others)}</div>",
        layout=FULL,
    )


def caution_line(about: str) -> widgets.HTML:
    """The caution that goes with what is done here, named by its first words."""
    text = next(text for text in CAUTIONS if text.startswith(about))
    return widgets.HTML(f'<div style="color:#555;line-height:1.35">⚠ {escape(text)}</div>', layout=FULL)


def _element_ages(mission: Mission) -> list[str]:
    policy = mission.policy
    ages = [
        (satellite.name, (mission.start - satellite.elements.epoch).total_seconds() / DAY_S)
        for satellite in mission.satellites
    ]
    told = [f"{name}: elements {_age(days)} at the start" for name, days in ages[:4]]
    if len(ages) > 4:
        oldest = max(ages, key=lambda pair: pair[1])
        told = [f"{len(ages)} satellites, the oldest elements ({oldest[0]}) {_age(oldest[1])} at the start"]
    renewed = f"the plan counts on new ones every {policy.elements_refresh_days:g} days"
    return [f"{text}; {renewed}." for text in told]


def _age(days: float) -> str:
    return f"{days:.1f} days old" if days >= 0 else f"of an epoch {-days:.1f} days later, not yet known,"
