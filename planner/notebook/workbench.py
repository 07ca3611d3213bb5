"""The workbench: the week on one screen. Call `open_workbench` in a notebook's cell."""

from datetime import UTC
from pathlib import Path

import ipywidgets as widgets
from IPython.display import display

import planner
from planner.mission.files import DEFAULT_MISSION
from planner.mission.models import Mission
from planner.notebook.cautions import caution_box
from planner.notebook.desk import LOOK, Desk
from planner.notebook.hand_over import HandOver
from planner.notebook.pass_view import PassView
from planner.notebook.pieces import USER_FAULTS, heading, lines_html
from planner.notebook.places import find_file
from planner.notebook.week_view import WeekView
from planner.notebook.what_if import Replan, WhatIf, Wishes


class Workbench:
    """A mission's week to look at, to question and to hand over. `widget` is the page.

    Raises
    ------
    InputError : a mission that cannot be worked with
    """

    def __init__(self, mission: Mission, plan: planner.WeekPlan | None = None, folder: str = "week_out"):
        self.desk = Desk(mission)
        self.desk.plan = plan
        self.week = WeekView(self.desk, self.desk.look_at)
        self.wishes, self.replan, self.what_if = Wishes(self.desk), Replan(self.desk), WhatIf(self.desk)
        self.opened = PassView(self.desk, self._time_zone)
        self.hand_over = HandOver(self.desk, folder)
        wrapped = widgets.Layout(flex_flow="row wrap")
        self.tabs = widgets.Tab(
            [self.opened.widget, self.what_if.widget, self.hand_over.widget],
            titles=("the pass", "what if", "hand-over"),
        )
        self.widget = widgets.VBox(
            [
                caution_box(mission),
                heading(f"{mission.name}: the week"),
                self.week.widget,
                self.opened.header,
                widgets.HBox([self.opened.choices, self.wishes.buttons], layout=wrapped),
                self.wishes.told,
                self.replan.widget,
                self.tabs,
            ]
        )
        self.desk.watch(self._turn_to_the_pass)
        if plan is None:
            self.replan.start()
        else:
            self.replan.refresh()

    def _time_zone(self):
        try:
            return self.week.time_zone
        except planner.InputError:  # told beside the field
            return UTC

    def _turn_to_the_pass(self, what: str) -> None:
        if what == LOOK:
            self.tabs.selected_index = 0

    async def planned(self) -> planner.WeekPlan:
        """Wait for the plan that is being made; the shown week."""
        await self.replan.background.finished()
        return self.desk.week

    def _ipython_display_(self) -> None:
        display(self.widget)


class Refused:
    """In place of a workbench: what is wrong, and nothing else."""

    def __init__(self, faults: list[str]):
        self.faults = faults
        self.widget = widgets.HTML(
            "<b>This mission cannot be worked with yet.</b>" + lines_html(faults, "bad", most=50)
        )

    def _ipython_display_(self) -> None:
        display(self.widget)


def open_workbench(path: str | Path = DEFAULT_MISSION, folder: str = "week_out") -> Workbench | Refused:
    """The workbench of a mission file; the week is planned beside the page. What is wrong is told in its place."""
    try:
        return Workbench(planner.load_mission(find_file(path)), folder=folder)
    except USER_FAULTS as fault:
        return Refused(str(fault).splitlines())
