"""The picture takes clicks, zooms to a day, and is redrawn over its page just as it would be drawn anew."""

import numpy as np
import pytest
from bench_examples import without_markup
from matplotlib.backend_bases import MouseEvent

from planner.charts.week import days


def pixels(canvas):
    return np.asarray(canvas.buffer_rgba()).copy()


def click(bench, session, button=1):
    canvas = bench.week.picture.canvas
    lanes = canvas.figure.axes[0]
    row = [station.name for station in bench.desk.mission.stations][::-1].index(session.station)
    contacts = bench.desk.sketch.contacts
    on = days(contacts[contacts["pass_id"] == session.pass_id]["tx_on_utc"])[0]
    x, y = lanes.transData.transform((on, row + 0.4))
    MouseEvent("button_press_event", canvas, x, y, button)._process()


def test_a_click_opens_the_pass(on_bench, plan):
    def act(bench):
        for session in plan.flown.sessions:
            click(bench, session)
            assert bench.desk.pass_id == session.pass_id

    on_bench(act)


def test_only_the_first_button_opens(on_bench, flown_pass):
    def act(bench):
        click(bench, flown_pass, button=3)
        assert bench.desk.pass_id is None

    on_bench(act)


def test_a_dropped_pass_is_redrawn_as_if_drawn_anew(on_bench, flown_pass):
    def act(bench):
        canvas = bench.week.picture.canvas
        before = pixels(canvas)
        bench.desk.drop_pass(flown_pass.pass_id)
        light = pixels(canvas)
        bench.week.turn_page()
        canvas.draw()
        assert (light != before).any()
        assert (light == pixels(canvas)).all()

    on_bench(act)


def test_the_charge_figure_follows(on_bench):
    def act(bench):
        assert "floor 65 %" in without_markup(bench.week.figures.value)
        bench.desk.alter(bench.desk.changes.with_value("policy", "soc_floor_pct", 40.0))
        assert "floor 40 %" in without_markup(bench.week.figures.value)

    on_bench(act)


def test_a_day_is_in_view_when_chosen(on_bench, mission):
    def act(bench):
        bench.week.day.value = bench.week.day.options[1][1]
        begin, end = bench.week.picture.canvas.figure.axes[0].get_xlim()
        assert (begin, end) == pytest.approx(tuple(days([mission.start, mission.end])))

    on_bench(act)


def test_local_time_is_shown_and_a_zone_that_is_none_refused(on_bench):
    def act(bench):
        bench.week.zone.value = "Asia/Tokyo"
        assert "Asia/Tokyo" in bench.week.picture.canvas.figure.axes[-1].get_xlabel()
        bench.week.zone.value = "Atlantis"
        assert "must be a name of the IANA list, such as Europe/Oslo, got 'Atlantis'" in without_markup(
            bench.week.message.value
        )
        assert "UTC" in bench.week.picture.canvas.figure.axes[-1].get_xlabel()

    on_bench(act)


def test_a_station_that_is_off_loses_its_lane(on_bench, mission):
    def act(bench):
        bench.what_if.stations[0].value = False
        labels = [label.get_text() for label in bench.week.picture.canvas.figure.axes[0].get_yticklabels()]
        assert len(labels) == len(mission.stations) - 1
        assert not any(label.startswith(mission.stations[0].name) for label in labels)

    on_bench(act)


def test_every_width_can_be_chosen(on_bench):
    def act(bench):
        for width_px in bench.week.width.options.values():
            bench.week.width.value = width_px
            figure = bench.week.picture.canvas.figure
            assert figure.get_figwidth() * figure.dpi == pytest.approx(width_px)

    on_bench(act)
