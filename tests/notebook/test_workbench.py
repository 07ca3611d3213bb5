"""The page as a whole: what it says of missions that cannot be worked with, and of weeks in which nothing happens."""

import asyncio

import pytest
from bench_examples import HIGH, LOW, without_markup

import planner
from planner.notebook import find_file, open_workbench
from planner.notebook.cautions import caution_box
from planner.notebook.variants import larger_array, larger_battery, shorter, with_station, without_station
from planner.notebook.workbench import Refused, Workbench
from planner.schedule.flown import Flown
from planner.schedule.result import CAUTIONS, GivenWeek, prepared


def test_a_mission_with_an_error_is_told_in_place(mission_folder):
    file = mission_folder / "missions" / "marshlight.toml"
    file.write_text(file.read_text().replace("soc_floor_pct = ", "soc_flor_pct = "))
    page = open_workbench(file)
    assert isinstance(page, Refused)
    told = without_markup(page.widget.value)
    assert 'policy.soc_flor_pct: unknown key; did you mean "soc_floor_pct"?' in told
    assert "Traceback" not in told


def test_a_missing_mission_is_told_in_place(tmp_path):
    assert "no such file" in without_markup(open_workbench(tmp_path / "none.toml").widget.value)


def opened_and_planned(mission):
    """(figures, status, header, title of the picture) of a workbench after its first plan."""

    async def main():
        bench = Workbench(mission)
        bench.week.picture.canvas.draw()
        await bench.planned()
        bench.week.picture.canvas.draw()
        bench.opened.later.click()
        title = bench.week.picture.canvas.figure.texts[0].get_text()
        pieces = (bench.week.figures, bench.replan.status, bench.opened.header)
        return (*(without_markup(piece.value) for piece in pieces), title)

    return asyncio.run(main())


def test_a_satellite_without_passes_is_told(mission):
    blind = tuple(station.model_copy(update={"min_elevation_deg": 89.9}) for station in mission.stations)
    policy = mission.policy.model_copy(update={"daily_contact_modes": ()})
    quiet = mission.model_copy(update={"stations": blind, "policy": policy})
    figures, status, header, title = opened_and_planned(quiet)
    assert title == "No pass in the span: no station sees a satellite"
    assert "contacts 0 on 0 passes" in figures
    assert "There is no pass in the span" in header
    assert "planned: 0 Mbit" in status


def test_an_empty_week_is_told(mission):
    policy = mission.policy.model_copy(update={"daily_contact_modes": (), "link_margin_db": 60.0})
    figures, status, header, title = opened_and_planned(mission.model_copy(update={"policy": policy}))
    assert title.startswith("0 of ")
    assert "contacts 0 on" in figures
    assert "planned: 0 Mbit" in status
    assert "unusable" in header


def test_no_possible_week_is_told(mission):
    starved = mission.with_changes(start_state={"soc_pct": 66.0})
    _, status, _, title = opened_and_planned(starved)
    assert status.startswith("✘ no week ✘ even without a session:")
    assert title.startswith("0 of ")


def test_every_caution_and_the_age_of_the_elements_are_in_view(mission):
    told = without_markup(caution_box(mission).value)
    assert all(caution in told for caution in CAUTIONS)
    assert "MARSHLIGHT-1: elements 0.2 days old at the start; the plan counts on new ones every 1 days." in told


def test_many_satellites_are_told_by_the_oldest_elements(mission):
    fleet = tuple(mission.satellites[0].model_copy(update={"name": f"SAT-{k}"}) for k in range(6))
    told = without_markup(caution_box(mission.model_copy(update={"satellites": fleet})).value)
    assert "6 satellites, the oldest elements (SAT-0) 0.2 days old at the start" in told


def test_files_are_found_from_a_folder_below(mission_folder, monkeypatch):
    (mission_folder / "notebooks").mkdir()
    for folder in (mission_folder, mission_folder / "notebooks"):
        monkeypatch.chdir(folder)
        assert find_file("missions/marshlight.toml") == mission_folder / "missions" / "marshlight.toml"
    assert str(find_file("missions/none.toml")) == "missions/none.toml"


def test_variants_change_what_they_say_and_nothing_else(mission):
    assert shorter(mission, 0.5).days == 0.5
    assert shorter(mission, 9.0).days == mission.days
    more = with_station(mission, "Polar site", like="Vardholm", latitude_deg=78.0, longitude_deg=20.0)
    assert without_station(more, "Polar site") == mission
    with pytest.raises(ValueError, match="latitude_deg"):
        with_station(mission, "Nowhere", like="Vardholm", latitude_deg=95.0, longitude_deg=0.0)
    battery = mission.satellites[0].spacecraft.battery
    assert larger_battery(mission, 1.2).satellites[0].spacecraft.battery.cell_capacity_ah == pytest.approx(
        1.2 * battery.cell_capacity_ah
    )
    assert larger_array(larger_array(mission, 2.0), 0.5) == mission


def test_a_plan_may_be_given(on_bench, plan):
    assert on_bench(lambda bench: bench.desk.week) is plan
    assert isinstance(plan, planner.WeekPlan)


def test_of_several_satellites_one_is_chosen(mission, on_bench):
    one = mission.satellites[0]
    low = tuple(t.model_copy(update={"together_with": ()}) for t in one.spacecraft.transmitter if t.mode == LOW)
    craft = one.spacecraft.model_copy(update={"transmitter": low})
    fleet = mission.model_copy(
        update={"satellites": (one, one.model_copy(update={"name": "TWIN", "spacecraft": craft}))}
    )

    def act(bench):
        assert bench.week.satellite.layout.display is None
        bench.week.satellite.value = "TWIN"
        assert bench.week.picture.canvas.figure.axes[1].get_ylabel().startswith("TWIN")
        passes = bench.desk.week.passes.set_index("satellite")["pass_id"]
        bench.desk.look_at(passes["TWIN"].iloc[0])
        assert bench.desk.modes == [bench.desk.mode] == [LOW]
        assert bench.opened.mode.options == (LOW,)
        bench.desk.look_at(passes[one.name].iloc[0])
        assert bench.opened.mode.options == (HIGH, LOW)

    on_bench(act, fleet, GivenWeek(Flown(prepared(fleet), ())))


def test_a_mode_that_goes_off_is_no_longer_looked_at(on_bench, flown_pass):
    def act(bench):
        bench.desk.look_at(flown_pass.pass_id, HIGH)
        next(box for box in bench.what_if.modes if box.description == HIGH).value = False
        assert (bench.desk.mode, bench.opened.mode.value) == (LOW, LOW)

    on_bench(act)
