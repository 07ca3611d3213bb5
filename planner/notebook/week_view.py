"""The week on one picture that takes clicks: lanes of passes, charge, data."""

from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo, available_timezones

import ipywidgets as widgets
from ipympl.backend_nbagg import Canvas, FigureManager
from matplotlib.figure import Figure
from traitlets import Bool

from planner.charts.week import draw_plan, pass_at, week_page
from planner.errors import InputError
from planner.notebook.desk import Desk
from planner.notebook.pieces import figures_html, line_html

WIDTHS = {"narrow page": 620, "middle page": 840, "wide page": 1000, "widest page": 1280}
DPI, LANE_PX, REST_PX = 100, 34, 430  # of the picture's height: each lane, and all but the lanes
MOST_LANES_PX = 700
WHOLE = "whole span"
MOST_BUTTONS = 8  # days, up to which each has a button of its own


class OrderlyCanvas(Canvas):
    """A bare canvas that draws and hears clicks only while nobody changes the figure."""

    header_visible = Bool(False).tag(sync=True)
    footer_visible = Bool(False).tag(sync=True)
    toolbar_visible = Bool(False).tag(sync=True)
    resizable = Bool(False).tag(sync=True)

    def __init__(self, figure: Figure, lock):
        self._lock = lock
        super().__init__(figure)

    def _handle_message(self, widget, content, buffers) -> None:
        with self._lock:
            super()._handle_message(widget, content, buffers)
        if content["type"] == "initialized":
            self.send_state("resizable")  # the page takes every live canvas for resizable until it is told


class WeekPicture:
    """A canvas on which a plan is redrawn without drawing the page below it again."""

    def __init__(self, clicked: Callable[[str], None], lock):
        self._clicked = clicked
        self._artists: list = []
        self._page = None
        self.canvas = OrderlyCanvas(Figure(dpi=DPI), lock)
        FigureManager(self.canvas, 0)
        self.canvas.mpl_connect("draw_event", self._page_drawn)
        self.canvas.mpl_connect("button_press_event", self._pressed)
        self.widget = widgets.Box([self.canvas], layout=widgets.Layout(overflow="auto"))

    def turn_page(self, desk: Desk, satellite: str, window, time_zone, width_px: int) -> None:
        """Draw page and plan anew: another width, window, time zone or set of stations."""
        stations = len(desk.mission.stations)
        size_in = (width_px / DPI, (min(LANE_PX * stations, MOST_LANES_PX) + REST_PX) / DPI)
        self._page, self._artists = None, []
        week_page(
            desk.mission, desk.sketch, satellite=satellite, window=window, time_zone=time_zone, size_in=size_in,
            onto=self.canvas.figure,
        )  # fmt: skip
        self._draw(desk, satellite)
        self.canvas.draw_idle()

    def redraw(self, desk: Desk, satellite: str) -> None:
        """Draw the desk's week over the page that is there."""
        self._draw(desk, satellite)
        if self._page is None:
            self.canvas.draw_idle()
            return
        self.canvas.restore_region(self._page)
        self._draw_artists()
        self.canvas.blit(self.canvas.figure.bbox)

    def _draw(self, desk: Desk, satellite: str) -> None:
        self._desk = desk
        self._artists = draw_plan(
            self.canvas.figure, desk.mission, desk.sketch, satellite=satellite, selected=desk.pass_id,
            replacing=self._artists,
        )  # fmt: skip
        for artist in self._artists:
            artist.set_animated(True)

    def _page_drawn(self, event) -> None:
        """The page stands alone on the canvas: remember it, then draw the plan over it."""
        self._page = self.canvas.copy_from_bbox(self.canvas.figure.bbox)
        self._draw_artists()

    def _draw_artists(self) -> None:
        renderer = self.canvas.get_renderer()
        for artist in self._artists:
            artist.draw(renderer)

    def _pressed(self, event) -> None:
        lanes = self.canvas.figure.axes[0]
        if event.inaxes is not lanes or event.button != 1:
            return
        begin, end = lanes.get_xlim()
        pass_id = pass_at(self._desk.mission, self._desk.sketch, event.xdata, event.ydata, end - begin)
        if pass_id is not None:
            self._clicked(pass_id)


class WeekView:
    """The picture with its choices: day, time zone, satellite, width."""

    def __init__(self, desk: Desk, clicked: Callable[[str], None]):
        self.desk = desk
        self.picture = WeekPicture(clicked, desk.lock)
        self.figures = widgets.HTML()
        self.figures.add_class("week-figures")
        self.day = _day_choice(desk)
        self.zone = widgets.Combobox(
            value="UTC", options=sorted(available_timezones()), description="time", continuous_update=False,
            layout=widgets.Layout(width="230px"), style={"description_width": "40px"},
        )  # fmt: skip
        names = [satellite.name for satellite in desk.asked.satellites]
        self.satellite = widgets.Dropdown(options=names, description="charge of")
        self.satellite.layout.display = None if len(names) > 1 else "none"
        self.width = widgets.Dropdown(options=WIDTHS, value=840, layout=widgets.Layout(width="130px"))
        self.message = widgets.HTML()
        for choice in (self.day, self.zone, self.satellite, self.width):
            choice.observe(lambda change: self.turn_page(), "value")
        choices = widgets.HBox([self.day, self.zone, self.satellite, self.width], layout={"flex_flow": "row wrap"})
        self.widget = widgets.VBox([self.figures, choices, self.message, self.picture.widget])
        self._page_of = None
        desk.watch(lambda what: self.redraw())
        self.turn_page()

    @property
    def time_zone(self):
        """The chosen zone; InputError for a name that is none."""
        name = self.zone.value or "UTC"
        if name != "UTC" and name not in available_timezones():
            raise InputError(f"time zone must be a name of the IANA list, such as Europe/Oslo, got {name!r}")
        return UTC if name == "UTC" else ZoneInfo(name)

    def turn_page(self) -> None:
        """Draw everything anew."""
        try:
            zone = self.time_zone
            self.message.value = ""
        except InputError as fault:
            zone = UTC
            self.message.value = line_html(f"{fault}; shown in UTC", "bad")
        with self.desk.lock:
            self._page_of = self._page_key()
            self.picture.turn_page(self.desk, self.satellite.value, self.day.value, zone, self.width.value)
            self._tell_figures()

    def redraw(self) -> None:
        """Draw the desk's week, over the page where that is still the right one."""
        if self._page_key() == self._page_of:
            self.picture.redraw(self.desk, self.satellite.value)
            self._tell_figures()
        else:
            self.turn_page()

    def _page_key(self):
        return [station.name for station in self.desk.mission.stations], self.desk.mission.start

    def _tell_figures(self) -> None:
        summary, policy = self.desk.sketch.summary, self.desk.mission.policy
        contacts, passes = len(self.desk.sketch.contacts), len(self.desk.week.passes)
        self.figures.value = figures_html(
            [
                ("lowest charge", f"{summary['soc_min_pct']:.1f} %", f"{policy.floor_words}, pessimistic"),
                ("charge at the end", f"{summary['soc_end_pct']:.1f} %", f"at least {policy.soc_end_pct:g} % asked"),
                ("contacts", f"{contacts}", f"on {passes} passes"),
                (
                    "user data",
                    f"{summary['volume_mbit'] / 1000:.1f} Gbit",
                    f"at {policy.availability_pct:g} % availability",
                ),
            ]
        )


def _day_choice(desk: Desk):
    """The whole span, or one of its UTC days."""
    mission = desk.asked
    options: list[tuple[str, tuple[datetime, datetime] | None]] = [(WHOLE, None)]
    begin = mission.start
    while begin < mission.end:
        midnight = begin.astimezone(UTC).replace(hour=0, minute=0, second=0, microsecond=0) + timedelta(days=1)
        end = min(midnight, mission.end)
        options.append((f"{begin.astimezone(UTC):%a %d}", (begin, end)))
        begin = end
    if len(options) - 1 > MOST_BUTTONS:
        return widgets.Dropdown(options=options, description="in view")
    return widgets.ToggleButtons(options=options, style={"button_width": "auto"})
