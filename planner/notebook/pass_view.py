"""One pass opened: its link, its track over the sky, its budget line by line, and whether the battery can pay."""

from html import escape

import ipywidgets as widgets

import planner
from planner.charts.contact import contact_figure
from planner.charts.skytrack import skytrack_figure
from planner.errors import InputError
from planner.export.render import png_bytes
from planner.notebook.background import Background
from planner.notebook.cautions import caution_line
from planner.notebook.desk import Desk
from planner.notebook.pieces import button, line_html, lines_html, table_html, told_in

DPI = 110
TITLES = ("link over the pass", "track over the sky", "budget line by line", "can the battery pay?")


class PassView:
    """Shows the pass that the desk looks at. `time_zone` is asked for the zone of the charts."""

    def __init__(self, desk: Desk, time_zone):
        self.desk, self._time_zone = desk, time_zone
        self.header, self.message = widgets.HTML(), widgets.HTML()
        self.mode = widgets.Dropdown(options=desk.modes, description="mode", layout=widgets.Layout(width="240px"))
        self.mode.observe(self._mode_chosen, "value")
        self.earlier = button("◀ pass before")
        self.later = button("next pass ▶")
        self.earlier.on_click(lambda _: self._step(-1))
        self.later.on_click(lambda _: self._step(+1))
        self.link = widgets.Image(format="png", layout=_hidden("940px"))
        self.sky = widgets.Image(format="png", layout=_hidden("560px"))
        self.budget, self.energy = widgets.HTML(), widgets.HTML()
        self.energy.add_class("pass-energy")
        pages = (self.link, "Power flux"), (self.sky, "Antennas"), (self.budget, "Power flux"), (self.energy, "Lithium")
        self.tabs = widgets.Tab([widgets.VBox([page, caution_line(about)]) for page, about in pages], titles=TITLES)
        self.tabs.observe(lambda change: self._fill(), "selected_index")
        self._asking = Background(self._asking_told)
        self._shown: dict[int, object] = {}
        self.place = widgets.VBox([self.tabs])
        self.choices = widgets.HBox([self.earlier, self.later, self.mode])
        self.widget = widgets.VBox([self.message, self.place])
        desk.watch(lambda what: self.refresh())
        self.refresh()

    def refresh(self) -> None:
        """Show the pass as it stands now."""
        desk = self.desk
        self._shown.clear()
        opened = desk.opened
        self.place.layout.display = "none" if opened is None else None
        self.message.value = line_html("No pass is open.") if opened is None else ""
        self.mode.unobserve(self._mode_chosen, "value")  # new options choose the first of them by themselves
        self.mode.options, self.mode.value = desk.modes, desk.mode
        self.mode.observe(self._mode_chosen, "value")
        self.header.value = line_html(self._nothing_open()) if opened is None else self._header_html(*opened)
        self._fill()

    def _nothing_open(self) -> str:
        passes = self.desk.prepared.sky.passes
        if not len(passes):
            return "There is no pass in the span, so there is none to open."
        if self.desk.pass_id is None:
            return "No pass is open: click one in a lane above, or step through them here."
        return f"Pass {self.desk.pass_id} is not in the week as it is now set: its station is off."

    def _header_html(self, pass_id: str, row: int) -> str:
        about = self.desk.week.passes.set_index("pass_id").loc[pass_id]
        zone = self._time_zone()
        local = [about[f"{event}_utc"][11:19] for event in ("aos", "tca", "los")]
        verdict, reason = str(about.verdict), str(about.reason)
        text = (
            f"AOS {local[0]}Z at {about.aos_azimuth_deg:.0f}° azimuth,"
            f" TCA {local[1]}Z at {about.max_elevation_deg:.1f}° elevation and {about.tca_range_km:.0f} km,"
            f" LOS {local[2]}Z at {about.los_azimuth_deg:.0f}°;"
            f" {about.duration_s:.0f} s, {100 * about.sunlit_fraction:.0f} % sunlit"
        )
        sky = self.desk.prepared.sky
        tca = sky.clock.datetime(sky.passes.tca_s[row])
        beside = "" if zone is None or str(zone) == "UTC" else f" ({tca.astimezone(zone):%a %d %b %H:%M} in {zone})"
        return (
            f"<b>{escape(f'{about.satellite} over {about.station}, {about.aos_utc[:10]}')}</b>{escape(beside)} "
            f"<code>{escape(pass_id)}</code>" + line_html(text)
            + line_html(reason if reason.startswith(verdict) else f"{verdict}: {reason}")
        )  # fmt: skip

    def _mode_chosen(self, change) -> None:
        if change["new"] is not None and change["new"] != self.desk.mode:
            self.desk.look_at(self.desk.pass_id, change["new"])

    def _step(self, by: int) -> None:
        order = self.desk.prepared.sky.passes.pass_id
        if not len(order):
            return
        opened = self.desk.opened
        self.desk.look_at(str(order[0 if opened is None else (opened[1] + by) % len(order)]))

    def _fill(self) -> None:
        """Draw the open tab, once for each pass, mode and week."""
        tab, opened = self.tabs.selected_index, self.desk.opened
        if tab is None or tab in self._shown or opened is None:
            return
        self._shown[tab] = True
        with self.desk.lock, told_in(self.message):
            (self._fill_link, self._fill_sky, self._fill_budget, self._ask_energy)[tab](*opened)

    def _fill_link(self, pass_id: str, row: int) -> None:
        desk, session = self.desk, self.desk.session()
        table, _ = desk.prepared.place_of[row, desk.mode]
        coding = None if session is None else desk.week.flown.coding.get(session)
        option = next((o for o in table.options if coding is not None and o.label == coding.label), None)
        figure = contact_figure(
            desk.mission, desk.prepared.sky, table, pass_id, option=option, session=session,
            time_zone=self._time_zone(),
        )  # fmt: skip
        _show(self.link, figure)

    def _fill_sky(self, pass_id: str, row: int) -> None:
        desk = self.desk
        figure = skytrack_figure(
            desk.mission, desk.prepared.sky, pass_id, session=desk.session(), time_zone=self._time_zone()
        )
        _show(self.sky, figure)

    def _fill_budget(self, pass_id: str, row: int) -> None:
        desk, passes = self.desk, self.desk.prepared.sky.passes
        try:
            budget = planner.link_budget(
                desk.mission, str(passes.station[row]), desk.mode, pass_id=pass_id,
                satellite=str(passes.satellite[row]), sky=desk.prepared.sky,
            )  # fmt: skip
        except InputError as fault:
            self.budget.value = lines_html(fault.faults, "bad")
            return
        rows = [
            (line.item, "" if line.value is None else f"{line.value:.2f}", line.unit, line.source)
            for line in budget.lines
        ]
        self.budget.value = table_html(("item", "value", "unit", "where it comes from"), rows, right=[1]) + lines_html(
            budget.notes
        )

    def _ask_energy(self, pass_id: str, row: int) -> None:
        mission, mode, contacts = self.desk.mission, self.desk.mode, list(self.desk.week.flown.sessions)
        self._asking.start(
            lambda progress, cancelled: planner.afford(mission, pass_id, mode, contacts, progress=progress),
            lambda answer: setattr(self.energy, "value", answer_html(answer)),
            lambda fault: setattr(self.energy, "value", lines_html(str(fault).splitlines(), "bad")),
        )

    def _asking_told(self, stage: str, seconds: float) -> None:
        self.energy.value = line_html(f"asking the battery … {seconds:.0f} s")


def _hidden(width: str) -> widgets.Layout:
    """Of a picture that is not drawn yet."""
    return widgets.Layout(max_width="100%", width=width, display="none")


def _show(image: widgets.Image, figure) -> None:
    image.value, image.layout.display = png_bytes(figure, dpi=DPI), None


def answer_html(answer) -> str:
    """A `planner.Affordability` as a page."""
    verdict = "Yes, affordable" if answer.affordable else "No, not affordable"
    head = line_html(f"{verdict}: {answer.reason}", "good" if answer.affordable else "bad")
    return head + (table_html(("", ""), _answer_rows(answer)) if answer.duration_s is not None else "")


def _answer_rows(answer):
    yield "asked about", f"{answer.mode}, {answer.tx_on_utc} to {answer.tx_off_utc}, {answer.duration_s:.0f} s"
    yield "brings", f"{answer.volume_mbit:.0f} Mbit"
    yield "costs", f"{answer.energy_wh:.2f} Wh at the battery"
    yield "charge before", f"{answer.soc_before_pct:.1f} %"
    yield "lowest charge from then on", f"{answer.soc_lowest_pct:.1f} % at {answer.soc_lowest_utc}"
    yield "charge after", f"{answer.soc_after_pct:.1f} %"
    yield "lowest cell voltage", f"{answer.lowest_cell_v:.3f} V"
    yield "charge is back", answer.recovered_utc or "not within the span"
    longest = f"{answer.longest_s:.0f} s, best from {answer.longest_tx_on_utc}" if answer.longest_s else "none"
    yield "longest affordable transmission", longest
    if answer.only_by_rules:
        yield "the battery alone", "could pay for the whole window"
    elif answer.binding_limit:
        yield "binding limit", answer.binding
        yield "would have to give way", ", ".join(answer.give_way) or "none would do"
    for conflict in answer.conflicts:
        yield "also in conflict", conflict
