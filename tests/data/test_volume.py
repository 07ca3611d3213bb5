"""What a session delivers, on profiles simple enough to add up by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.data.volume import Profile

A_BIT_OF_A_GIGABIT = 1e-6  # Mbit: double precision


def profile(rate, usable=None, modcod=None, acquisition_s=0.0, change_s=0.0, step_s=10.0, expected=None):
    rate = np.array(rate, dtype=float)
    modcod = np.zeros(len(rate), dtype=int) if modcod is None else np.array(modcod)
    return Profile(
        label="made up",
        names=("slow", "fast"),
        time_s=100.0 + step_s * np.arange(len(rate)),
        usable=np.ones(len(rate), dtype=bool) if usable is None else np.array(usable, dtype=bool),
        rate_mbps=rate,
        expected_rate_mbps=rate if expected is None else np.array(expected, dtype=float),
        margin_db=np.linspace(3.0, 5.0, len(rate)),
        modcod=modcod,
        acquisition_s=acquisition_s,
        change_s=change_s,
    )


def test_a_constant_rate_times_its_time():
    assert profile([4.0] * 6).volume_mbit(100, 150) == 200
    assert profile([4.0] * 6).volume_mbit(113, 127.5) == pytest.approx(58.0)


def test_acquisition_delivers_nothing():
    assert profile([4.0] * 6, acquisition_s=8.0).volume_mbit(100, 150) == pytest.approx(168.0)
    assert profile([4.0] * 6, acquisition_s=80.0).volume_mbit(100, 150) == 0


def test_an_interval_is_worth_its_poorer_end():
    assert profile([2.0, 6.0, 4.0]).volume_mbit(100, 120) == 10 * 2 + 10 * 4


def test_an_interval_with_an_unusable_end_is_worth_nothing():
    shadowed = profile([4.0] * 5, usable=[True, True, False, True, True])
    assert shadowed.volume_mbit(100, 140) == 80
    assert shadowed.windows_s() == [(100.0, 110.0), (130.0, 140.0)]


def test_a_single_usable_sample_is_no_window():
    assert profile([4.0] * 3, usable=[False, True, False]).windows_s() == []
    assert profile([4.0] * 3, usable=[True, True, True]).windows_s() == [(100.0, 120.0)]


def test_a_change_of_modcod_costs_its_time():
    steady, changing = profile([4.0] * 4), profile([4.0] * 4, modcod=[0, 0, 1, 1], change_s=2.5)
    assert steady.volume_mbit(100, 130) - changing.volume_mbit(100, 130) == pytest.approx(4.0 * 2.5)


def test_a_change_longer_than_its_interval_takes_the_interval_and_no_more():
    assert profile([4.0] * 4, modcod=[0, 0, 1, 1], change_s=25.0).volume_mbit(100, 130) == pytest.approx(80.0)


def test_segments_say_which_modcod_from_when():
    changing = profile([4.0] * 5, modcod=[0, 0, 1, 1, 0])
    assert changing.segments(104.0, 140.0) == [("slow", 104.0), ("fast", 120.0)]
    assert changing.segments(104.0, 119.0) == [("slow", 104.0)]
    assert profile([4.0] * 3, modcod=[-1, 0, 0]).segments(100.0, 120.0) == [("slow", 110.0)]


def test_the_lowest_margin_is_taken_over_the_transmission_with_its_ends():
    assert profile([4.0] * 5).lowest_margin_db(105.0, 140.0) == pytest.approx(3.25)


def test_expected_volume_has_its_own_rate():
    both = profile([4.0] * 3, expected=[5.0] * 3)
    assert (both.volume_mbit(100, 120), both.expected_volume_mbit(100, 120)) == (80, 100)


def test_nothing_is_delivered_outside_the_samples():
    assert profile([4.0] * 3).volume_mbit(0, 500) == 80
    edges_s, rate = profile([4.0] * 3).delivery(50, 200)
    assert float(rate @ np.diff(edges_s)) == pytest.approx(80.0)


profiles = st.builds(
    lambda rows, acquisition_s, change_s: profile(
        [r for r, *_ in rows], [u for _, u, _ in rows], [m for *_, m in rows], acquisition_s, change_s
    ),
    st.lists(st.tuples(st.floats(0, 100), st.booleans(), st.sampled_from([-1, 0, 1])), min_size=2, max_size=12),
    st.floats(0, 30),
    st.floats(0, 20),
)
spans = st.tuples(st.floats(90, 230), st.floats(90, 230)).map(sorted).filter(lambda span: span[1] - span[0] > 1e-3)


@given(profiles, spans)
def test_the_recorder_is_offered_exactly_the_volume(made, span):
    edges_s, rate = made.delivery(*span)
    assert float(rate @ np.diff(edges_s)) == pytest.approx(made.volume_mbit(*span), abs=A_BIT_OF_A_GIGABIT)
    assert np.all(np.diff(edges_s) >= 0)


@given(profiles, spans, st.floats(0, 20))
def test_a_later_stop_never_delivers_less(made, span, more_s):
    assert made.volume_mbit(span[0], span[1] + more_s) >= made.volume_mbit(*span) - A_BIT_OF_A_GIGABIT


@given(profiles, spans)
def test_a_volume_is_never_above_the_fastest_rate_for_the_time(made, span):
    assert 0 <= made.volume_mbit(*span) <= made.rate_mbps.max() * (span[1] - span[0]) + A_BIT_OF_A_GIGABIT
