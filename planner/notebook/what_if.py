"""What if: values of the mission changed, stations and modes switched off, passes kept or dropped, and a re-plan."""

from collections.abc import Callable
from dataclasses import replace

import ipywidgets as widgets

from planner.errors import InputError
from planner.export.compare import HEADINGS, compare_plans
from planner.notebook.background import Background
from planner.notebook.changes import Changes
from planner.notebook.desk import WEEK, Desk
from planner.notebook.pieces import NumberField, button, line_html, lines_html, table_html, told_in

FIELDS = (  # table of the mission file, key, what the field says, unit, step
    ("policy", "soc_floor_pct", "charge never below", "%", 1.0),
    ("policy", "soc_end_pct", "charge at the end", "%", 1.0),
    ("start_state", "soc_pct", "charge at the start", "%", 1.0),
    ("policy", "link_margin_db", "required margin", "dB", 0.5),
    ("policy", "availability_pct", "availability", "%", 0.1),
)
ROWS_SHOWN = 40


class WhatIf:
    """The fields beside the wishes, the re-plan and its outcome."""

    def __init__(self, desk: Desk):
        self.desk = desk
        self.message = widgets.HTML()
        self.fields = {key: self._field(*entry) for entry in FIELDS for key in [entry[1]]}
        self.stations = self._switches([station.name for station in desk.asked.stations], "stations_off")
        modes = [t.mode for satellite in desk.asked.satellites for t in satellite.spacecraft.transmitter]
        self.modes = self._switches(list(dict.fromkeys(modes)), "modes_off")
        self.reset = button("as in the file", "undo every change made here")
        self.reset.on_click(lambda _: self._as_in_the_file())
        numbers = widgets.VBox([field.widget for field in self.fields.values()])
        stations = widgets.VBox([widgets.HTML("<b>stations in use</b>"), *self.stations], layout=_column())
        modes = widgets.VBox([widgets.HTML("<b>modes in use</b>"), *self.modes, self.reset], layout=_column())
        columns = widgets.HBox([numbers, stations, modes], layout={"flex_flow": "row wrap"})
        self.widget = widgets.VBox([columns, self.message])

    def _field(self, table: str, key: str, label: str, unit: str, step: float) -> NumberField:
        def take(value: float) -> None:
            self.desk.alter(self.desk.changes.with_value(table, key, value))

        return NumberField(label, unit, self._asked(table, key), take, step)

    def _asked(self, table: str, key: str) -> float:
        source = self.desk.asked.policy if table == "policy" else self.desk.asked.satellites[0].start_state
        return float(getattr(source, key))

    def _switches(self, names: list[str], what: str) -> list[widgets.Checkbox]:
        boxes = [widgets.Checkbox(True, description=name, indent=False, layout={"width": "auto"}) for name in names]
        for box in boxes:
            box.observe(lambda change: self._switched(what, names, boxes, change), "value")
        return boxes

    def _switched(self, what: str, names: list[str], boxes, change) -> None:
        off = frozenset(name for name, box in zip(names, boxes, strict=True) if not box.value)
        changes = self.desk.changes
        altered = replace(changes, stations_off=off) if what == "stations_off" else replace(changes, modes_off=off)
        if altered == changes:
            return
        self.message.value = ""
        try:
            self.desk.alter(altered)
        except InputError as fault:
            self.message.value = lines_html(fault.faults, "bad")
            change["owner"].value = True

    def _as_in_the_file(self) -> None:
        self.message.value = ""
        with told_in(self.message):
            self.desk.alter(Changes())
            self.desk.leave_open()
            for table, key, *_ in FIELDS:
                self.fields[key].put(self._asked(table, key))
            for box in (*self.stations, *self.modes):
                box.value = True


def _column() -> widgets.Layout:
    return widgets.Layout(margin="0 0 0 40px", max_height="420px", overflow="auto")


class Wishes:
    """Keep, drop or leave open the pass that is looked at; and what has been wished so far."""

    def __init__(self, desk: Desk):
        self.desk = desk
        self.keep = button("keep this pass", "this mode must be flown on it", icon="check")
        self.drop = button("drop this pass", "nothing is sent on it", icon="times")
        self.open = button("leave it open", "the plan may decide")
        self.told = widgets.HTML()
        self.keep.on_click(lambda _: self._wish(lambda pass_id: desk.keep_pass(pass_id, desk.mode)))
        self.drop.on_click(lambda _: self._wish(desk.drop_pass))
        self.open.on_click(lambda _: self._wish(desk.leave_open))
        self.buttons = widgets.HBox([self.keep, self.drop, self.open])
        desk.watch(lambda what: self.refresh())
        self.refresh()

    def _wish(self, act: Callable[[str], None]) -> None:
        if self.desk.pass_id is not None:
            with told_in(self.told):
                act(self.desk.pass_id)

    def refresh(self) -> None:
        """Say what is wished, and let only that be pressed which makes sense."""
        desk, known = self.desk, self.desk.opened is not None
        kept = (desk.pass_id, desk.mode) in desk.keep
        dropped = desk.pass_id in desk.drop
        self.keep.disabled, self.drop.disabled = not known or kept, not known or dropped
        self.open.disabled = not (dropped or any(pass_id == desk.pass_id for pass_id, _ in desk.keep))
        told = {"kept": [f"{pass_id} in {mode}" for pass_id, mode in sorted(desk.keep)], "dropped": sorted(desk.drop)}
        self.told.value = lines_html(f"{what}: {', '.join(names)}" for what, names in told.items() if names)


class Replan:
    """Plan the whole week anew beside the page, and show what that changed."""

    def __init__(self, desk: Desk):
        self.desk = desk
        self.button = button("plan the week anew", button_style="primary", icon="refresh")
        self.cancel = button("cancel", icon="stop", disabled=True)
        self.status, self.difference = widgets.HTML(), widgets.HTML()
        self.status.add_class("replan-status")
        self.difference.add_class("week-difference")
        self.background = Background(self._running)
        self.button.on_click(lambda _: self.start())
        self.cancel.on_click(lambda _: self._cancelled())
        row = widgets.HBox([self.button, self.cancel, self.status], layout={"flex_flow": "row wrap"})
        self.widget = widgets.VBox([row, self.difference])
        desk.watch(lambda what: self.refresh() if what == WEEK else None)

    def start(self) -> None:
        """Begin a re-plan."""
        self.button.disabled, self.cancel.disabled = True, False
        self.background.start(self.desk.replan, self._done, self._failed)

    def _cancelled(self) -> None:
        self.cancel.disabled = True
        self.background.cancel()

    def _running(self, stage: str, seconds: float) -> None:
        self.status.value = line_html(f"planning for {seconds:.0f} s: {stage or 'beginning'} …")

    def _done(self, plan) -> None:
        self.button.disabled, self.cancel.disabled = False, True
        with told_in(self.status):
            self.desk.take(plan)
            summary = plan.summary
            most = f"nothing better than {summary['upper_bound_mbit']:.0f} Mbit exists (gap {summary['gap_pct']:.2f} %)"
            self.status.value = line_html(f"planned: {summary['volume_mbit']:.0f} Mbit; {most}", "good")

    def _failed(self, fault: BaseException) -> None:
        self.button.disabled, self.cancel.disabled = False, True
        if isinstance(fault, KeyboardInterrupt):
            self.status.value = line_html("cancelled; the week shown is the one before")
            return
        what = "no week" if self.desk.plan is None else "no week; the one before is still shown"
        self.status.value = line_html(what, "bad") + lines_html(str(fault).splitlines(), "bad")

    def refresh(self) -> None:
        """Show how the week differs from the plan before it, and which rules it breaks."""
        desk, before = self.desk, self.desk.compared_with
        if desk.plan is not None and not desk.is_planned and not self.background.is_running:
            self.status.value = line_html("changed by hand and simulated; not optimised anew")
        text = "" if before is None else difference_html(before, desk.sketch)
        if desk.faults:
            broken = f"{len(desk.faults)} rules are broken:" if len(desk.faults) > 1 else "A rule is broken:"
            text += line_html(broken) + lines_html(desk.faults, "bad", most=4)
        elif desk.plan is not None and not desk.is_planned:
            text += line_html("every limit and every rule holds", "good")
        self.difference.value = text


def difference_html(before, after) -> str:
    """What changed from one week to another: the sum, and each contact when it is asked for."""
    found = compare_plans(before, after)
    head = line_html(f"Against the plan before: {found.headline()}")
    if found.is_same:
        return head
    table = table_html(HEADINGS, found.rows()[:ROWS_SHOWN], right=[5])
    more = len(found.rows()) - ROWS_SHOWN
    rest = line_html(f"… and {more} more") if more > 0 else ""
    return f"{head}<details><summary>contact by contact</summary>{table}{rest}</details>"
