"""Perturbed weeks side by side, and the confidence in their count."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from power_examples import battery, craft, run, satellite, week
from scipy.stats import binomtest

from planner.mission.power import Spread
from planner.power.batch import Perturbation, most_broken, perturb, run_batch, share_of
from planner.power.corners import corner_of

BENDS_PCT = 0.02  # of charge: bends of the curve inside an interval are neglected in a batch
ONE = np.ones(1)


def ship(**spread):
    return craft(battery(cells_series=4, cells_parallel=2), spread=Spread.model_validate(spread))


def three_days():
    minute = np.arange(3 * 1440) % 95
    session_w = np.where(minute < 8, 18.0, 0.0)
    return week(np.where(minute < 60, 20.0, 0.0), 6.0 + session_w, session_w=session_w)


def alone(**changes) -> Perturbation:
    plain = {"capacity": ONE, "resistance": ONE, "array": ONE, "load": ONE, "transmitter": ONE}
    return Perturbation(**plain | {"start_soc_pct": 90.0 * ONE} | changes)


def batch_of(perturbation, intervals=None):
    own = satellite(ship())
    return run_batch(own, corner_of(own, "nominal"), intervals or three_days(), perturbation)


def test_an_unperturbed_week_is_the_simulated_one():
    series = run(ship(), three_days())
    batch = batch_of(alone())
    assert batch.soc_min_pct == pytest.approx([series.soc_pct.min()], abs=BENDS_PCT)
    assert batch.soc_end_pct == pytest.approx([series.soc_pct[-1]], abs=BENDS_PCT)


def test_every_factor_does_what_its_name_says():
    week_as_is = batch_of(alone()).soc_min_pct[0]
    for worse in (
        {"capacity": 0.9 * ONE},
        {"resistance": 1.5 * ONE},
        {"array": 0.8 * ONE},
        {"load": 1.2 * ONE},
        {"transmitter": 1.2 * ONE},
        {"start_soc_pct": 80.0 * ONE},
    ):
        assert batch_of(alone(**worse)).soc_min_pct[0] < week_as_is, worse


def test_a_perturbed_array_is_the_simulated_week_with_that_array():
    intervals = three_days()
    weaker = week(0.7 * intervals.array_w, intervals.load_w)
    series = run(ship(), weaker)
    assert batch_of(alone(array=0.7 * ONE)).soc_min_pct == pytest.approx([series.soc_pct.min()], abs=BENDS_PCT)


def test_a_load_that_no_battery_carries_empties_it_and_stays_a_number():
    batch = batch_of(alone(), week(np.zeros(60), np.full(60, 5000.0)))
    assert batch.soc_min_pct.tolist() == [0.0]


def test_perturbations_have_the_stated_spreads_and_repeat_with_the_seed():
    own = satellite(ship(capacity_pct=3.0, load_pct=5.0, array_pct=0.0, samples=4000, seed=7), soc_error_pct=4.0)
    nominal = corner_of(own, "nominal")
    drawn = perturb(own, nominal)
    five_sigma_of_a_sample_of_4000 = 0.06
    assert drawn.capacity.std() == pytest.approx(0.03, rel=five_sigma_of_a_sample_of_4000)
    assert drawn.load.std() == pytest.approx(0.05, rel=five_sigma_of_a_sample_of_4000)
    assert set(drawn.array.tolist()) == {1.0}
    assert np.all(np.abs(drawn.start_soc_pct - 90.0) <= 4.0)
    assert all(np.array_equal(a, b) for a, b in zip(drawn, perturb(own, nominal), strict=True))


def test_the_share_of_broken_weeks_is_counted_against_the_floor():
    own = satellite(ship(samples=200), soc_pct=80.0, soc_error_pct=4.0)
    nominal = corner_of(own, "nominal")
    batch = run_batch(own, nominal, three_days(), perturb(own, nominal))
    floor_pct = float(np.median(batch.soc_min_pct))
    share = batch.broken(floor_pct)
    assert share.value == 0.5
    assert share.low < 0.5 < share.high


@given(st.integers(1, 2000).flatmap(lambda n: st.tuples(st.integers(0, n), st.just(n))))
def test_the_interval_is_wilsons(counts):
    """Against scipy.stats.binomtest(...).proportion_ci(method="wilson")."""
    count, samples = counts
    share = share_of(count, samples)
    expected = binomtest(count, samples).proportion_ci(confidence_level=0.95, method="wilson")
    the_sigma_is_rounded = 1e-6
    assert (share.low, share.high) == pytest.approx((expected.low, expected.high), abs=the_sigma_is_rounded)


def test_no_broken_week_in_a_thousand_is_not_certainty():
    assert share_of(0, 1000).low == 0.0
    count = most_broken(1000, 5.0)
    assert share_of(count, 1000).high <= 0.05 < share_of(count + 1, 1000).high
    assert most_broken(1000, 0.1) == 0
    assert 0.003 < share_of(0, 1000).high < 0.005
