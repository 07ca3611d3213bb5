"""Small pieces of a page: escaped text, tables, messages, fields that refuse."""

from collections.abc import Callable, Iterable, Sequence
from contextlib import contextmanager
from html import escape

import ipywidgets as widgets

from planner.charts import style
from planner.errors import InputError, MachineError, NoWeekError

USER_FAULTS = (InputError, NoWeekError, MachineError)
FULL = widgets.Layout(width="auto")
MARKS = {"good": ("✔", style.GREEN), "bad": ("✘", style.VERMILLION), "note": ("", style.INK)}


def button(text: str, tooltip: str = "", **options) -> widgets.Button:
    """A button as wide as its words."""
    layout = widgets.Layout(width="auto", padding="0 12px")
    return widgets.Button(description=text, tooltip=tooltip or text, layout=layout, **options)


def heading(text: str) -> widgets.HTML:
    """A section's title."""
    return widgets.HTML(
        f'<div style="font-weight:bold;font-size:1.1em;margin-top:12px;padding-top:6px;'
        f'border-top:1px solid {style.PALE}">{escape(text)}</div>',
        layout=FULL,
    )


def line_html(text: str, kind: str = "note") -> str:
    """One line; good and bad ones carry a mark beside their colour."""
    mark, colour = MARKS[kind]
    before = f'<span style="color:{colour};font-weight:bold">{mark}</span> ' if mark else ""
    return f'<div style="line-height:1.45">{before}{escape(text)}</div>'


def lines_html(lines: Iterable[str], kind: str = "note", most: int = 12) -> str:
    """Several lines; those beyond `most` are counted only."""
    lines = list(lines)
    more = [f"… and {len(lines) - most} more"] if len(lines) > most else []
    return "".join(line_html(line, kind) for line in lines[:most]) + "".join(line_html(line) for line in more)


def table_html(headings: Sequence[str], rows: Iterable[Sequence[str]], right: Iterable[int] = ()) -> str:
    """A table of texts; the columns `right` hold figures and are set flush right."""
    right = set(right)

    def cells(tag: str, row: Sequence[str]) -> str:
        made = []
        for column, text in enumerate(row):
            side = "right" if column in right else "left"
            made.append(f'<{tag} style="text-align:{side};padding:1px 14px 1px 0">{escape(str(text))}</{tag}>')
        return "<tr>" + "".join(made) + "</tr>"

    head = cells("th", headings) if any(headings) else ""
    body = "".join(cells("td", row) for row in rows)
    return f'<table style="border-collapse:collapse;line-height:1.35">{head}{body}</table>'


def figures_html(figures: Iterable[tuple[str, str, str]]) -> str:
    """(name, value, remark) side by side, the value large."""
    boxes = "".join(
        f'<div style="margin-right:34px"><div style="color:#555">{escape(name)}</div>'
        f'<div style="font-size:1.5em;font-weight:bold;line-height:1.25">{escape(value)}</div>'
        f'<div style="color:#555">{escape(remark)}</div></div>'
        for name, value, remark in figures
    )
    return f'<div style="display:flex;flex-wrap:wrap;line-height:1.3">{boxes}</div>'


@contextmanager
def told_in(message: widgets.HTML):
    """Whatever the user can mend is told in `message`; anything else too, by its name, instead of a traceback."""
    try:
        yield
    except USER_FAULTS as fault:
        message.value = lines_html(str(fault).splitlines(), "bad")
    except Exception as fault:
        message.value = line_html(f"unexpected {type(fault).__name__}: {fault}", "bad")


class NumberField:
    """A number with a unit. A value that breaks a rule is refused under the field, and the one before stays in force.

    Parameters
    ----------
    take : given the new number; raises InputError with the rule
    """

    def __init__(self, label: str, unit: str, value: float, take: Callable[[float], None], step: float = 1.0):
        self._take, self._holds, self._unit = take, value, unit
        self.box = widgets.FloatText(
            value=value,
            step=step,
            description=label,
            style={"description_width": "150px"},
            layout=widgets.Layout(width="250px"),
        )
        self.message = widgets.HTML(layout=widgets.Layout(max_width="330px"))
        self.widget = widgets.VBox([widgets.HBox([self.box, widgets.Label(unit)]), self.message])
        self.box.observe(self._changed, "value")

    def _changed(self, change) -> None:
        if change["new"] == self._holds:
            self.message.value = ""
            return
        self.message.value = ""
        try:
            self._take(change["new"])
            self._holds = change["new"]
        except InputError as fault:
            still = f"{self._holds:g} {self._unit} stays in force"
            self.message.value = lines_html([*fault.faults, still], "bad")

    def put(self, value: float) -> None:
        """Show a value that is in force already."""
        self._holds = value
        self.box.value = value
        self.message.value = ""
