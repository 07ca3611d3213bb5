"""The pass that is open: every tab says what the functions behind it say."""

import pytest
from bench_examples import HIGH, LOW, without_markup

import planner
from planner.notebook.pass_view import TITLES

PNG = b"\x89PNG"


def test_nothing_is_open_at_first(on_bench):
    def act(bench):
        assert "No pass is open: click one" in without_markup(bench.opened.header.value)
        assert bench.opened.place.layout.display == "none"
        assert bench.wishes.drop.disabled

    on_bench(act)


def test_an_open_pass_shows_its_link_and_its_track(on_bench, flown_pass):
    def act(bench):
        bench.desk.look_at(flown_pass.pass_id)
        assert flown_pass.pass_id in without_markup(bench.opened.header.value)
        assert bytes(bench.opened.link.value).startswith(PNG)
        assert not bench.opened.sky.value
        bench.opened.tabs.selected_index = TITLES.index("track over the sky")
        assert bytes(bench.opened.sky.value).startswith(PNG)

    on_bench(act)


def test_the_budget_is_the_link_commands(on_bench, mission, flown_pass):
    def act(bench):
        bench.desk.look_at(flown_pass.pass_id)
        bench.opened.tabs.selected_index = TITLES.index("budget line by line")
        shown = without_markup(bench.opened.budget.value)
        budget = planner.link_budget(mission, flown_pass.station, HIGH, pass_id=flown_pass.pass_id)
        for line in budget.lines:
            assert line.item in shown
            assert line.value is None or f"{line.value:.2f}" in shown

    on_bench(act)


def test_a_station_that_cannot_hear_is_told_in_place(on_bench, plan):
    silent = next(p for p, s in zip(plan.passes["pass_id"], plan.passes["station"], strict=True) if s == "Cape Tern")

    def act(bench):
        bench.desk.look_at(silent, HIGH)
        bench.opened.tabs.selected_index = TITLES.index("budget line by line")
        assert "station does not hear K band" in without_markup(bench.opened.budget.value)

    on_bench(act)


def test_the_energy_answer_is_affords(on_bench, mission, plan, flown_pass):
    async def act(bench):
        bench.desk.look_at(flown_pass.pass_id)
        bench.opened.tabs.selected_index = TITLES.index("can the battery pay?")
        await bench.opened._asking.finished()
        return without_markup(bench.opened.energy.value)

    shown = on_bench(act)
    answer = planner.afford(mission, flown_pass.pass_id, HIGH, plan.contacts)
    assert ("Yes, affordable" if answer.affordable else "No, not affordable") in shown
    for figure in (answer.soc_before_pct, answer.soc_lowest_pct, answer.soc_after_pct):
        assert f"{figure:.1f} %" in shown
    assert f"{answer.longest_s:.0f} s" in shown


@pytest.mark.parametrize("mode", [HIGH, LOW])
def test_the_mode_can_be_chosen(on_bench, flown_pass, mode):
    def act(bench):
        bench.desk.look_at(flown_pass.pass_id)
        bench.opened.mode.value = mode
        assert bench.desk.mode == mode

    on_bench(act)


def test_passes_can_be_stepped_through(on_bench, plan):
    def act(bench):
        ids = list(plan.passes["pass_id"])
        bench.opened.later.click()
        assert bench.desk.pass_id == ids[0]
        bench.opened.later.click()
        assert bench.desk.pass_id == ids[1]
        bench.opened.earlier.click()
        bench.opened.earlier.click()
        assert bench.desk.pass_id == ids[-1]

    on_bench(act)


def test_a_pass_whose_station_goes_off_is_told(on_bench, mission, flown_pass):
    def act(bench):
        bench.desk.look_at(flown_pass.pass_id)
        row = [station.name for station in mission.stations].index(flown_pass.station)
        bench.what_if.stations[row].value = False
        assert "its station is off" in without_markup(bench.opened.header.value)

    on_bench(act)
