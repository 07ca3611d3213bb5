import pytest
from hypothesis import given
from hypothesis import strategies as st

from planner.link.polarisation import linear_mismatch_loss_db, mismatch_loss_db, polarisation_loss_db

axial_ratios = st.floats(0, 30)
HANDBOOK_ROUNDING_DB = 0.006  # the nomogram's values have two decimals
HALF_THE_POWER_DB = 3.0103


def test_perfect_circles_of_one_sense_lose_nothing():
    assert mismatch_loss_db(0.0, 0.0) == 0.0
    assert mismatch_loss_db(3.0, 0.0) == pytest.approx(0.13, abs=HANDBOOK_ROUNDING_DB)


def test_equal_ellipses_crossed_by_hand():
    # r = 2 (6.0206 dB) at both ends: share 1/2 + (16 - 9) / 50 = 0.64
    assert mismatch_loss_db(6.0206, 6.0206) == pytest.approx(1.938, abs=HANDBOOK_ROUNDING_DB)


@given(axial_ratios, axial_ratios)
def test_the_mismatch_is_symmetric_and_grows_with_either_ratio(a, b):
    assert mismatch_loss_db(a, b) == pytest.approx(mismatch_loss_db(b, a), abs=1e-9)
    assert mismatch_loss_db(a + 0.5, b) >= mismatch_loss_db(a, b) - 1e-9


def test_linear_to_circular_costs_half_the_power():
    assert linear_mismatch_loss_db(0.0) == pytest.approx(HALF_THE_POWER_DB, abs=1e-4)
    assert polarisation_loss_db("RHCP", 0.0, ("horizontal",), 20.0) == pytest.approx(HALF_THE_POWER_DB, abs=1e-4)
    assert polarisation_loss_db("vertical", 20.0, ("LHCP",), 0.0) == pytest.approx(HALF_THE_POWER_DB, abs=1e-4)


@given(axial_ratios)
def test_a_linear_end_is_the_limit_of_a_flat_ellipse(ratio_db):
    assert linear_mismatch_loss_db(ratio_db) == pytest.approx(mismatch_loss_db(ratio_db, 160.0), abs=1e-4)


def test_what_is_orthogonal_is_not_heard():
    assert polarisation_loss_db("RHCP", 1.0, ("LHCP",), 1.0) is None
    assert polarisation_loss_db("horizontal", 1.0, ("vertical",), 1.0) is None


def test_the_best_of_the_stations_polarisations_is_taken():
    assert polarisation_loss_db("RHCP", 1.0, ("LHCP", "RHCP"), 1.0) == mismatch_loss_db(1.0, 1.0)
    assert polarisation_loss_db("vertical", 1.0, ("RHCP", "vertical"), 1.0) == 0.0
