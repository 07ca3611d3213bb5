"""A satellite on its orbit with sessions: phases, what they cost, and the whole week."""

import numpy as np
import pytest
from power_examples import battery, craft, mission, power_of, transmitter

from planner.mission.contacts import Session
from planner.mission.pointing import Law, Pointing
from planner.mission.power import Load, Panel
from planner.power.balance import SatellitePower

A_MICROWATT_HOUR = 1e-6
RADIO = {"dc_power_w": 17.0, "warmup_s": 60.0, "warmup_power_w": 6.0, "cooldown_s": 200.0, "cooldown_power_w": 1.0}


IN_SUNLIGHT_S = 16_000.0  # half an hour of it before and after


def contact(tx_on_s=IN_SUNLIGHT_S, length_s=480.0, mode="K", satellite="TEST-1") -> Session:
    return Session(tx_on_s, tx_on_s + length_s, satellite, "Reed Point", mode, f"P{tx_on_s:.0f}")


@pytest.fixture(scope="module")
def power() -> SatellitePower:
    ship = craft(
        battery(cells_series=4, cells_parallel=2),
        transmitter=(
            transmitter(**RADIO, together_with=("S",)),
            transmitter(mode="S", dc_power_w=6.0, session_law=Law(law="nadir")),
        ),
        panel=(
            Panel(name="top", normal=(0.0, 0.0, -1.0), cell_area_m2=0.06),
            Panel(name="side", normal=(0.0, 1.0, 0.0), cell_area_m2=0.02),
        ),
        load=(Load(name="bus", power_w=4.0), Load(name="camera", power_w=2.0, when="sunlit")),
        pointing=Pointing(
            session=Law(law="station", second_axis=(0.0, 1.0, 0.0), second_target="sun"), slew_power_w=1.0
        ),
    )
    return power_of(mission(ship))


def phases_of(draw) -> list[str]:
    return [name for k, name in enumerate(draw.phase) if k == 0 or name != draw.phase[k - 1]]


def test_a_session_runs_from_the_first_slew_to_the_last(power):
    draw = power.session_draw(contact())
    assert phases_of(draw) in (
        ["slew", "warm-up", "transmission", "cool-down"],
        ["slew", "warm-up", "transmission", "cool-down", "slew"],
        ["warm-up", "transmission", "cool-down"],
    )
    on_air = draw.phase == "transmission"
    assert draw.edges_s[:-1][on_air][0] == IN_SUNLIGHT_S
    assert draw.edges_s[1:][on_air][-1] == IN_SUNLIGHT_S + 480
    assert draw.edges_s[:-1][draw.phase == "warm-up"][0] == IN_SUNLIGHT_S - 60
    assert draw.edges_s[1:][draw.phase == "cool-down"][-1] == IN_SUNLIGHT_S + 680


def test_a_session_pays_for_its_own_loads(power):
    """17 W for 8 min, 6 W for 60 s and 1 W for 200 s through 0.95, and 1 W for the turns."""
    draw = power.session_draw(contact(), "nominal")
    radio_wh = (17.0 * 480 + 6.0 * 60 + 1.0 * 200) / 0.95 / 3600
    two_turns_of_at_most_190_s_wh = 2 * 190 / 3600
    assert radio_wh < draw.own_wh < radio_wh + two_turns_of_at_most_190_s_wh


def test_a_session_pays_for_the_sun_it_turns_away_from(power):
    """The satellite that keeps looking down loses nothing to pointing."""
    down, turned = power.session_draw(contact(mode="S")), power.session_draw(contact())
    assert down.added_wh == pytest.approx(down.own_wh, abs=A_MICROWATT_HOUR)
    assert turned.added_wh != pytest.approx(turned.own_wh, abs=1e-3)


def test_before_it_turns_a_session_has_the_panels_of_the_idle_satellite(power):
    draw = power.session_draw(contact())
    lost_w = draw.terminal_w - draw.idle_terminal_w - draw.own_w
    assert abs(lost_w[0]) < abs(lost_w).max()


def test_draws_asked_together_are_those_asked_one_by_one(power):
    contacts = [contact(k * 6000.0 + 500) for k in range(10)]
    together = power.session_draws(contacts)
    for one, draw in zip(contacts, together, strict=True):
        power._courses.clear()
        alone = power.session_draw(one)
        assert np.array_equal(alone.edges_s, draw.edges_s)
        assert alone.terminal_w == pytest.approx(draw.terminal_w)


def test_the_simulated_terminals_see_what_the_draw_says(power):
    draw = power.session_draw(contact())
    series = power.simulate([contact()])
    middle_s = 0.5 * (draw.edges_s[1:] + draw.edges_s[:-1])
    rows = np.searchsorted(series.time_s, middle_s, side="right") - 1
    a_microwatt = 1e-6
    assert (series.load_w - series.array_w)[rows] == pytest.approx(draw.terminal_w, abs=a_microwatt)


def test_outside_a_session_the_week_is_the_idle_one(power):
    idle, series = power.simulate([]), power.simulate([contact()])
    before = series.time_s < IN_SUNLIGHT_S - 600
    assert series.soc_pct[before] == pytest.approx(idle.soc_at_pct(series.time_s[before]), abs=1e-9)


def test_the_books_of_a_simulated_day_close_to_a_joule(power):
    series = power.simulate([contact(k * 6000.0 + 500) for k in range(14)])
    a_joule_a_day = 1.0
    assert abs(series.books().open_j) < a_joule_a_day


def test_the_order_of_sessions_does_not_matter(power):
    contacts = [contact(k * 6000.0 + 500) for k in range(5)]
    assert np.array_equal(power.simulate(contacts).soc_pct, power.simulate(contacts[::-1]).soc_pct)


def test_a_session_more_never_leaves_more_charge(power):
    """Where the attitude stays: a session that turns towards the Sun may well pay."""
    some = [contact(k * 9000.0 + 500, mode="S") for k in range(5)]
    fewer, more = power.simulate(some[:-1]), power.simulate(some)
    other_cuts_of_the_taper_pct = 1e-3
    common_s, at_more, at_fewer = np.intersect1d(more.time_s, fewer.time_s, return_indices=True)
    assert len(common_s) > 1440
    assert np.all(more.soc_pct[at_more] <= fewer.soc_pct[at_fewer] + other_cuts_of_the_taper_pct)
    assert more.lowest(36_500, 37_000)[1] < fewer.lowest(36_500, 37_000)[1] - 0.1


def test_overlapping_sessions_add_their_loads_and_keep_the_first_attitude(power):
    wide, inner = contact(IN_SUNLIGHT_S, 480.0, "K"), contact(IN_SUNLIGHT_S + 100, 100.0, "S")
    both, first = power.simulate([wide, inner], "nominal"), power.simulate([wide], "nominal")
    time_s = IN_SUNLIGHT_S + 150
    row, row_of_first = (int(np.searchsorted(one.time_s, time_s, side="right")) - 1 for one in (both, first))
    assert both.load_w[row] - first.load_w[row_of_first] == pytest.approx(6.0 / 0.95)
    assert both.array_w[row] == pytest.approx(first.array_w[row_of_first])
    assert both.attitude[row] == "station"


def test_attitudes_are_told_by_name(power):
    series = power.simulate([contact()])
    names = [name for k, name in enumerate(series.attitude) if k == 0 or name != series.attitude[k - 1]]
    assert names == ["nadir", "slew", "station", "slew", "nadir"]


def test_a_session_at_the_end_of_the_span_is_cut_there(power):
    draw = power.session_draw(contact(86_100.0, 299.0))
    assert draw.edges_s[-1] == 86_400.0
    assert power.simulate([contact(86_100.0, 299.0)]).time_s[-1] == 86_400.0


def test_the_pessimistic_corner_is_below_the_nominal_one(power):
    contacts = [contact(k * 6000.0 + 500) for k in range(10)]
    nominal, pessimistic = (power.simulate(contacts, corner) for corner in ("nominal", "pessimistic"))
    assert np.array_equal(nominal.time_s, pessimistic.time_s)
    assert np.all(pessimistic.soc_pct < nominal.soc_pct)
    assert pessimistic.lowest_cell_v.min() < nominal.lowest_cell_v.min()


def test_pack_figures(power):
    """8 cells of 2.5 Ah at 3.2 V (common practice for LiFePO4) are 64 Wh; the pessimistic pack has 0.85 of it."""
    printing = 0.03
    assert power.capacity_wh("nominal") == pytest.approx(64.0, rel=printing)
    assert power.capacity_wh("pessimistic") == pytest.approx(0.85 * power.capacity_wh("nominal"))
    assert power.stored_wh(power.corner().start_soc_pct) == pytest.approx(power.simulate([]).stored_wh[0])
    assert power.pack_open_circuit_v(50.0) == pytest.approx(4 * 3.266, abs=1e-3)
    assert power.pack_resistance_ohm(50.0, 25.0, "nominal") == pytest.approx(0.014 * 4 / 2)


@pytest.mark.parametrize(("idle", "in_session"), [("tumbling", "station"), ("nadir", "tumbling"), ("sun", "station")])
def test_every_pair_of_laws_can_follow_one_another(idle, in_session):
    laws = {"idle": Law(law=idle), "session": Law(law=in_session)}
    series = power_of(mission(craft(pointing=Pointing(**laws)), days=0.3)).simulate([contact()])
    assert set(series.attitude) == {idle, "slew", in_session}
    assert np.all(np.isfinite(series.array_w))


@pytest.mark.parametrize("tx_on_s", [-3000.0, 90_000.0])
def test_a_session_outside_the_span_changes_nothing(power, tx_on_s):
    assert power.session_draw(contact(tx_on_s)).own_wh == 0.0
    assert np.array_equal(power.simulate([contact(tx_on_s)]).soc_pct, power.simulate([]).soc_pct)


def test_a_session_of_another_satellite_is_refused(power):
    with pytest.raises(ValueError, match="sessions must be of TEST-1, got OTHER"):
        power.simulate([contact(satellite="OTHER")])


def test_an_unknown_satellite_is_a_key_error(power):
    with pytest.raises(KeyError):
        SatellitePower(power.mission, None, "NOBODY")
