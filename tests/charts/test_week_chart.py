"""The week's page: what stands on it is what the plan says."""

from datetime import timedelta
from zoneinfo import ZoneInfo

import matplotlib.dates as mdates
import numpy as np
import pandas as pd
import pytest
from made_up_week import empty, mission_and_plan

from planner.charts.week import MOST_LANES, finding, lanes_of, pass_at, week_figure

ONE_SECOND_D = 1 / 86_400


@pytest.fixture(scope="module")
def mission():
    return mission_and_plan()[0]


@pytest.fixture(scope="module")
def plan():
    return mission_and_plan()[1]


def drawn(figure):
    figure.draw_without_rendering()
    return figure


def legend_texts(figure):
    boxes = [axes.get_legend() for axes in figure.axes if axes.get_legend()] + figure.legends
    return {text.get_text() for box in boxes for text in box.get_texts()}


def test_the_title_says_the_finding(mission, plan):
    figures = plan.summary | {"volume_mbit": 214_300.0, "soc_min_pct": 61.23}
    plan = type(plan)(**vars(plan) | {"summary": figures})
    flown = plan.contacts["pass_id"].nunique()
    told = f"{flown} of {len(plan.passes)} passes planned, 214 Gbit, lowest charge 61.2 %"
    assert finding(mission, plan) == f"{told} (floor {plan.summary['soc_floor_pct']:g} %)"
    risked = mission.with_changes(policy={"floor_risk_pct": 2.0})
    assert finding(risked, plan).endswith(f"(floor {plan.summary['soc_floor_pct']:g} % but for 2 % of weeks)")


def test_small_volumes_are_told_in_megabits(mission, plan):
    plan = type(plan)(**vars(plan) | {"summary": plan.summary | {"volume_mbit": 312.4}})
    assert " 312 Mbit, " in finding(mission, plan)


def test_every_axis_has_a_label_with_its_unit(mission, plan):
    lanes, charge, data = drawn(week_figure(mission, plan)).axes
    assert lanes.get_ylabel() == "station, passes planned of all"
    assert charge.get_ylabel() == "state of charge, %"
    assert data.get_ylabel() == "data aboard, Gbit"
    assert data.get_xlabel() == "time, UTC, 2026"


def test_there_is_a_lane_per_station_with_its_count(mission, plan):
    lanes = drawn(week_figure(mission, plan)).axes[0]
    labels = [label.get_text() for label in lanes.get_yticklabels()]
    assert [label.split("\n")[0] for label in labels] == [station.name for station in mission.stations]
    first = mission.stations[0].name
    flown = plan.contacts[plan.contacts["station"] == first]["pass_id"].nunique()
    assert labels[0] == f"{first}\n{flown} of {(plan.passes['station'] == first).sum()}"


def test_modes_are_told_by_marker_as_well_as_by_colour(mission, plan):
    lanes = drawn(week_figure(mission, plan)).axes[0]
    shown = {(line.get_marker(), line.get_color()) for line in lanes.lines if line.get_marker() in ("^", "o")}
    assert len(shown) == 2
    assert len({marker for marker, _ in shown}) == 2
    marked = sum(len(line.get_xdata()) for line in lanes.lines if line.get_marker() in ("^", "o"))
    assert marked == len(plan.contacts)


def test_of_two_modes_on_one_pass_both_are_seen(mission, plan):
    """As much of each as two millimetres of paper: a bar of the second mode is drawn over one of the first."""
    high, low = (transmitter.mode for transmitter in mission.satellites[0].spacecraft.transmitter)
    first = plan.contacts.iloc[:1]
    both = pd.concat([first.assign(mode=high), first.assign(mode=low)])
    figure = drawn(week_figure(mission, type(plan)(**vars(plan) | {"contacts": both})))
    lanes = figure.axes[0]
    bars = [found for found in lanes.collections if found.get_zorder() == 3]
    (tall, short), mm = ([found.get_paths()[0].get_extents(lanes.transData) for found in bars]), figure.dpi / 25.4
    assert short.height > 2 * mm
    assert tall.y1 - short.y1 > 2 * mm
    assert (tall.x0, tall.x1, tall.y0) == (short.x0, short.x1, short.y0)


def test_floor_end_and_lowest_charge_are_named(mission, plan):
    texts = legend_texts(drawn(week_figure(mission, plan)))
    lowest = plan.battery["soc_worst_pct"].min()
    floor, end = f"{mission.policy.soc_floor_pct:g} %", f"{mission.policy.soc_end_pct:g} %"
    assert {f"floor {floor}", f"at least {end} at the end", f"lowest {lowest:.1f} %", "nominal", "pessimistic"} <= texts
    assert {"station closed", "eclipse", "dropped by hand", "room 400 Gbit"} <= texts


def test_eclipses_are_shaded_where_the_battery_says_so(mission, plan):
    charge = drawn(week_figure(mission, plan)).axes[1]
    [shades] = [found for found in charge.collections if found.get_zorder() == 0.5]
    dark_d = sum(np.ptp(path.vertices[:, 0]) for path in shades.get_paths())
    share = (plan.battery["sunlit"] == "no").mean()
    assert dark_d / 7.0 == pytest.approx(share, abs=1e-3)  # a row of two minutes in a week


def test_a_day_is_zoomed_in_and_told(mission, plan):
    begin = mission.start + timedelta(days=2)
    figure = drawn(week_figure(mission, plan, window=(begin, begin + timedelta(days=1))))
    assert figure.axes[0].get_xlim() == (mdates.date2num(begin), mdates.date2num(begin) + 1)
    assert figure.axes[-1].get_xlabel() == "time, UTC, Wed 09 Dec 2026"


def test_a_local_time_is_named_and_used(mission, plan):
    begin = mission.start + timedelta(days=2)
    zone = ZoneInfo("Asia/Tokyo")
    figure = drawn(week_figure(mission, plan, window=(begin, begin + timedelta(hours=12)), time_zone=zone))
    assert figure.axes[-1].get_xlabel() == "time, Asia/Tokyo, Wed 09 Dec 2026"
    tick, label = figure.axes[-1].get_xticks()[0], figure.axes[-1].get_xticklabels()[0].get_text()
    nine_hours_d = 9 / 24
    assert label == f"{mdates.num2date(tick + nine_hours_d):%H:%M}"


def test_a_pass_is_found_where_it_is_drawn(mission, plan):
    row = plan.passes.iloc[7]
    lane = len(mission.stations) - 1 - [station.name for station in mission.stations].index(row["station"])
    x = mdates.date2num(np.datetime64(row["tca_utc"].removesuffix("Z")))
    assert pass_at(mission, plan, x, lane + 0.5, width=7.0) == row["pass_id"]
    assert pass_at(mission, plan, x, len(mission.stations) + 0.5, width=7.0) is None
    assert pass_at(mission, plan, x, -0.5, width=7.0) is None
    aos = mdates.date2num(np.datetime64(row["aos_utc"].removesuffix("Z")))
    assert pass_at(mission, plan, aos - 60 * ONE_SECOND_D, lane + 0.5, width=7.0) == row["pass_id"]
    assert pass_at(mission, plan, aos - 60 * ONE_SECOND_D, lane + 0.5, width=0.05) is None


def test_the_chosen_pass_is_pointed_out(mission, plan):
    chosen = plan.passes["pass_id"].iloc[3]
    rings = [line for line in week_figure(mission, plan, selected=chosen).axes[0].lines if line.get_markersize() == 24]
    assert len(rings) == 1
    assert not [line for line in week_figure(mission, plan).axes[0].lines if line.get_markersize() == 24]


def test_an_empty_week_is_drawn_and_told(mission, plan):
    figure = drawn(week_figure(mission, empty(plan)))
    assert figure.get_suptitle() == "No pass in the span: no station sees a satellite"


def test_names_that_look_like_formulas_are_only_names(mission, plan):
    odd = "$_{ \\frac 🛰"
    stations = (mission.stations[0].model_copy(update={"name": odd}), *mission.stations[1:])
    renamed = mission.model_copy(update={"stations": stations})
    figure = week_figure(renamed, plan)
    with pytest.warns(UserWarning, match="missing from font"):
        drawn(figure)
    assert figure.axes[0].get_yticklabels()[0].get_text().startswith(odd)


def test_with_many_stations_the_busiest_get_a_lane(mission, plan):
    idle = [mission.stations[0].model_copy(update={"name": f"idle {n}"}) for n in range(30)]
    crowded = mission.model_copy(update={"stations": (*idle, *mission.stations)})
    shown = lanes_of(crowded, plan)
    assert len(shown) == MOST_LANES
    assert shown[-len(mission.stations) :] == list(mission.stations)
    lanes = drawn(week_figure(crowded, plan)).axes[0]
    assert lanes.get_ylabel() == "station, passes planned of all (the busiest 24 of 36)"
    assert lanes.get_ylim() == (0, MOST_LANES)


def test_the_week_fits_an_a4_page(mission, plan):
    assert tuple(week_figure(mission, plan).get_size_inches() * 25.4) == pytest.approx((297, 210), abs=0.5)
