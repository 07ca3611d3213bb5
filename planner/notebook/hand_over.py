"""Hand-over: the week written into a folder, and a contacts file read back and audited."""

import platform
from datetime import UTC, datetime
from pathlib import Path

import ipywidgets as widgets

import planner
from planner.errors import InputError
from planner.export.folder import INDEX, claim_folder
from planner.export.week import write_week
from planner.notebook.cautions import caution_line
from planner.notebook.desk import WEEK, Desk
from planner.notebook.pieces import button, line_html, lines_html, told_in
from planner.schedule.result import GivenWeek


class HandOver:
    """Writes the shown week, and audits contacts files."""

    def __init__(self, desk: Desk, folder: str = "week_out"):
        self.desk = desk
        self.folder = widgets.Text(folder, description="into folder", continuous_update=False,
                                   layout=widgets.Layout(width="420px"))  # fmt: skip
        self.write = button("write the week", icon="save", button_style="primary")
        self.replace = widgets.Checkbox(False, description="replace what is there", indent=False)
        self.replace.layout.display = "none"
        self.written = widgets.HTML()
        self.written.add_class("hand-over-written")
        self.file = widgets.Text("", placeholder="path of a contacts.csv", description="audit file",
                                 continuous_update=False, layout=widgets.Layout(width="420px"))  # fmt: skip
        self.audit = button("audit it", icon="search")
        self.show = button("show it as the week", disabled=True)
        self.verdict = widgets.HTML()
        self.verdict.add_class("hand-over-audit")
        self._audited: planner.Audit | None = None
        self.folder.observe(lambda change: self._folder_changed(), "value")
        self.write.on_click(lambda _: self.write_week())
        self.audit.on_click(lambda _: self.audit_file())
        self.show.on_click(lambda _: self._show())
        wrapped = {"flex_flow": "row wrap"}
        self.widget = widgets.VBox(
            [
                widgets.HBox([self.folder, self.write, self.replace], layout=wrapped), self.written,
                widgets.HBox([self.file, self.audit, self.show], layout=wrapped), self.verdict,
                caution_line("Planning aid"),
            ]
        )  # fmt: skip
        desk.watch(lambda what: self._week_changed() if what == WEEK else None)

    def _folder_changed(self) -> None:
        self.replace.value, self.replace.layout.display, self.written.value = False, "none", ""

    def _week_changed(self) -> None:
        if self.written.value:
            self.written.value = line_html("the week has changed since it was written")
            self.replace.value = False

    def write_week(self) -> None:
        """Write the shown week; refuses one that breaks a rule, and asks before it replaces another."""
        with told_in(self.written):
            if not self.folder.value.strip():
                raise InputError("into folder: must be the name of a folder, got nothing")
            folder = Path(self.folder.value).expanduser()
            if self.desk.plan is None:
                raise InputError("there is no week to write yet: plan it first")
            if self.desk.faults:
                raise InputError("a week that breaks rules is not handed over", *self.desk.faults)
            if folder.is_dir() and any(folder.iterdir()) and not self.replace.value:
                self.replace.layout.display = None
                what = "a week" if (folder / INDEX).exists() else "files"
                raise InputError(f"{folder.resolve()} holds {what} already: tick “replace what is there” first")
            with claim_folder(folder) as claimed:
                log = {"finished_utc": datetime.now(UTC).isoformat(timespec="seconds"), "machine": platform.platform()}
                write_week(claimed, self.desk.mission, self.desk.week, log)
            names = sorted(path.name for path in folder.iterdir() if not path.name.startswith("."))
            self.written.value = line_html(f"written to {folder.resolve()}: {', '.join(names)}", "good")
            self.file.value = str(folder / "contacts.csv")
            self.replace.value, self.replace.layout.display = False, "none"

    def audit_file(self) -> None:
        """Audit the named contacts file against the mission as it is set now."""
        self._audited, self.show.disabled = None, True
        with told_in(self.verdict):
            if not self.file.value.strip():
                raise InputError("audit file: must be the path of a contacts.csv, got nothing")
            found = planner.audit(self.desk.mission, Path(self.file.value).expanduser())
            count = len(found.flown.sessions)
            if found.safe:
                text = line_html(f"{count} contacts keep every limit", "good")
            else:
                text = line_html(f"UNSAFE: {len(found.faults)} rules broken, {count} contacts", "bad")
                text += lines_html(found.texts(), "bad")
            stale = [f"stale: {figure.text}" for figure in found.stale]
            self.verdict.value = text + lines_html(stale, most=6)
            self._audited, self.show.disabled = found, False

    def _show(self) -> None:
        if self._audited is not None:
            with told_in(self.verdict):
                self.desk.take(GivenWeek(self._audited.flown))
