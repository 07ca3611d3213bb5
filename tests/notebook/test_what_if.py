"""Fields, switches, wishes and the re-plan, as a user presses them."""

import asyncio

from bench_examples import LOW, without_markup

TURNS = 10  # of the page's loop while the day is planned: some 50 a second are usual, none would be a frozen page


def test_a_wrong_floor_is_refused_at_its_field(on_bench, plan):
    def act(bench):
        field = bench.what_if.fields["soc_floor_pct"]
        field.box.value = 130.0
        told = without_markup(field.message.value)
        assert "soc_floor_pct: must be at most 100, got 130.0" in told
        assert "65 % stays in force" in told
        assert bench.desk.week is plan

    on_bench(act)


def test_every_field_reaches_the_mission(on_bench):
    def act(bench):
        values = {"soc_floor_pct": 50.0, "soc_end_pct": 70.0, "soc_pct": 88.0, "link_margin_db": 2.0,
                  "availability_pct": 98.0}  # fmt: skip
        for key, value in values.items():
            bench.what_if.fields[key].box.value = value
            assert not bench.what_if.fields[key].message.value
        policy, start = bench.desk.mission.policy, bench.desk.mission.satellites[0].start_state
        assert {key: getattr(policy, key, getattr(start, key, None)) for key in values} == values

    on_bench(act)


def test_the_last_station_cannot_be_switched_off(on_bench):
    def act(bench):
        for box in bench.what_if.stations:
            box.value = False
        assert bench.what_if.stations[-1].value
        assert "at least one station must stay on" in without_markup(bench.what_if.message.value)

    on_bench(act)


def test_a_mode_that_is_off_flies_nothing(on_bench):
    def act(bench):
        next(box for box in bench.what_if.modes if box.description == LOW).value = False
        assert LOW not in {session.mode for session in bench.desk.week.flown.sessions}

    on_bench(act)


def test_as_in_the_file_undoes_everything(on_bench, plan, flown_pass):
    def act(bench):
        bench.what_if.fields["soc_floor_pct"].box.value = 50.0
        bench.what_if.stations[0].value = False
        bench.desk.drop_pass(flown_pass.pass_id)
        bench.what_if.reset.click()
        assert bench.desk.week is plan
        assert bench.what_if.fields["soc_floor_pct"].box.value == 65.0
        assert all(box.value for box in bench.what_if.stations)

    on_bench(act)


def test_a_dropped_pass_is_told_with_the_difference(on_bench, flown_pass):
    def act(bench):
        bench.desk.look_at(flown_pass.pass_id)
        bench.wishes.drop.click()
        assert f"dropped: {flown_pass.pass_id}" in without_markup(bench.wishes.told.value)
        told = without_markup(bench.replan.difference.value)
        assert "0 gained, 1 lost, 0 moved" in told
        assert "lowest charge" in told
        assert bench.wishes.drop.disabled
        bench.wishes.open.click()
        assert bench.wishes.told.value == ""

    on_bench(act)


def test_broken_rules_are_told(on_bench):
    def act(bench):
        bench.what_if.fields["soc_floor_pct"].box.value = 79.0
        told = without_markup(bench.replan.difference.value)
        assert "broken" in told
        assert "SoC floor" in told

    on_bench(act)


def test_a_replan_tells_how_long_it_runs_and_what_it_found(on_bench, flown_pass):
    async def act(bench):
        bench.desk.drop_pass(flown_pass.pass_id)
        bench.replan.button.click()
        assert bench.replan.button.disabled
        await asyncio.sleep(0.3)
        told = without_markup(bench.replan.status.value)
        await bench.planned()
        return told, without_markup(bench.replan.status.value), bench.desk.is_planned, bench.replan.button.disabled

    during, after, is_planned, disabled = on_bench(act)
    assert during.startswith("planning for 0 s:")
    assert after.startswith("✔ planned:")
    assert is_planned
    assert not disabled


def test_a_cancelled_replan_ends_and_leaves_the_week(on_bench, plan):
    async def act(bench):
        bench.replan.button.click()
        await asyncio.sleep(0.2)
        bench.replan.cancel.click()
        await bench.planned()
        return without_markup(bench.replan.status.value), bench.desk.week

    told, week = on_bench(act)
    assert told == "cancelled; the week shown is the one before"
    assert week is plan


def test_an_impossible_week_is_told_and_the_one_before_stays(on_bench):
    async def act(bench):
        bench.what_if.fields["soc_pct"].box.value = 66.0
        bench.replan.button.click()
        await bench.planned()
        return without_markup(bench.replan.status.value)

    told = on_bench(act)
    assert told.startswith("✘ no week; the one before is still shown ✘ even without a session:")


def test_the_page_is_alive_while_the_week_is_planned(on_bench, flown_pass):
    async def act(bench):
        bench.replan.button.click()
        bench.desk.look_at(flown_pass.pass_id)
        turns = 0
        while bench.replan.background.is_running:
            await asyncio.sleep(0.02)
            turns += 1
        return bench.desk.pass_id, turns

    opened, turns = on_bench(act)
    assert opened == flown_pass.pass_id
    assert turns > TURNS
